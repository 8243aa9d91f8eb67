"""The frames of a film: made one after the other or side by side, kept until the film is done, taken up again after a stop.

Frames lie as PNG in a folder of their own beside a manifest that names what they were made from: scenes, seed, quality,
exposure, program. What does not fit is made anew. The exposure of a film is metered over a handful of its frames, so that it
does not flicker.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator, Sequence
from concurrent.futures import Executor, Future, ThreadPoolExecutor
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.colour import white as whites
from skyoptics.errors import DomainError, Fault, SceneError
from skyoptics.rendering import memory
from skyoptics.rendering.build import build, placed
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.eye import exposure_asked, neutral
from skyoptics.rendering.reel import Film, Reel
from skyoptics.rendering.scatter import Progress, is_table, silent
from skyoptics.rendering.shots import METERS, Shot, Studio, developed
from skyoptics.rendering.skies import shelf_for
from skyoptics.scene.digest import scene_hash
from skyoptics.units import FloatArray

MOST_FRAMES = 20000

_METERED = {"shared": 5, "smooth": 9, "each": 0}
_HELD = 4  # frames that were metered and are kept in memory for their turn, at most this many million pixels of them


def frame_count(seconds: float, fps: float) -> int:
    """Return the number of frames of a film.

    Raises
    ------
    DomainError
        For none at all, or too many.
    """
    count = round(seconds * fps)
    if count < 1:
        raise DomainError(f"{seconds:g} s at {fps:g} frames a second make 0 frames: raise --seconds or --fps")
    if count > MOST_FRAMES:
        raise DomainError(f"{seconds:g} s at {fps:g} frames a second make {count} frames; {MOST_FRAMES} are allowed")
    return count


def check(film: Film) -> None:
    """Make sure, before the work, that every frame can be made.

    Raises
    ------
    SceneError
        If the sun or moon is below the horizon in a frame, or frames would differ in size.
    ResourceError
        If memory is short.
    """
    for number, scene in enumerate(film.scenes, start=1):
        if scene.camera.pixels != film.scenes[0].camera.pixels:
            sizes = " and ".join(f"{w} x {h}" for w, h in (film.scenes[0].camera.pixels, scene.camera.pixels))
            raise SceneError([Fault(film.where, None, "camera", f"frames of {sizes} pixels cannot stand in one film")])
        try:
            placed(scene.light)
        except DomainError as error:
            raise SceneError([Fault(film.where, None, "light", f"frame {number}: {error}")]) from error
        exposure_asked(scene, film.where)
    job = build(film.scenes[0], film.where)
    side_by_side = film.settings.threads if all(is_table(sheet) for sheet in job.sheets) else 1
    memory.check(side_by_side * memory.predict(job, film.settings.threads // side_by_side or 1, False))


def shoot(reel: Reel, progress: Progress = silent) -> Iterator[NDArray[np.uint8]]:
    """Yield the frames of a film in order, made or taken from the reel.

    Parameters
    ----------
    reel : Reel
        Opened.
    progress : callable
        Told about frames.

    Yields
    ------
    ndarray of uint8, shape (ny, nx, 3)
        sRGB. The same bits for any number of threads, and for a film that was stopped and taken up again.
    """
    film, count = reel.film, len(reel.film.scenes)
    studio = Studio(film.settings, shelf=shelf_for(film.scenes))
    threads = film.settings.threads
    with ThreadPoolExecutor(threads) as tracers, ThreadPoolExecutor(threads) as makers:
        try:
            held: dict[int, Shot] = {}
            if reel.measured is None:
                reel.note(_measure(film, studio, tracers, progress, held))
            measured = reel.measured or {}
            studio.rounds = list(measured["rounds"])

            def make(number: int) -> NDArray[np.uint8]:
                found = reel.get(number)
                if found is None:
                    shot = held.pop(number, None) or studio.look(film.scenes[number], film.where, tracers)
                    found = _develop(film, number, shot, measured)
                    reel.put(number, found)
                return found

            if studio.rounds:  # tracing keeps all threads busy for one frame
                for number in range(count):
                    progress("frames", number, count)
                    yield make(number)
            else:
                waiting: deque[Future[NDArray[np.uint8]]] = deque()
                for number in range(count + threads + 1):
                    if number < count:
                        waiting.append(makers.submit(make, number))
                    if number > threads:
                        progress("frames", number - threads - 1, count)
                        if waiting:
                            yield waiting.popleft().result()
            progress("frames", count, count)
        except BaseException:
            makers.shutdown(wait=True, cancel_futures=True)
            tracers.shutdown(wait=True, cancel_futures=True)
            raise


def _measure(
    film: Film, studio: Studio, executor: Executor, progress: Progress, held: dict[int, Shot]
) -> dict[str, Any]:
    """Return exposures (None: each frame its own), white and rounds, from a handful of frames."""
    count = len(film.scenes)
    fixed = [exposure_asked(scene, film.where) for scene in film.scenes]
    job = build(film.scenes[0], film.where)
    traced = any(isinstance(sheet, CrystalSheet) and not is_table(sheet) for sheet in job.sheets)
    few = _spread(count, max(_METERED[film.exposure], 3 if traced else 1))
    if len({scene_hash(film.scenes[number]) for number in few}) == 1:
        few = few[:1]
    automatic = film.scenes[0].picture.white == "auto" and film.scenes[0].picture.white_kelvin is None
    asks = film.exposure != "each" and (None in fixed or automatic)
    if traced:
        studio.measure([film.scenes[number] for number in few], film.where, executor, progress)
    if not asks:
        return {"exposures": fixed, "white": None, "rounds": studio.rounds}
    shots = {}
    for done, number in enumerate(few):
        progress("metering", done, len(few))
        shots[number] = studio.look(film.scenes[number], film.where, executor)
        pixels = shots[number].xyz.shape[0] * shots[number].xyz.shape[1]
        if (len(held) + 1) * pixels <= _HELD * 1_000_000 and not studio.rounds:
            held[number] = shots[number]
    progress("metering", len(few), len(few))
    white = None
    if automatic:
        white = whites.white(whites.automatic(np.concatenate([shot.xyz for shot in shots.values()]))).tolist()
    meters = {number: METERS[film.scenes[number].picture.metering] for number in few}
    if film.exposure == "shared":
        everything = np.concatenate([shot.xyz[..., 1].ravel() for shot in shots.values()])
        found = [meters[few[0]](everything)] * count
    else:
        found = _between(few, [meters[number](shot.xyz[..., 1]) for number, shot in shots.items()], count)
    exposures = [own if own is not None else metered for own, metered in zip(fixed, found, strict=True)]
    return {"exposures": exposures, "white": white, "rounds": studio.rounds}


def _spread(count: int, few: int) -> list[int]:
    """Return frames spread over a film, both ends among them."""
    return sorted({round(k * (count - 1) / max(few - 1, 1)) for k in range(few)})


def _between(few: Sequence[int], values: Sequence[float], count: int) -> list[float]:
    """Return values for all frames, a smooth curve through those of a few that never overshoots."""
    if len(few) == 1:
        return [values[0]] * count
    from scipy.interpolate import PchipInterpolator

    return [float(value) for value in PchipInterpolator(few, values)(np.arange(count))]


def _develop(film: Film, number: int, shot: Shot, measured: dict[str, Any]) -> NDArray[np.uint8]:
    """Return a frame as it is stored."""
    picture = film.scenes[number].picture
    exposure = measured["exposures"][number]
    if exposure is None:
        exposure = METERS[picture.metering](shot.xyz[..., 1])
    white: FloatArray | None
    if measured["white"] is not None:
        white = np.array(measured["white"])
    else:
        asked = neutral(shot.job, picture)
        white = whites.white(whites.automatic(shot.xyz)) if isinstance(asked, str) else asked
    return developed(shot.xyz, exposure, white)
