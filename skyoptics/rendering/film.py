"""Planes of traced light: the running sum of batches on the picture's grid, with its error, stored and taken up again.

A batch is (spectral bin, k); k runs outside, bins inside. Its plane depends on the trace key, the bin and k alone. Planes
are added in that order, so the sum has the same bits for any number of workers and for a run that was stopped and resumed;
counts are kept by bin, so a stop loses the batches in flight and no more.

The error needs no plane of its own for each bin: batches of different bins are independent, so the variance of luminance is
the sum of the bins' variances. Luminance here has the weights of the eye under the sun above the air (`reference`), which
do not change with what changes a picture without tracing again; relative errors carry over to the displayed luminance.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from uuid import uuid4

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.directions import Directions
from skyoptics.kernels.film import add_plane, luminance_and_variance
from skyoptics.optics.source import Source
from skyoptics.rendering.store import find_arrays, make_room
from skyoptics.rendering.store import folder as store_folder
from skyoptics.units import Float32Array, FloatArray

FORMAT = 3
MOST_STORED = 8e9
"""Films are kept up to this size together [byte]; the ones not used for longest go first."""


@dataclass(eq=False)
class Film:
    """What has been traced of one sheet.

    Parameters
    ----------
    key : str
        Trace key.
    rays : ndarray, shape (nλ,)
        Rays of a batch of each bin.
    reference : ndarray, shape (nλ,)
        Weights of the luminance whose error is kept.
    sums : ndarray, shape (nλ, ny, nx) or (nλ, ny, nx, 4)
        Power of all batches, or its Stokes vector.
    squares : ndarray, shape (ny, nx)
        Σ over batches of (reference · power ÷ 2 rays)².
    counts : ndarray, shape (nλ,)
        Batches in the sums.
    tally : dict
        Sums of what became of the rays.
    names : tuple of str
        Named arcs told apart; empty for none.
    groups : ndarray, shape (nλ, names, rows, columns), or None
        Power of all batches by name, in cells of the coarse grid.
    reused : int
        Batches that were found in the store.
    """

    key: str
    rays: Any
    reference: FloatArray
    sums: Float32Array
    squares: FloatArray
    counts: Any
    tally: dict[str, float] = field(default_factory=dict)
    names: tuple[str, ...] = ()
    groups: FloatArray | None = None
    reused: int = 0
    whole: bool = True
    """False while a batch is half added."""

    @classmethod
    def blank(
        cls,
        key: str,
        rays: Any,
        reference: FloatArray,
        shape: tuple[int, ...],
        names: tuple[str, ...] = (),
        cells: tuple[int, int] = (0, 0),
    ) -> Film:
        """Return a film without light."""
        bands = len(rays)
        return cls(
            key,
            np.asarray(rays),
            reference,
            np.zeros((bands, *shape), dtype=np.float32),
            np.zeros(shape[:2]),
            np.zeros(bands, dtype=np.int64),
            names=names,
            groups=np.zeros((bands, len(names), *cells)) if names else None,
        )

    def add(self, band: int, plane: Float32Array, tally: dict[str, float], groups: Any = None) -> None:
        """Add the next batch of a bin."""
        self.whole = False
        weight = float(self.reference[band] / (2.0 * self.rays[band]))
        stride = self.sums[band].size // self.squares.size
        add_plane(self.sums[band].reshape(-1), self.squares.reshape(-1), plane.reshape(-1), weight, stride)
        if self.groups is not None:
            self.groups[band] += groups
        self.counts[band] += 1
        for name, value in tally.items():
            self.tally[name] = self.tally.get(name, 0.0) + value
        self.whole = True

    def missing(self, rounds: int) -> Iterator[tuple[int, int]]:
        """Yield (bin, k) of the batches that are missing up to a number of rounds, in the order they are added."""
        for k in range(int(self.counts.min()), rounds):
            for band in range(len(self.counts)):
                if self.counts[band] <= k:
                    yield band, k

    @property
    def rounds(self) -> int:
        """Whole rounds in the sums."""
        return int(self.counts.min())

    @property
    def traced_rays(self) -> int:
        """Rays in the sums."""
        return int((self.counts * self.rays).sum())

    def scale(self) -> FloatArray:
        """Return what turns sums into phase · solid angle, shape (nλ,)."""
        return 1.0 / (2.0 * self.rays * np.maximum(self.counts, 1))

    def statistics(self) -> tuple[FloatArray, FloatArray]:
        """Return mean and variance of the mean of reference luminance · solid angle, both (ny, nx)."""
        shape = self.squares.shape
        luminance, variance = np.empty(shape), np.empty(shape)
        luminance_and_variance(
            self.sums.reshape(len(self.rays), -1, self.sums[0].size // self.squares.size),
            self.squares.reshape(-1),
            self.reference * self.scale(),
            float(self.counts.mean()) if self.rounds > 1 else 1.0,
            luminance.reshape(-1),
            variance.reshape(-1),
        )
        return luminance, variance


@dataclass(frozen=True, eq=False)
class FilmScatterer:
    """A scatterer that is known on the picture's own grid alone: a film, read."""

    film: Film
    extinction_towards: Callable[[FloatArray], FloatArray]

    def phase(
        self, source: Source, directions: Directions, rows: slice = slice(None), stokes: bool = False
    ) -> FloatArray:
        """Return differential scattering ÷ reference extinction cross-section, (ny, nx, nλ[, 4]) [sr⁻¹].

        The source and the grid must be those that the film was traced for. Pixels cut by the rim of the image, which have
        no solid angle, hold no light.
        """
        solid = directions.solid_angle(rows)
        factor = np.divide(1.0, solid, out=np.zeros_like(solid), where=solid > 0.0)
        sums = self.film.sums[:, rows]
        if stokes and sums.ndim == 3:
            raise DomainError("this film holds no polarisation")
        if sums.ndim == 4 and not stokes:
            sums = sums[..., 0]
        light = np.moveaxis(sums, 0, 2).astype(np.float64)
        scale = self.film.scale() * factor[..., None]
        light *= scale[..., None] if stokes else scale
        return light

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards directions ÷ reference, shape (…, nλ)."""
        value = self.extinction_towards(np.asarray(cos_zenith, dtype=np.float64))
        return np.repeat(value[..., None], len(self.film.rays), axis=-1)


def films_folder() -> Path:
    """Return where films are kept."""
    return store_folder().with_name("films")


def find(blank: Film) -> Film:
    """Return the stored film of the same trace key, or the blank one.

    A file that is broken or belongs to another job is set aside, in words.
    """
    found = find_arrays(blank.key, films_folder(), FORMAT, "stored batches")
    if found is None:
        return blank
    arrays, about = found
    counts = arrays["counts"]
    return Film(
        blank.key,
        blank.rays,
        blank.reference,
        arrays["sums"],
        arrays["squares"],
        counts,
        dict(about["tally"]),
        names=blank.names,
        groups=arrays["groups"] if blank.names else None,
        reused=int(counts.sum()),
    )


def keep(film: Film) -> bool:
    """Store a film, unless a longer one of the same key is there; return whether it is kept."""
    if not film.whole:
        return False
    path = films_folder() / f"{film.key}.npz"
    aside = path.with_name(f"{path.name}.{uuid4().hex}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        if path.exists() and _stored_batches(path, film.key) > film.counts.sum():
            return True
        about = {"key": film.key, "format": FORMAT, "tally": film.tally, "batches": int(film.counts.sum())}
        with aside.open("wb") as file:
            arrays = {"sums": film.sums, "squares": film.squares, "counts": film.counts}
            if film.groups is not None:
                arrays["groups"] = film.groups
            np.savez(file, about=np.array(json.dumps(about)), **arrays)
        aside.replace(path)
        make_room(path, MOST_STORED)
    except OSError:
        return False
    finally:
        with suppress(OSError):
            aside.unlink()
    return True


def _stored_batches(path: Path, key: str) -> int:
    try:
        with path.open("rb") as file, np.load(file, allow_pickle=False) as stored:
            about = json.loads(str(stored["about"]))
        return int(about["batches"]) if about["key"] == key else 0
    except Exception:
        return 0
