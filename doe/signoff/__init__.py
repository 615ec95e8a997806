"""Does the file say what was meant: a layout read back and its light computed anew.

Shares no optics with the designer, and no code with the exporter.
"""
