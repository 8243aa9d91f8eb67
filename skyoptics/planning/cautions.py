"""Cautions for the field, where they matter: sun near the frame, thunderstorms, roads, water, night, cold.

Plain statements with their source; the local weather service and the rules of the place come first.

References
----------
United States National Weather Service, lightning safety: "When thunder roars, go indoors", and wait 30 minutes after the
last thunder. ISO 12312-2:2015, filters for direct observation of the sun: for viewing without magnification only.
"""

from __future__ import annotations

from typing import Literal

from skyoptics.planning.words import BOWS

NEAR_FRAME_DEG = 5.0
"""How far outside the frame the sun still counts as near it: a hand's slip or the next step."""

LIGHTNING = (
    "Showers bring lightning, also where it is not raining. When thunder roars, go indoors, and stay there until 30 minutes "
    "after the last thunder (US National Weather Service)."
)
ROADS = "Looking for a view: do not stop on a road or railway, and look behind before stepping back from the camera."
WATER = "Spray, wet rock and banks are slippery: keep away from the water's edge and from cliff edges."
NIGHT = "In the dark: know the way back before you need it, carry a light, and be seen on roads."
COLD = (
    "Where the crystals float near the ground there is hard frost: mind ice underfoot, bare metal, drained batteries."
)
AUTHORITY = (
    "Ask the local weather service and keep to the rules of the place: this plan knows geometry, not the weather."
)
SUN_BESIDE = (
    "With halos the sun is often in view. Never look at it through an optical viewfinder or lens, nor long with the eye: hide "
    "it behind a fixed object, use a screen. Eclipse filters after ISO 12312-2 are for the unaided eye, not for use behind a "
    "lens."
)
SUN_IN_FRAME = (
    "The sun is in the frame. Do not look through an optical viewfinder; use the screen, and uncover the lens only for the "
    "exposure: eyes, sensor and shutter can be burnt, by a long lens within seconds. Filters after ISO 12312-2 are for "
    "the unaided eye only; a solar filter for a camera goes over the front of the lens."
)
SUN_NEAR_FRAME = (
    "The sun is near the frame: a slip of the aim brings it in. Do not look through an optical viewfinder while aiming; cover "
    "the lens between exposures."
)


def for_feature(name: str, body: Literal["sun", "moon"] = "sun") -> tuple[str, ...]:
    """Return what to mind when a feature is photographed.

    Parameters
    ----------
    name : str
        Of the feature, such as ``primary`` or ``halo_22``.
    body : {"sun", "moon"}
        What lights it.

    Returns
    -------
    tuple of str
        Sentences, the gravest first.
    """
    found = []
    bow = name in BOWS
    if not bow and body == "sun":
        found.append(SUN_BESIDE)
    if bow and name != "fogbow":
        found.append(LIGHTNING)
    if body == "moon":
        found.append(NIGHT)
    if not bow and name != "circumhorizontal":  # of a summer's high sun
        found.append(COLD)
    found.append(ROADS)
    if bow:
        found.append(WATER)
    return (*found, AUTHORITY)


def for_aim(sun_separation_deg: float, half_diagonal_deg: float) -> tuple[str, ...]:
    """Return what to mind when a lens is aimed near the sun.

    Parameters
    ----------
    sun_separation_deg : float
        Between the aim and the sun's centre.
    half_diagonal_deg : float
        From the middle of the frame to its corner.

    Returns
    -------
    tuple of str
        Empty where the sun is more than `NEAR_FRAME_DEG` outside the circle around the frame. A sun in that circle
        counts as in the frame: a turn of the camera would bring it in.
    """
    if sun_separation_deg <= half_diagonal_deg:
        return (SUN_IN_FRAME,)
    return (SUN_NEAR_FRAME,) if sun_separation_deg <= half_diagonal_deg + NEAR_FRAME_DEG else ()
