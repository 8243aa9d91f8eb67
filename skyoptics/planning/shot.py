"""One question of ``skyoptics frame``, answered: how a camera holds a feature, which lens would, where its points land."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import NamedTuple

import numpy as np

from skyoptics.errors import DomainError, NothingFoundError, SkyopticsError
from skyoptics.geometry.axes import angle_between, azimuth_elevation, direction
from skyoptics.planning import cautions
from skyoptics.planning.aiming import Aim, aim_for, longest_focal
from skyoptics.planning.features import Feature
from skyoptics.planning.framing import Camera, Framing, frame_of, image
from skyoptics.planning.held import Held, feet, held
from skyoptics.planning.panorama import OVERLAP, Panorama, panorama
from skyoptics.planning.sensors import ORIENTATIONS
from skyoptics.units import DEG, FloatArray

FISHEYE = "equisolid"
"""What is looked at where no rectilinear lens does."""


class Light(NamedTuple):
    """Where the sun or moon stands [rad], and at what time that is, where it follows from one."""

    azimuth: float
    elevation: float
    time: datetime | None = None


class Landmark(NamedTuple):
    """A point of the feature: its name, where it stands [rad], where it lands in the frame (shares from left and top)."""

    name: str
    azimuth: float
    elevation: float
    x: float
    y: float

    @property
    def inside(self) -> bool:
        """Whether it is in the frame."""
        return abs(self.x - 0.5) <= 0.5 + 1e-9 and abs(self.y - 0.5) <= 0.5 + 1e-9


class Reach(NamedTuple):
    """The longest focal length [m] that holds so much of the feature, and the elevation of its aim; None if none does."""

    hold: str
    orientation: str
    lens: str
    focal: float | None
    elevation: float


@dataclass(frozen=True)
class Shot:
    """A feature before a camera.

    Parameters
    ----------
    feature : Feature
    light : Light
    framing : Framing
        For what was to be held.
    landmarks : tuple of Landmark
        Crown, feet, spots, and the subject where there is one.
    reaches : tuple of Reach
        For all that can be held, in both orientations, at the best aim; with fisheyes where no lens of the kind asked for does.
    panorama : Panorama or None
        Where it was asked for, or where the whole of the feature does not fit.
    notes : tuple of str
        What to know and to mind.
    """

    feature: Feature
    light: Light
    framing: Framing
    landmarks: tuple[Landmark, ...]
    reaches: tuple[Reach, ...]
    panorama: Panorama | None
    notes: tuple[str, ...]


def shoot(
    feature: Feature,
    light: Light,
    camera: Camera,
    hold: str = "whole",
    aim: Aim | str = "best",
    overlap: float | None = None,
    subject: tuple[float, float] | None = None,
) -> Shot:
    """Return how a camera holds a feature.

    Parameters
    ----------
    feature : Feature
        From `skyoptics.planning.features.find`.
    light : Light
        What lights it.
    camera, hold, aim :
        As for `skyoptics.planning.framing.frame_of` and `skyoptics.planning.held.held`.
    overlap : float or None
        Of a panorama that is asked for.
    subject : tuple of float or None
        Its azimuth and elevation [rad].

    Returns
    -------
    Shot

    Raises
    ------
    NothingFoundError
        Where nothing of the feature is up; the text says which heights of the sun it needs.
    DomainError
        For a sun below the horizon, and as the functions named above do.
    """
    if light.elevation < 0.0:
        raise DomainError(
            f"the {feature.body} stands at {light.elevation / DEG:.1f}°, below the horizon, and lights nothing; it has to be "
            "0 to 90° high"
        )
    outline = feature.outline(light.azimuth, light.elevation)
    try:
        wanted = held(*outline, light.azimuth, hold)
    except NothingFoundError:
        raise NothingFoundError(_not_up(feature, light)) from None
    framing = frame_of(camera, wanted, aim)
    whole = wanted if hold == "whole" else held(*outline, light.azimuth)
    frames = _frames(camera, whole, framing, overlap)
    return Shot(
        feature,
        light,
        framing,
        _landmarks(framing, outline, whole, subject),
        _reaches(camera, outline, light.azimuth),
        frames,
        _notes(feature, light, framing, frames if overlap is not None else None),
    )


def _frames(camera: Camera, whole: Held, framing: Framing, overlap: float | None) -> Panorama | None:
    """Return a panorama where one is asked for, or of use."""
    if overlap is not None:
        return panorama(camera, whole, overlap)
    if framing.fits or framing.hold != "whole":
        return None
    try:
        return panorama(camera, whole, OVERLAP)
    except DomainError:
        return None


def _landmarks(
    framing: Framing, outline: tuple[FloatArray, FloatArray], whole: Held, subject: tuple[float, float] | None
) -> tuple[Landmark, ...]:
    """Return the points that people look for, and where they land."""
    points: list[tuple[str, FloatArray]] = []
    if whole.span > 0.0 and len(whole.points) > 2:
        top = whole.points[whole.points[:, 2] > whole.points[:, 2].max() - 1e-9]
        # of equally high points the one nearest to the middle
        points.append(("crown", top[np.argmax(top @ direction(whole.middle, 0.0))]))
        ends = feet(*outline, whole.middle)
        points += [(name, direction(end, 0.0)) for name, end in zip(("left foot", "right foot"), ends, strict=False)]
    else:
        azimuth, _ = azimuth_elevation(whole.points)
        order = np.argsort(np.mod(azimuth - whole.middle + np.pi, 2.0 * np.pi))
        names = ("left spot", "right spot") if len(order) == 2 else ("spot",) * len(order)
        points += [(name, whole.points[k]) for name, k in zip(names, order, strict=True)]
    if subject is not None:
        points.append(("subject", direction(*subject)))
    marks = []
    for name, vector in points:
        x, y = image(framing.camera, framing.aim, vector)
        azimuth, elevation = azimuth_elevation(vector)
        marks.append(Landmark(name, float(azimuth), float(elevation), float(x), float(y)))
    return tuple(marks)


def _reaches(camera: Camera, outline: tuple[FloatArray, FloatArray], sun_azimuth: float) -> tuple[Reach, ...]:
    """Return the longest focal lengths for all that can be held."""
    wanted = []
    for hold in ("whole", "feet", "pair"):
        try:
            wanted.append(held(*outline, sun_azimuth, hold))
        except SkyopticsError:
            continue
    if wanted[-1].hold == "pair":  # two spots are a pair and all there is
        wanted = wanted[-1:]
    square = camera.sensor.width == camera.sensor.height
    found = []
    for one in wanted:
        for orientation in ORIENTATIONS[: 1 if square else 2]:
            found.append(_reach(camera.lens, camera, one, orientation))
            if found[-1].focal is None and camera.lens == "rectilinear":
                found.append(_reach(FISHEYE, camera, one, orientation))
    return tuple(found)


def _reach(lens: str, camera: Camera, wanted: Held, orientation: str) -> Reach:
    """Return the longest focal length of a lens at its best aim."""
    sensor = camera.sensor.held(orientation)
    aim = aim_for(lens, sensor, wanted, "best")
    return Reach(wanted.hold, orientation, lens, longest_focal(lens, sensor, wanted.points, aim), aim.elevation)


def _notes(feature: Feature, light: Light, framing: Framing, frames: Panorama | None) -> tuple[str, ...]:
    """Return what to know: a weak feature, a sun in or near the frame."""
    notes = []
    if feature.weak(light.elevation):
        notes.append(f"weak: the {feature.body} is within 1° of a height at which this fades")
    if feature.body == "sun":
        sun = direction(light.azimuth, light.elevation)
        aims = (framing.aim,) if frames is None else frames.aims
        apart = min(float(angle_between(sun, aim.rotation[2])) for aim in aims)
        notes += cautions.for_aim(apart / DEG, framing.camera.field[2] / 2.0 / DEG)
    return tuple(notes)


def _not_up(feature: Feature, light: Light) -> str:
    """Return why nothing of a feature is up, and when it is."""
    title = feature.title[:1].upper() + feature.title[1:]
    heights = [f"{low / DEG:.1f} to {high / DEG:.1f}°" for low, high in feature.heights()]
    needs = f"it needs a {feature.body} {' or '.join(heights)} high" if heights else "it is never up"
    below = len(feature.outline(light.azimuth, light.elevation)[0]) > 0
    why = "all of it is below the horizon" if below else "there is none"
    return f"{title}: {why} with the {feature.body} {round(light.elevation / DEG, 1) + 0.0:.1f}° high; {needs}"
