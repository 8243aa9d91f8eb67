"""The best angle of a polariser on the lens for each feature, and what it gains in contrast.

An ideal polariser passes Y(ψ) = ½ (I + A cos 2ψ + B sin 2ψ), ψ its angle on the lens, A and B being Q and U turned into the
axis that ψ = 0 has at each pixel (`skyoptics.camera.frame.polariser`). All three are pictures, so light on and beside a
feature is known for every angle once they are measured like any picture.
"""

from __future__ import annotations

from collections.abc import Collection
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from typing import Any

import numpy as np

from skyoptics.camera.frame import polariser
from skyoptics.colour.observer import Observer, weights
from skyoptics.rendering import expose
from skyoptics.rendering.build import Job, build
from skyoptics.rendering.features import lines, missing
from skyoptics.rendering.looking import stokes
from skyoptics.rendering.profiles import measure
from skyoptics.rendering.run import Settings, reflection, scatter_all
from skyoptics.rendering.scatter import Progress, Sampling, silent
from skyoptics.scene.model import Scene
from skyoptics.units import DEG, ArrayLike, FloatArray

COARSE = 240
"""Pixels along the longer side of the picture in which polarisation is looked at."""
COARSE_RAYS = {"draft": 1_000_000, "normal": 4_000_000, "fine": 16_000_000}
"""Rays of each film for it, by quality."""
ANGLES = np.arange(180) * DEG
"""Angles tried [rad]."""
FAINTEST = 0.005
"""Mean contrast without a polariser below which a feature has no best angle [1]."""


def best_polariser(
    scene: Scene,
    where: str,
    settings: Settings,
    progress: Progress = silent,
    only: Collection[str] | None = None,
) -> list[dict[str, Any]]:
    """Return the best angle of a polariser for each feature in the frame.

    Parameters
    ----------
    scene : Scene
        Checked description; a polariser in it is taken off.
    where : str
        Name of its file, for faults.
    settings : Settings
        Quality, seed, threads. Tables come from the store or go there; light that is traced onto the picture is traced
        anew, onto a coarse one, with its polarisation.
    progress : callable
        Told about batches.
    only : collection of str, optional
        Names of the features wanted, such as those that `skyoptics.rendering.visibility` calls visible: what cannot be
        seen has no best angle, and may borrow that of an arc it runs along. Default all in the frame.

    Returns
    -------
    list of dict
        JSON types: `feature`, `title`, `angle_deg` of the axis from the top of the picture, clockwise from behind the
        camera (of a panorama from the vertical), `contrast` (mean along the feature in the frame, by luminance) with the
        polariser so and `contrast_without`, `gain` = their ratio, `worst_angle_deg`, `contrast_worst` and `light_share`,
        what the polariser leaves of the feature's luminance at the best angle. Diffuse light and features whose contrast
        without a polariser is below `FAINTEST` are left out.
    """
    job = build(scene, where, stokes=True)
    side = -(-max(job.directions.shape) // COARSE)
    job = replace(job, directions=job.directions.coarse(side), polariser=None)
    picture = polarised_luminance(job, settings, progress, scene.picture.observer)
    rows = []
    for line in lines(job):
        if (only is not None and line.name not in only) or line.kind == "diffuse" or missing(line, job) is not None:
            continue
        found = measure(line, job.directions, picture, job.sources[0], key=0)
        best = None if found is None else best_angle(found.on, found.beside, found.weight)
        if best is not None:
            rows.append({"feature": line.name, "title": line.title, **best})
    return rows


def best_angle(on: ArrayLike, beside: ArrayLike, weight: ArrayLike) -> dict[str, float] | None:
    """Return the angle of a polariser with the greatest mean contrast.

    Parameters
    ----------
    on, beside : array_like, shape (m, 3)
        I, A, B (see above) on a feature and beside it.
    weight : array_like, shape (m,)
        Length that each place stands for.

    Returns
    -------
    dict or None
        See `best_polariser`; None where the contrast without a polariser is below `FAINTEST`.
    """
    on, beside = np.asarray(on, dtype=np.float64), np.asarray(beside, dtype=np.float64)
    passed = 0.5 * np.stack([np.ones_like(ANGLES), np.cos(2.0 * ANGLES), np.sin(2.0 * ANGLES)])
    seen_on, seen_beside = on @ passed, beside @ passed
    fair = (beside[:, 0] > 0.0) & (seen_beside > 0.0).all(axis=1)
    if not fair.any():
        return None
    share = np.asarray(weight, dtype=np.float64)[fair]
    plain = float(np.average(on[fair, 0] / beside[fair, 0] - 1.0, weights=share))
    if plain < FAINTEST:
        return None
    contrast = np.average(seen_on[fair] / seen_beside[fair] - 1.0, axis=0, weights=share)
    best, worst = int(np.argmax(contrast)), int(np.argmin(contrast))
    return {
        "angle_deg": float(ANGLES[best] / DEG),
        "contrast": float(contrast[best]),
        "contrast_without": plain,
        "gain": float(contrast[best]) / plain,
        "worst_angle_deg": float(ANGLES[worst] / DEG),
        "contrast_worst": float(contrast[worst]),
        "light_share": float(np.average(seen_on[fair, best] / on[fair, 0], weights=share)),
    }


def polarised_luminance(
    job: Job, settings: Settings, progress: Progress = silent, observer: Observer = "1931"
) -> FloatArray:
    """Return I, A, B of the luminance of a job's picture, shape (ny, nx, 3) [cd m⁻²]; nan outside the image."""
    rays = settings.rays or COARSE_RAYS[settings.quality]
    with ThreadPoolExecutor(settings.threads) as executor:
        try:
            sheets, _, works, _ = scatter_all(job, settings.sampling, executor, progress)
            mirror = reflection(job, settings.sampling, executor, progress)
            works += [] if mirror is None else mirror.works
            if works:
                sampling = Sampling(settings.quality, settings.seed, rays)
                expose.trace(works, sampling, executor, lambda: [0.0] * len(works), progress, lambda: None)
        except BaseException:
            executor.shutdown(wait=True, cancel_futures=True)
            raise
    seen = stokes(job, sheets, slice(None), mirror)
    i, q, u, _ = np.einsum("yxws,w->syx", seen, weights(job.bins, observer)[:, 1])
    turn = 2.0 * polariser(job.directions, 0.0)
    along, across = q * np.cos(turn) + u * np.sin(turn), u * np.cos(turn) - q * np.sin(turn)
    return np.stack([i, along, across], axis=-1)
