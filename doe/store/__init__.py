"""Records and checkpoints in and out."""
