"""How much memory a render takes, said before it starts."""

from __future__ import annotations

from skyoptics.errors import ResourceError
from skyoptics.optics.bins import Bins

SHARE = 0.7
"""Share of the free memory that a job may take."""
BLOCK = 1 << 15
"""Pixels looked at in one go by one thread."""
_PROGRAM = 350e6
"""Interpreter, libraries and compiled kernels [byte], measured."""
_TABLE = 60e6
"""One stored table and its average over the disc [byte], measured with the default bins."""


def predict(shape: tuple[int, int], bins: Bins, sheets: int, threads: int, data: bool) -> int:
    """Return the largest memory that a render will hold [byte].

    Parameters
    ----------
    shape : tuple of int
        Rows, columns.
    bins : Bins
        Wavelength axis.
    sheets : int
        Kinds of particle.
    threads : int
        Blocks in work at once.
    data : bool
        Whether the radiance of the whole picture is kept (float32), with its directions (float64).
    """
    pixels = shape[0] * shape[1]
    picture = pixels * (12 + 12 + 8)  # XYZ and linear RGB in float32, encoded lines
    radiance = pixels * (4 * len(bins) + 2 * 8) * 2 if data else 0  # the writer copies what it compresses
    blocks = threads * max(BLOCK, shape[1]) * len(bins) * 8 * 7
    return int(_PROGRAM + sheets * _TABLE + picture + radiance + blocks)


def check(need: int) -> None:
    """Refuse a job that needs more than `SHARE` of the free memory.

    Raises
    ------
    ResourceError
        With both figures and what to do.
    """
    import psutil

    free = psutil.virtual_memory().available
    if need > SHARE * free:
        raise ResourceError(
            f"this render needs about {need / 1e9:.1f} GB of memory; {free / 1e9:.1f} GB are free and at most "
            f"{SHARE:.0%} of that may be taken: make the picture smaller (camera.width_px), take fewer wavelengths "
            "(picture.bin_nm), or leave out --data"
        )
