"""The answer of ``skyoptics frame`` as text of 80 columns and as JSON."""

from __future__ import annotations

import math
from textwrap import fill
from typing import Any

from skyoptics.planning.aiming import Aim
from skyoptics.planning.framing import Camera
from skyoptics.planning.panorama import Panorama
from skyoptics.planning.shot import Landmark, Reach, Shot
from skyoptics.planning.words import degrees, point
from skyoptics.units import DEG, MM

COLUMNS = 79
HELD = {"whole": "all that is above the horizon", "feet": "both feet", "pair": "both spots"}

_INDENT = 11


def document(shot: Shot) -> dict[str, Any]:
    """Return the answer in JSON types; angles in degrees, lengths in millimetres, places in the frame as shares of it."""
    framing, light, feature = shot.framing, shot.light, shot.feature
    return {
        "feature": feature.name,
        "title": _title(shot),
        "radius_deg": feature.radius_deg,
        "body": feature.body,
        "time": None if light.time is None else light.time.isoformat(),
        "sun_azimuth_deg": _deg(light.azimuth, turn=True),
        "sun_elevation_deg": _deg(light.elevation),
        "lens": framing.camera.lens,
        "focal_mm": round(framing.camera.focal / MM, 4),
        "sensor_mm": [round(framing.camera.sensor.width / MM, 4), round(framing.camera.sensor.height / MM, 4)],
        "orientation": framing.camera.sensor.orientation,
        "field_deg": dict(
            zip(("width", "height", "diagonal"), (round(a / DEG, 3) for a in framing.camera.field), strict=True)
        ),
        "aim": _aim(framing.aim),
        "hold": framing.hold,
        "fits": framing.fits,
        "span_deg": round(framing.span / DEG, 4),
        "missing_deg": round(framing.missing / DEG, 4),
        "longest_focal_mm": None if framing.longest_focal is None else round(framing.longest_focal / MM, 4),
        "points": [_landmark(mark) for mark in shot.landmarks],
        "lenses": [_reach(reach) for reach in shot.reaches],
        "panorama": None if shot.panorama is None else _panorama(shot.panorama),
        "notes": list(shot.notes),
    }


def text(shot: Shot) -> str:
    """Return the answer for people."""
    framing, light = shot.framing, shot.light
    when = "" if light.time is None else f", {light.time.isoformat(timespec='minutes')}"
    lines = [
        f"{_title(shot)}; {shot.feature.body} {degrees(light.elevation / DEG)} high in {_towards(light.azimuth)}{when}",
        "",
        _entry("Camera", camera_words(framing.camera)),
        _entry("Aim", aim_words(framing.aim)),
        _entry("Held", verdict(shot)),
        _entry("Longest", longest_words(shot)),
    ]
    lines += ["", "In the frame, from the left and from the top edge:"]
    lines += [_mark_line(mark) for mark in shot.landmarks]
    lines += ["", "Longest focal lengths, aim at its best:"]
    lines += [_reach_line(reach) for reach in shot.reaches]
    if shot.panorama is not None:
        lines += ["", fill(panorama_words(shot.panorama), COLUMNS)]
        lines += _aim_lines(shot.panorama)
    for note in shot.notes:
        lines += ["", fill(note, COLUMNS)]
    return "\n".join(lines)


def verdict(shot: Shot) -> str:
    """Return in words whether it fits and what is missing."""
    framing = shot.framing
    what = HELD[framing.hold]
    fits, does = ("fits", "does") if framing.hold == "whole" else ("fit", "do")
    if framing.fits:
        return f"{what} {fits}"
    along = {"whole": "along it", "feet": "along the horizon", "pair": "between them"}[framing.hold]
    if framing.span == 0.0:
        return f"{what} does not fit: it is {framing.missing / DEG:.2f}° outside the frame"
    part = f"{framing.missing / DEG:.2f}° of {framing.span / DEG:.2f}° {along} missing"
    return f"{what} {does} not fit: {part}"


def longest_words(shot: Shot) -> str:
    """Return the longest focal length in words."""
    framing = shot.framing
    if framing.longest_focal is None:
        return f"no {framing.camera.lens} lens holds it with this aim"
    return f"{_mm(framing.longest_focal)} mm with this aim"


def camera_words(camera: Camera) -> str:
    """Return a camera in words, with its angles of view."""
    across, upright, corner = (f"{angle / DEG:.1f}°" for angle in camera.field)
    sensor = camera.sensor
    sides = f"{sensor.width / MM:.4g} × {sensor.height / MM:.4g} mm"
    return f"{camera.lens} {camera.focal / MM:.4g} mm on {sides}, sees {across} × {upright}, corner to corner {corner}"


def aim_words(aim: Aim) -> str:
    """Return an aim in words."""
    roll = "" if aim.roll == 0.0 else f", rolled {degrees(aim.roll / DEG)}"
    return f"{degrees(math.degrees(aim.elevation))} high in {_towards(aim.azimuth)}{roll}"


def panorama_words(frames: Panorama) -> str:
    """Return rows and columns in words."""
    if len(frames.aims) == 1:
        return "Panorama: one frame holds all of it"
    counts = [len(row.aims) for row in frames.rows]
    rows = "1 row" if len(counts) == 1 else f"{len(counts)} rows"
    each = (
        f"{counts[0]} frames" if len(set(counts)) == 1 else f"{', '.join(map(str, counts))} frames from the lowest up"
    )
    total = "" if len(counts) == 1 else f", {sum(counts)} in all"
    return f"Panorama: {rows} of {each}{total}; neighbours share {100.0 * frames.overlap:.0f} % at least"


def _title(shot: Shot) -> str:
    return shot.feature.title[:1].upper() + shot.feature.title[1:]


def _entry(name: str, words: str) -> str:
    """Return a line of a list, broken to the columns."""
    return fill(words, COLUMNS, initial_indent=f"{name:<{_INDENT}}", subsequent_indent=" " * _INDENT)


def _towards(azimuth: float) -> str:
    value = azimuth / DEG % 360.0
    return f"{point(value)} ({degrees(value)})"


def _mark_line(mark: Landmark) -> str:
    name = f"  {mark.name:<12}"
    where = f"{degrees(mark.elevation / DEG):>7} high in {_towards(mark.azimuth):<14}"
    if math.isnan(mark.x):
        return f"{name}{where}  behind the camera"
    place = f"{100.0 * mark.x:6.1f} %  {100.0 * mark.y:6.1f} %"
    return f"{name}{where}  {place}{'' if mark.inside else '  outside'}"


def _reach_line(reach: Reach) -> str:
    what = f"  {HELD[reach.hold]:<31}{reach.orientation:<11}{reach.lens:<13}"
    return what + ("none" if reach.focal is None else f"{_mm(reach.focal)} mm")


def _aim_lines(frames: Panorama) -> list[str]:
    """Return the aims of a panorama, a row a line."""
    if len(frames.aims) == 1:
        return []
    lines = []
    for row in frames.rows:
        azimuths = ", ".join(f"{aim.azimuth / DEG % 360.0:.1f}°" for aim in row.aims)
        head = f"  {degrees(row.aims[0].elevation / DEG):>6} high, azimuth "
        lines.append(fill(azimuths, COLUMNS, initial_indent=head, subsequent_indent=" " * len(head)))
    return lines


def _landmark(mark: Landmark) -> dict[str, Any]:
    seen = not math.isnan(mark.x)
    return {
        "name": mark.name.replace(" ", "_"),
        "azimuth_deg": _deg(mark.azimuth, turn=True),
        "elevation_deg": _deg(mark.elevation),
        "x": round(mark.x, 5) if seen else None,
        "y": round(mark.y, 5) if seen else None,
        "in_frame": mark.inside,
    }


def _reach(reach: Reach) -> dict[str, Any]:
    return {
        "hold": reach.hold,
        "orientation": reach.orientation,
        "lens": reach.lens,
        "longest_focal_mm": None if reach.focal is None else round(reach.focal / MM, 4),
        "aim_elevation_deg": _deg(reach.elevation),
    }


def _panorama(frames: Panorama) -> dict[str, Any]:
    return {
        "overlap": frames.overlap,
        "rows": len(frames.rows),
        "columns": frames.columns,
        "frames": [_aim(aim) | {"row": k + 1} for k, row in enumerate(frames.rows) for aim in row.aims],
    }


def _aim(aim: Aim) -> dict[str, float]:
    return {
        "azimuth_deg": _deg(aim.azimuth, turn=True),
        "elevation_deg": _deg(aim.elevation),
        "roll_deg": _deg(aim.roll),
    }


def _deg(angle: float, turn: bool = False) -> float:
    """Return degrees to a ten-thousandth, without minus zero; azimuths in [0, 360)."""
    value = round(angle / DEG, 4) + 0.0
    return value % 360.0 if turn else value


def _mm(length: float) -> str:
    """Return millimetres, rounded down so that the figure can be used."""
    return f"{math.floor(length / MM * 100.0 + 1e-6) / 100.0:.2f}"
