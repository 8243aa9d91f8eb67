"""One ray of a named arc through the crystal that makes it: points, directions, shares.

Shares follow the field along the way (Fresnel's amplitudes, Born & Wolf, *Principles of Optics*, §1.5.2; s and p turn from
face to face) for two perpendicular polarisations, and are the mean power of both, that of unpolarised light.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.crystals import habits
from skyoptics.crystals.arc_feature import Crystals, Feature
from skyoptics.crystals.arcs import exists, feature
from skyoptics.crystals.faces import face_labels
from skyoptics.crystals.shapes import Shape, hexagonal_prism
from skyoptics.errors import DomainError, NothingFoundError
from skyoptics.figures.crystal_pose import best
from skyoptics.geometry.axes import angle_between, azimuth_elevation, direction
from skyoptics.optics import interface
from skyoptics.units import DEG, FloatArray

_ASPECTS = (0.5, 0.25, 2.0, 4.0)
"""Aspects tried where light does not pass the typical crystal in the pose that is drawn."""
_POINTS = 3000


@dataclass(frozen=True, eq=False)
class Meeting:
    """A ray at a face; directions of travel and places in world axes, lengths in diameters of the crystal.

    Parameters
    ----------
    face : int
        By the numbers of `skyoptics.crystals.faces`.
    does : str
        ``enters``, ``reflects``, ``leaves``, or ``mirrors`` for reflection from outside.
    place, normal : ndarray, shape (3,)
        Where, and the outward normal.
    before, after : ndarray, shape (3,)
        Directions of the ray that is followed.
    other : ndarray, shape (3,), or None
        Direction of the light that goes another way; None where there is none, the reflection being total.
    incidence, refraction : float
        Angles from the normal before and beyond the face; the latter nan in total reflection [rad].
    share_before, share_after : float
        Of the light that fell on the entry face.
    """

    face: int
    does: str
    place: FloatArray
    normal: FloatArray
    before: FloatArray
    after: FloatArray
    other: FloatArray | None
    incidence: float
    refraction: float
    share_before: float
    share_after: float

    @property
    def total(self) -> bool:
        """Whether it is total reflection."""
        return self.does == "reflects" and not np.isfinite(self.refraction)


@dataclass(frozen=True, eq=False)
class Passage:
    """A ray of a named arc."""

    entry: Feature
    crystals: Crystals
    shape: Shape
    rotation: FloatArray
    """World = R · body, shape (3, 3)."""
    sun_elevation: float
    index: float
    meetings: tuple[Meeting, ...]

    @property
    def sequence(self) -> tuple[int, ...]:
        """Faces in the order met."""
        return tuple(one.face for one in self.meetings)

    @property
    def deviation(self) -> float:
        """Angle between the ways in and out [rad]."""
        return float(angle_between(self.meetings[0].before, self.meetings[-1].after))

    @property
    def seen(self) -> tuple[float, float]:
        """Azimuth from the sun, in (−π, π], and elevation at which the light is seen [rad]."""
        azimuth, elevation = azimuth_elevation(-self.meetings[-1].after)
        return float((azimuth + np.pi) % (2.0 * np.pi) - np.pi), float(elevation)

    def numbers(self) -> dict[str, Any]:
        """Return the figures as JSON types."""
        azimuth, elevation = self.seen
        faces = [
            {
                "face": one.face,
                "does": "reflects totally" if one.total else one.does,
                "incidence_deg": one.incidence / DEG,
                "refraction_deg": None if np.isnan(one.refraction) else one.refraction / DEG,
                "share_before": one.share_before,
                "share_after": one.share_after,
                "total": one.total,
                "place": one.place.tolist(),
                "before": one.before.tolist(),
                "after": one.after.tolist(),
            }
            for one in self.meetings
        ]
        return {
            "particle": "crystal",
            "arc": self.entry.name,
            "sun_elevation_deg": self.sun_elevation / DEG,
            "index": self.index,
            "law": self.crystals.law,
            "shape": self.shape.label,
            "sequence": list(self.sequence),
            "seen_azimuth_deg": azimuth / DEG,
            "seen_elevation_deg": elevation / DEG,
            "deviation_deg": self.deviation / DEG,
            "share": self.meetings[-1].share_after,
            "share_rest": max(0.0, 1.0 - self.meetings[-1].share_after),
            "rotation": self.rotation.tolist(),
            "faces": faces,
        }


def passage(name: str, sun_elevation: float, index: float) -> Passage:
    """Return a representative ray of a named arc.

    Parameters
    ----------
    name : str
        One of `skyoptics.crystals.arcs.names`.
    sun_elevation : float
        [rad]
    index : float
        Refractive index of ice relative to the air.

    Raises
    ------
    DomainError
        If the name is unknown, a number out of range, or the light takes two crystals.
    NothingFoundError
        If the arc does not exist at that sun elevation; the text gives its limits.
    """
    entry = feature(name)
    if entry.scatterings > 1:
        raise DomainError(
            f"the {entry.title} are made by two crystals one after the other ({entry.told_apart}): no single path is theirs"
        )
    if not exists(name, sun_elevation, index):
        raise NothingFoundError(
            f"{entry.title}: there is none with the sun at {sun_elevation / DEG:g}° and n = {index:.4f}; it exists "
            f"{entry.exists} (h: the sun's elevation; limits for n = 1.31)"
        )
    crystals = entry.crystals[0]
    for aspect in (crystals.aspect, *_ASPECTS):
        shape = (
            hexagonal_prism(aspect)
            if crystals.shape == "prism"
            else habits.shape(habits.Habit("truncated-bipyramid", aspect))
        )
        for faces, rotation in best(entry, crystals, shape, sun_elevation, index):
            meetings = _follow(shape, faces, rotation, sun_elevation, index)
            if meetings:
                return Passage(entry, crystals, shape, rotation, sun_elevation, index, meetings)
    raise NothingFoundError(
        f"{entry.title}: with the sun at {sun_elevation / DEG:g}° hardly any light passes the crystals that make it; it "
        f"exists {entry.exists}"
    )


def _follow(
    shape: Shape, faces: tuple[int, ...], rotation: FloatArray, sun_elevation: float, index: float
) -> tuple[Meeting, ...]:
    """Follow the ray in the middle of the beam that takes these faces; empty where none does."""
    labels = list(face_labels(shape.face_normals))
    numbers = [labels.index(label) for label in faces]
    normals, distances = shape.face_normals, shape.offsets.ravel()
    start = _spread(shape.faces[numbers[0]])
    before = -direction(0.0, sun_elevation) @ rotation
    fields = _fields(before)
    place, travel, meetings = start, before, []
    alive = np.ones(len(start), dtype=bool)
    hits = [start]
    steps: list[dict[str, Any]] = []
    for step, (number, label) in enumerate(zip(numbers, faces, strict=True)):
        normal = normals[number]
        if step:
            speed = np.where(shape.face_areas > 0.0, normals @ travel, -1.0)
            with np.errstate(divide="ignore", invalid="ignore"):
                time = np.where(speed > 1e-12, np.maximum(distances - place @ normals.T, 0.0) / speed, np.inf)
            alive &= np.argmin(time, axis=1) == number
            place = place + np.where(alive, time[:, number], 0.0)[:, None] * travel
            hits.append(place)
        does = "mirrors" if len(faces) == 1 else "enters" if step == 0 else "reflects"
        does = "leaves" if step and step == len(faces) - 1 else does
        found = _at_face(does, normal, travel, fields, index)
        steps.append({"face": label, "does": does, "normal": normal, "before": travel, **found})
        travel, fields = found["after"], found["fields"]
    if not alive.any():
        return ()
    # in the unfolded crystal the beam is convex, so its middle is part of it
    for one, hit in zip(steps, hits, strict=True):
        share = [float(np.sum(np.abs(field) ** 2) / 2.0) for field in (one.pop("old"), one.pop("fields"))]
        turned = {key: rotation @ one[key] for key in ("normal", "before", "after")}
        other = None if one["other"] is None else rotation @ one["other"]
        rest = {"place": rotation @ hit[alive].mean(axis=0), "share_before": share[0], "share_after": share[1]}
        meetings.append(Meeting(**(one | turned | rest | {"other": other})))
    return tuple(meetings)


def _fields(travel: FloatArray) -> Any:
    """Return two perpendicular fields of unit power across a direction, shape (2, 3), complex."""
    across = np.cross(travel, np.eye(3)[int(np.argmin(np.abs(travel)))])
    across = across / np.linalg.norm(across)
    return np.array([across, np.cross(travel, across)], dtype=np.complex128)


def _at_face(does: str, normal: FloatArray, travel: FloatArray, fields: Any, index: float) -> dict[str, Any]:
    """Return directions, angles and fields at a face, the fields scaled so that their squares are powers."""
    facing = normal if does in ("leaves", "reflects") else -normal  # along the light
    relative = 1.0 / index if does in ("leaves", "reflects") else index
    cosine = float(np.clip(travel @ facing, 0.0, 1.0))
    incidence = float(np.arccos(cosine))
    refraction = float(interface.refraction(relative, incidence))
    r_s, r_p, t_s, t_p = (complex(part) for part in interface.amplitudes(relative, incidence))
    mirrored = travel - 2.0 * cosine * facing
    beyond = None
    if np.isfinite(refraction):
        beyond = (travel - cosine * facing) / relative + np.cos(refraction) * facing
    crosses = does in ("enters", "leaves")
    after, other = (beyond, mirrored) if crosses else (mirrored, beyond)
    if after is None:
        raise DomainError("the light is totally reflected where it should leave")
    s = np.cross(travel, facing)
    s = s / np.linalg.norm(s) if np.linalg.norm(s) > 1e-9 else _fields(travel)[0].real
    root = np.sqrt(relative * np.cos(refraction) / max(cosine, 1e-12)) if crosses else 1.0
    factors = (t_s * root, t_p * root) if crosses else (r_s, r_p)
    new = np.outer(fields @ s * factors[0], s) + np.outer(
        fields @ np.cross(s, travel) * factors[1], np.cross(s, after) * (1.0 if crosses else -1.0)
    )
    return {
        "after": after,
        "other": other,
        "incidence": incidence,
        "refraction": refraction,
        "old": fields,
        "fields": new,
    }


def _spread(corners: FloatArray) -> FloatArray:
    """Return points all over a convex polygon, shape (m, 3)."""
    triangles = [(corners[0], corners[k], corners[k + 1]) for k in range(1, len(corners) - 1)]
    number = np.arange(1, _POINTS // len(triangles) + 1)
    # two-dimensional golden-ratio sequence (Roberts, Unreasonable Effectiveness of Quasirandom Sequences, 2018, from memory)
    u, v = np.sqrt((0.5 + 0.7548776662466927 * number) % 1.0), (0.5 + 0.5698402909980532 * number) % 1.0
    parts = [a + (u * (1.0 - v))[:, None] * (b - a) + (u * v)[:, None] * (c - a) for a, b, c in triangles]
    return np.asarray(np.concatenate(parts))
