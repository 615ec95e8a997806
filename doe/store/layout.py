"""Names inside a record, its version, and the checksummed block in front of the HDF5 image."""

import hashlib
import json

FORMAT = "doe record"
VERSION = 1
BLOCK = 512  # bytes of the HDF5 user block
LARGEST = 4_000_000_000  # bytes of a record this tool opens

SCORES = (
    "efficiency",
    "efficiency_with_surfaces",
    "uniformity_error",
    "rms_error",
    "zero_order",
    "zero_order_to_mean",
    "worst_stray_to_mean",
    "stray",
    "hottest_to_mean",
    "position_error",
)


def head(image: bytes) -> bytes:
    """The user block of an image: a JSON line with version, size and SHA-256 of the rest."""
    rest = image[BLOCK:]
    facts = {
        "format": FORMAT,
        "version": VERSION,
        "bytes": len(rest),
        "sha256": hashlib.sha256(rest).hexdigest(),
    }
    return (json.dumps(facts) + "\n").encode().ljust(BLOCK, b"\0")
