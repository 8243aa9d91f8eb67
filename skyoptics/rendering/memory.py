"""How much memory a render takes, said before it starts."""

from __future__ import annotations

from collections.abc import Iterator

from skyoptics.errors import ResourceError
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.expose import GROUP_CELLS
from skyoptics.rendering.further import side_of, slab_of
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.scatter import is_table

SHARE = 0.7
"""Share of the free memory that a job may take."""
BLOCK = 1 << 15
"""Pixels looked at in one go by one thread."""
_PROGRAM = 220e6
"""Interpreter, libraries and compiled kernels [byte], measured."""
_FLAT_TABLE = 250e6
"""One table of flattened drops while it is made [byte], measured with the default bins."""
_NAMES = 20
"""Named arcs that crystals of one law may make, and a reserve."""
_LAYER_BATCH = 150e6
"""Exit lists of a batch through a slab, and the batch before it [byte]."""
_TABLE = 60e6
"""One stored table and its average over the disc [byte], measured with the default bins."""


def predict(job: Job, threads: int, data: bool, only: bool = False) -> int:
    """Return the largest memory that a render will hold [byte].

    Parameters
    ----------
    job : Job
        Grid, wavelengths, sheets.
    threads : int
        Blocks and batches in work at once.
    data : bool
        Whether the radiance of the whole picture is kept (float32), with its directions (float64).
    only : bool
        Whether the light of one named arc is traced beside the whole.
    """
    rows, columns = job.directions.shape
    pixels, bands = rows * columns, len(job.bins)
    oriented = sum(isinstance(sheet, CrystalSheet) and not is_table(sheet) for sheet in job.sheets)
    films = oriented * (1 if job.water is None else 2)  # one more for what the water mirrors
    picture = pixels * (12 + 12)  # XYZ and linear RGB in float32
    radiance = pixels * (4 * bands + 2 * 8) if data else 0
    blocks = threads * max(BLOCK, columns) * bands * 8 * 4
    components = 4 if job.stokes else 1
    planes = films * len(job.sources) * pixels * (4 * bands * components + 8) * (2 if only else 1)
    cells = min(pixels, GROUP_CELLS**2)
    planes += films * len(job.sources) * cells * 8 * bands * _NAMES
    blocks *= components
    noise = pixels * 8 * 17 if films else 0
    flying = 3 * threads * pixels * 4 * components if films else 0
    if slab_of(job):
        side = side_of(job.directions)
        cells = -(-rows // side) * -(-columns // side)
        planes += len(job.sources) * cells * components * (8 + 4) * bands + threads * int(_LAYER_BATCH)
    flat = sum(isinstance(sheet, DropSheet) and not is_table(sheet) for sheet in job.sheets) * len(job.sources)
    tables = (len(job.sheets) - oriented) * _TABLE + flat * _FLAT_TABLE
    return int(_PROGRAM + tables + picture + radiance + blocks + planes + noise + flying)


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


def blocks(shape: tuple[int, int]) -> Iterator[slice]:
    """Yield slices of rows that hold about `BLOCK` pixels each, the same for any number of threads."""
    step = max(1, BLOCK // shape[1])
    for start in range(0, shape[0], step):
        yield slice(start, min(start + step, shape[0]))
