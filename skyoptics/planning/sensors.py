"""Sensors by the trade's names or by size, held upright or not, cropped; focal lengths by their 35-mm equivalent.

Sizes under the names are common practice, no source: makers differ by some tenths of a millimetre, so a size from a camera's
own data sheet is better than a name.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, replace

from skyoptics.errors import DomainError, nearest
from skyoptics.units import MM

SENSORS_MM: dict[str, tuple[float, float]] = {
    "full-frame": (36.0, 24.0),
    "aps-h": (28.7, 19.0),
    "aps-c": (23.6, 15.7),
    "aps-c-1.6": (22.3, 14.9),
    "four-thirds": (17.3, 13.0),
    "one-inch": (13.2, 8.8),
    "1/1.3-inch": (9.8, 7.3),
    "2/3-inch": (8.8, 6.6),
    "1/1.7-inch": (7.6, 5.7),
    "1/2.3-inch": (6.2, 4.6),
    "super-35": (24.9, 18.7),
    "medium-format": (43.8, 32.9),
    "medium-format-645": (53.4, 40.0),
}
"""Width and height by name [mm]; common practice, no source."""
ORIENTATIONS = ("landscape", "portrait")
LEAST_MM, MOST_MM = 1.0, 1000.0
"""Sides that are taken for a sensor's [mm]."""

_ALSO = {
    "35mm": "full-frame",
    "fullframe": "full-frame",
    "apsc": "aps-c",
    "apsh": "aps-h",
    "micro-four-thirds": "four-thirds",
    "mft": "four-thirds",
    "1-inch": "one-inch",
}
_NUMBER = r"(\d+(?:\.\d*)?|\.\d+)"
_SIZE = re.compile(rf"{_NUMBER}\s*(?:mm)?\s*[x×*]\s*{_NUMBER}\s*(?:mm)?", re.IGNORECASE)
_ASPECT = re.compile(rf"{_NUMBER}\s*[:/]\s*{_NUMBER}")
_DIAGONAL = math.hypot(36.0, 24.0) * MM
"""Of the frame that equivalent focal lengths speak of [m]."""


@dataclass(frozen=True)
class Sensor:
    """The part of an image plane that is recorded, as it is held.

    Parameters
    ----------
    width, height : float
        [m]
    name : str
        Empty where it was given by size.
    """

    width: float
    height: float
    name: str = ""

    @property
    def diagonal(self) -> float:
        """Length of the diagonal [m]."""
        return math.hypot(self.width, self.height)

    @property
    def orientation(self) -> str:
        """How it is held, "landscape" or "portrait"; a square is landscape."""
        return "portrait" if self.height > self.width else "landscape"

    def held(self, orientation: str) -> Sensor:
        """Return the sensor with its long side across ("landscape") or upright ("portrait").

        Raises
        ------
        DomainError
            For another word.
        """
        if orientation not in ORIENTATIONS:
            raise DomainError(
                f"no orientation {orientation!r}; there are {', '.join(ORIENTATIONS)}{nearest(orientation, ORIENTATIONS)}"
            )
        short, long = sorted((self.width, self.height))
        width, height = (long, short) if orientation == "landscape" else (short, long)
        return replace(self, width=width, height=height)

    def cropped(self, aspect: str) -> Sensor:
        """Return the largest part of the sensor that has an aspect.

        Parameters
        ----------
        aspect : str
            Such as "16:9"; the larger number belongs to the sensor's long side, whichever stands first.

        Raises
        ------
        DomainError
            If it is no such pair of numbers, or outside 1:1 to 10:1.
        """
        found = _ASPECT.fullmatch(aspect.strip())
        sides = sorted(float(side) for side in found.groups()) if found else [0.0, 0.0]
        if not sides[0] > 0.0:
            raise DomainError(f"{aspect!r} is no aspect; give two numbers parted by a colon, such as 16:9")
        ratio = sides[1] / sides[0]
        if ratio > 10.0:
            raise DomainError(f"an aspect of {aspect} is outside 1:1 to 10:1")
        short, long = sorted((self.width, self.height))
        short, long = min(short, long / ratio), min(long, short * ratio)
        width, height = (short, long) if self.orientation == "portrait" else (long, short)
        return replace(self, width=width, height=height)


def find(text: str) -> Sensor:
    """Return a sensor by name or by size.

    Parameters
    ----------
    text : str
        One of `names`, or width × height in millimetres, such as "36x24"; the sides are kept in this order.

    Returns
    -------
    Sensor

    Raises
    ------
    DomainError
        For an unknown name, with the nearest one, and for sides that no sensor has.
    """
    asked = text.strip().casefold()
    size = _SIZE.fullmatch(asked)
    if size is not None:
        width, height = (float(side) for side in size.groups())
        if not (LEAST_MM <= width <= MOST_MM and LEAST_MM <= height <= MOST_MM):
            raise DomainError(
                f"a sensor of {width:g} × {height:g} mm cannot be; sides are {LEAST_MM:g} to {MOST_MM:g} mm long"
            )
        return Sensor(width * MM, height * MM)
    name = re.sub(r"[\s_]+", "-", asked)
    name = _ALSO.get(name, name)
    if name not in SENSORS_MM:
        raise DomainError(
            f"no sensor {text!r}; give width × height in mm, such as 36x24, or one of {', '.join(SENSORS_MM)}"
            f"{nearest(name, SENSORS_MM)}"
        )
    width, height = SENSORS_MM[name]
    return Sensor(width * MM, height * MM, name)


def names() -> tuple[str, ...]:
    """Return the names of sensors."""
    return tuple(SENSORS_MM)


def from_equivalent(equivalent: float, sensor: Sensor) -> float:
    """Return the focal length whose 35-mm equivalent is given: the same angle across the diagonal.

    Parameters
    ----------
    equivalent : float
        Focal length on 36 × 24 mm [m].
    sensor : Sensor
        Uncropped.

    Returns
    -------
    float
        [m]; common practice, no source. Exact for ordinary (rectilinear) lenses.
    """
    return equivalent * sensor.diagonal / _DIAGONAL


def to_equivalent(focal: float, sensor: Sensor) -> float:
    """Return the 35-mm equivalent of a focal length [m]: the inverse of `from_equivalent`."""
    return focal * _DIAGONAL / sensor.diagonal
