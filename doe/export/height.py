"""The relief as a TIFF picture of heights."""

import io

import numpy as np
from PIL import Image, TiffImagePlugin

from doe.config import derived
from doe.result import Result

NAME = "height.tif"
DESCRIPTION, X_RESOLUTION, Y_RESOLUTION, RESOLUTION_UNIT = 270, 282, 283, 296  # TIFF 6.0 tags
CENTIMETRE = 3  # of the resolution unit tag
PER_METRE = 100  # centimetres


def height_tiff(result: Result) -> bytes:
    """One period of heights [m] as float32; picture row 0 is the largest y.

    The pixel size stands in the resolution tags (pixels per centimetre) and, exactly, in the text.
    Source: TIFF 6.0 (from memory).
    """
    picture = Image.fromarray(np.flipud(result.mask.height).astype(np.float32))
    pitch_y, pitch_x = derived.pixel_pitch(result.config)
    tags = TiffImagePlugin.ImageFileDirectory_v2()
    tags[DESCRIPTION] = (
        f"height in m above the deepest place; pixel pitch y {pitch_y!r} m, x {pitch_x!r} m; "
        f"row 0 is the largest y"
    )
    tags[X_RESOLUTION] = 1 / (pitch_x * PER_METRE)
    tags[Y_RESOLUTION] = 1 / (pitch_y * PER_METRE)
    tags[RESOLUTION_UNIT] = CENTIMETRE
    memory = io.BytesIO()
    picture.save(memory, format="TIFF", tiffinfo=tags)
    return memory.getvalue()
