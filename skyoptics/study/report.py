"""What a study says about itself: differences between methods, what a finer sweep would change."""

from __future__ import annotations

from math import nan
from typing import Any

import numpy as np

from skyoptics.study import colours
from skyoptics.study.result import Study


def report(study: Study) -> dict[str, Any]:
    """Return what halving the step of the sweep would change, differences between methods, warnings."""
    return {
        "sweep": study.question.sweep,
        "steps": [step.value for step in study.steps],
        "methods": list(study.question.methods),
        "wavelength_nm": list(study.question.wavelength_nm),
        "disc": study.question.disc,
        "halving_the_step": halving(study),
        "delta_e_mean": {
            name: float(np.mean(study.difference[m])) for m, name in enumerate(study.question.methods) if m > 0
        },
        "delta_e_max": {
            name: float(np.max(study.difference[m])) for m, name in enumerate(study.question.methods) if m > 0
        },
        "average_error": {name: float(study.error[m].max()) for m, name in enumerate(study.question.methods)},
        "warnings": list(study.warnings),
    }


def halving(study: Study) -> dict[str, dict[str, float]]:
    """Return, by method, how much a step half as wide would change: bow angle and width [°], colour map [ΔE2000].

    Each inner step is compared with the straight line (in the logarithm of the swept value where steps are ratios) through
    its neighbours. The error of straight lines goes as the square of the step, so halving it changes a quarter of that.
    Largest value over steps; nan with fewer than three steps.
    """
    value = np.array([step.value for step in study.steps])
    if study.question.sweep in ("radius_um", "rain_mm_h"):
        value = np.log(value)
    bow, width = study.metric(lambda one: one.bow_angle), study.metric(lambda one: one.width)
    result = {}
    for m, name in enumerate(study.question.methods):
        changes: dict[str, list[float]] = {"bow_angle_deg": [], "width_deg": [], "delta_e": []}
        for s in range(1, len(value) - 1):
            part = (value[s] - value[s - 1]) / (value[s + 1] - value[s - 1])
            for key, metric in (("bow_angle_deg", bow), ("width_deg", width)):
                line = (1.0 - part) * metric[m, s - 1] + part * metric[m, s + 1]
                change = 0.25 * np.abs(metric[m, s] - line)
                if np.any(np.isfinite(change)):
                    changes[key].append(float(np.nanmedian(change)))
            line = (1.0 - part) * study.map_xyz[m, s - 1] + part * study.map_xyz[m, s + 1]
            changes["delta_e"].append(0.25 * float(np.mean(colours.difference(study.map_xyz[m, s], line, study.white))))
        result[name] = {key: max(found, default=nan) for key, found in changes.items()}
    return result
