"""What is taken through values, in words: the quantity, and each value with its unit."""

from __future__ import annotations

import re

from skyoptics.rendering.vary import Step, Vary, rule_in
from skyoptics.words.table import number, say

_UNITS = {"degrees": "°", "pixels": "px"}
_AXES = {
    "elevation_deg": "axis.sun_elevation",
    "radius_um": "axis.drop_radius",
    "tilt_deg": "axis.tilt",
    "aspect": "axis.aspect",
    "time": "axis.time",
}


def quantity(step: Step, vary: Vary, lang: str = "en") -> str:
    """Return what is taken through values, in words: "drop radius"; keys without words of their own by their name."""
    last = vary.key.rpartition(".")[2]
    axis = _AXES.get(last)
    if last == "elevation_deg" and (not vary.key.startswith("light.") or step.scene.light.body == "moon"):
        axis = "axis.elevation"
    if last == "radius_um" and not vary.key.startswith("air."):
        axis = None
    if axis is not None:
        return re.sub(r" \[.*\]$", "", say(axis, lang))
    rule = rule_in(step.scene, vary.key)
    if rule is not None and rule.unit and rule.form in ("number", "whole"):
        last = last.rpartition("_")[0] or last
    return last.replace("_", " ")


def caption(step: Step, vary: Vary, lang: str = "en") -> str:
    """Return a value with its unit, as a language writes it: "250 µm", "12,5°", "18:40"."""
    value = step.value
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        moment = step.scene.light.when if vary.key == "light.time" else None
        return value if moment is None else f"{moment:%Y-%m-%d %H:%M}"
    if isinstance(value, int | float):
        rule = rule_in(step.scene, vary.key)
        unit = "" if rule is None else _UNITS.get(rule.unit, rule.unit)
        gap = "" if unit in ("", "°") else " "
        return f"{number(value, lang, '.4g')}{gap}{unit}"
    return step.text
