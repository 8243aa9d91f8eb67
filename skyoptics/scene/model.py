"""The scene as frozen, strict models: human units in the field names, SI values under the bare names.

``radius_um`` is what the file says, ``radius`` the same in metres. Fields that may be left out because another one
decides them hold ``None``; the bare names always give the value in force.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from datetime import datetime
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Discriminator, Field, Strict, Tag

from skyoptics.errors import DomainError
from skyoptics.light.zones import parse_time
from skyoptics.scene.fields import listing, note, number, text
from skyoptics.scene.ground import Ground
from skyoptics.scene.particles import KINDS, AnyParticles, Drops, Particles
from skyoptics.scene.table import Conflict, Table, distinct, one_turn
from skyoptics.units import DEG, HPA, KM, MM, NM

__all__ = ["KINDS", "Aim", "Camera", "Drops", "Light", "Medium", "Particles", "Picture", "Scene", "Table"]

AZIMUTH_DEG = 180.0
BACKGROUND = 0.01
CLOUD_DEPTH = 30.0
FOCAL_MM = 24.0
SENSOR_MM = (36.0, 24.0)
PANORAMA_DEG = (360.0, 180.0)
WIDTH_PX = 1200
MOST_PIXELS = 30000
RECTILINEAR_LIMIT_DEG = 80.0
"""Half the diagonal field at which a rectilinear picture is refused: the corners are stretched 33 times there."""


class Light(Table):
    """The sun or the moon, and what the air takes out of its light."""

    body: Annotated[Literal["sun", "moon"], note("What shines")] = "sun"
    phase_angle_deg: Annotated[
        float, number(0, 150, "degrees", "The moon's phase angle: 0 full, 90 half; not for the sun")
    ] = 0.0
    mirrored: Annotated[
        bool, note("Whether calm water adds the light of its mirror image, from as far below the horizon")
    ] = False

    elevation_deg: Annotated[
        float | None,
        number(-1, 90, "degrees", "Height of the sun's or moon's centre above the horizon; or give place and time"),
    ] = None
    azimuth_deg: Annotated[
        float,
        number(-360, 360, "degrees", "Azimuth of the sun or moon, clockwise from north"),
        AfterValidator(one_turn),
    ] = AZIMUTH_DEG
    latitude_deg: Annotated[
        float | None, number(-90, 90, "degrees", "Latitude of the place, north positive, instead of elevation_deg")
    ] = None
    longitude_deg: Annotated[float | None, number(-180, 180, "degrees", "Longitude of the place, east positive")] = None
    time: Annotated[
        str | None,
        text(60, "When: ISO 8601 with an offset, 2027-05-12T19:40+02:00, or local time with zone"),
        BeforeValidator(lambda value: value.isoformat() if isinstance(value, datetime) else value),
    ] = None
    zone: Annotated[str | None, text(60, "Time zone of a local time by its name, such as Europe/Zurich")] = None
    height_m: Annotated[float, number(-500, 9000, "m", "Height of the place above the sea")] = 0.0
    temperature_c: Annotated[float, number(-80, 60, "°C", "Temperature of the air, for refraction")] = 10.0
    disc: Annotated[
        Literal["sun", "point"], note("The sun's limb-darkened disc, or a point of the same irradiance")
    ] = "sun"
    attenuation: Annotated[
        Literal["air", "none"], note("Whether sunlight is weakened on its way through the atmosphere")
    ] = "air"
    ozone_du: Annotated[float, number(0, 1000, "DU", "Ozone column")] = 300.0
    aerosol_depth: Annotated[float, number(0, 5, "", "Vertical optical depth of the haze at 550 nm")] = 0.1
    aerosol_exponent: Annotated[
        float, number(0, 3, "", "Ångström exponent of the haze: its optical depth goes as wavelength to minus this")
    ] = 1.3
    water_vapour_cm: Annotated[
        float, number(0, 10, "cm", "Water vapour over the observer, as depth of liquid water")
    ] = 1.42
    pressure_hpa: Annotated[float, number(100, 1100, "hPa", "Air pressure at the observer")] = 1013.25

    @property
    def elevation(self) -> float | None:
        """Elevation [rad]; None where place and time decide."""
        return None if self.elevation_deg is None else self.elevation_deg * DEG

    @property
    def azimuth(self) -> float | None:
        """Azimuth [rad]; None where place and time decide."""
        return None if self.elevation_deg is None else self.azimuth_deg * DEG

    @property
    def when(self) -> datetime | None:
        """The instant; None without a time."""
        return None if self.time is None else parse_time(self.time, self.zone)

    @property
    def pressure(self) -> float:
        """Air pressure [Pa]."""
        return self.pressure_hpa * HPA

    @property
    def phase_angle(self) -> float:
        """Phase angle of the moon [rad]."""
        return self.phase_angle_deg * DEG

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield place and time beside a direction, parts of them that are missing, and a mirror image below the horizon."""
        if values.get("mirrored") is True and (values.get("elevation_deg") or 1.0) <= 0.0:
            yield "mirrored", "water mirrors what stands above the horizon; take light.elevation_deg above 0"
        places = ("latitude_deg", "longitude_deg", "time")
        if not {"elevation_deg", "azimuth_deg", "phase_angle_deg", "zone", *places} <= values.keys():
            return
        given = [key for key in places if values[key] is not None]
        if values["elevation_deg"] is not None:
            if given:
                yield given[0], "cannot stand beside elevation_deg; give a direction, or place and time"
            return
        if not given:
            yield "elevation_deg", "is missing; give the height of the sun, or latitude_deg, longitude_deg and time"
            return
        missing = [key for key in places if values[key] is None]
        if missing:
            yield missing[0], f"is missing beside {given[0]}; place and time are latitude_deg, longitude_deg and time"
        if values["azimuth_deg"] != AZIMUTH_DEG:
            yield "azimuth_deg", "cannot stand beside latitude_deg; place and time decide it"
        if values["phase_angle_deg"] != 0.0:
            yield "phase_angle_deg", "cannot stand beside latitude_deg; place and time decide it"
        if values["time"] is not None:
            try:
                parse_time(values["time"], values["zone"])
            except DomainError as error:
                yield "time", str(error)


class Medium(Table):
    """What the particles float in."""

    kind: Annotated[
        Literal["air", "vacuum"],
        note("What refractive indices are taken relative to; moves a bow by 0.05 to 0.1 degrees"),
    ] = "air"
    visual_range_km: Annotated[
        float | None,
        number(
            0.05,
            300,
            "km",
            "Distance at which a black hill keeps 2 % contrast: the haze in front of rain shafts; left out, it follows from the "
            "air of [light]",
        ),
    ] = None

    @property
    def visual_range(self) -> float | None:
        """Visual range [m]; None where the air of the light decides."""
        return None if self.visual_range_km is None else self.visual_range_km * KM


class Aim(Table):
    """Where the camera points."""

    azimuth_deg: Annotated[
        float,
        number(-360, 360, "degrees", "Azimuth of the picture's centre, clockwise from north"),
        AfterValidator(one_turn),
    ]
    elevation_deg: Annotated[float, number(-90, 90, "degrees", "Elevation of the picture's centre")]
    roll_deg: Annotated[
        float,
        number(-360, 360, "degrees", "Turn of the camera about its line of sight, clockwise as the camera sees it"),
    ] = 0.0

    @property
    def azimuth(self) -> float:
        """Azimuth [rad]."""
        return self.azimuth_deg * DEG

    @property
    def elevation(self) -> float:
        """Elevation [rad]."""
        return self.elevation_deg * DEG

    @property
    def roll(self) -> float:
        """Roll [rad]."""
        return self.roll_deg * DEG


_Word = Annotated[Literal["sun", "antisolar"], Tag("word")]
_Size = Annotated[float, Field(ge=1, le=1000)]


class Camera(Table):
    """Who looks: lens, sensor, picture size and aim."""

    lens: Annotated[
        Literal["rectilinear", "equidistant", "equisolid", "stereographic", "orthographic", "panorama"],
        note("Projection: the ordinary lens, four fisheyes, or longitude and latitude"),
    ] = "rectilinear"
    focal_mm: Annotated[float | None, number(0.5, 5000, "mm", "Focal length; not for a panorama", default=FOCAL_MM)] = (
        None
    )
    sensor_mm: Annotated[
        tuple[_Size, _Size] | None,
        Strict(False),
        note("Width and height of the sensor; not for a panorama", unit="mm", default=list(SENSOR_MM)),
    ] = None
    width_px: Annotated[
        int | None,
        number(
            1, MOST_PIXELS, "pixels", f"Width of the picture; left out, it follows from the height, or is {WIDTH_PX}"
        ),
    ] = None
    height_px: Annotated[
        int | None, number(1, MOST_PIXELS, "pixels", "Height of the picture; left out, it follows from the width")
    ] = None
    width_deg: Annotated[
        float | None,
        number(0, 360, "degrees", "Width of a panorama, in azimuth", above=True, default=PANORAMA_DEG[0]),
    ] = None
    height_deg: Annotated[
        float | None,
        number(0, 180, "degrees", "Height of a panorama, in elevation", above=True, default=PANORAMA_DEG[1]),
    ] = None
    aperture: Annotated[
        float | None, number(0.5, 256, "", "f-number; with exposure_s and iso it fixes the exposure")
    ] = None
    exposure_s: Annotated[float | None, number(1e-6, 1e5, "s", "Exposure time, beside aperture and iso")] = None
    iso: Annotated[float | None, number(1, 1e7, "", "ISO speed of the sensor, beside aperture and exposure_s")] = None
    polariser_deg: Annotated[
        float | None,
        number(
            -360,
            360,
            "degrees",
            "Axis of a polariser, from the top of the picture, clockwise from behind; none without it",
        ),
    ] = None
    aim: Annotated[
        _Word | Annotated[Aim, Tag("table")],
        Discriminator(lambda value: "table" if isinstance(value, dict | Aim) else "word"),
        note("What the picture's centre looks at: the sun, the point opposite it, or a direction"),
    ] = "antisolar"

    eye_height_m: Annotated[
        float,
        number(0, 9000, "m", "Height of the eye above the ground around: lowers the horizon, looks over the rain"),
    ] = 0.0
    cover_deg: Annotated[
        float, number(0, 20, "degrees", "Angular radius of a small dark disc held over the sun or moon; 0 for none")
    ] = 0.0

    @property
    def eye_height(self) -> float:
        """Height of the eye above the ground [m]."""
        return self.eye_height_m

    @property
    def cover(self) -> float:
        """Angular radius of the disc over the source [rad]."""
        return self.cover_deg * DEG

    @property
    def polariser(self) -> float | None:
        """Axis of the polariser [rad]; None for none."""
        return None if self.polariser_deg is None else self.polariser_deg * DEG

    @property
    def focal(self) -> float:
        """Focal length [m]; a panorama has none and raises `DomainError`."""
        if self.lens == "panorama":
            raise DomainError("a panorama has no focal length; its field is width_deg by height_deg")
        return (FOCAL_MM if self.focal_mm is None else self.focal_mm) * MM

    @property
    def sensor(self) -> tuple[float, float]:
        """Width and height of the sensor [m]; a panorama has none and raises `DomainError`."""
        if self.lens == "panorama":
            raise DomainError("a panorama has no sensor; its field is width_deg by height_deg")
        width_mm, height_mm = self.sensor_mm or SENSOR_MM
        return width_mm * MM, height_mm * MM

    @property
    def width(self) -> float:
        """Width of a panorama [rad]."""
        return (PANORAMA_DEG[0] if self.width_deg is None else self.width_deg) * DEG

    @property
    def height(self) -> float:
        """Height of a panorama [rad]."""
        return (PANORAMA_DEG[1] if self.height_deg is None else self.height_deg) * DEG

    @property
    def pixels(self) -> tuple[int, int]:
        """Columns and rows of the picture."""
        columns, rows = _pixels(dict(self))
        return columns, rows

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield keys of the wrong kind of lens, too wide a field, a side that comes out too long, half an exposure."""
        lens = values.get("lens")
        given = [key for key, value in values.items() if value is not None]
        settings = ("aperture", "exposure_s", "iso")
        if set(settings) <= values.keys():
            missing = [key for key in settings if key not in given]
            if missing and len(missing) < len(settings):
                there = next(key for key in settings if key in given)
                yield (
                    missing[0],
                    f"is missing beside {there}; an exposure takes aperture, exposure_s and iso, or none of them",
                )
        if lens == "panorama":
            for key in ("focal_mm", "sensor_mm"):
                if key in given:
                    yield key, 'not for lens = "panorama", whose field is width_deg by height_deg'
        elif lens is not None:
            for key in ("width_deg", "height_deg"):
                if key in given:
                    yield key, f'only for lens = "panorama"; for "{lens}" use focal_mm and sensor_mm'
        if lens == "rectilinear" and "focal_mm" in values and "sensor_mm" in values:
            half_diagonal_mm = math.hypot(*(values["sensor_mm"] or SENSOR_MM)) / 2.0
            half_field_deg = math.atan(half_diagonal_mm / (values["focal_mm"] or FOCAL_MM)) / DEG
            if half_field_deg >= RECTILINEAR_LIMIT_DEG:
                shortest_mm = half_diagonal_mm / math.tan(RECTILINEAR_LIMIT_DEG * DEG)
                yield (
                    "focal_mm" if "focal_mm" in given else "sensor_mm",
                    f"half the diagonal field is {half_field_deg:.1f} degrees; a rectilinear picture must stay below "
                    f"{RECTILINEAR_LIMIT_DEG:g}: take a focal length above {shortest_mm:.2f} mm, a smaller sensor, or "
                    f'a fisheye such as lens = "equidistant"',
                )
        shape_keys = ("width_deg", "height_deg") if lens == "panorama" else ("sensor_mm",)
        if {"lens", "width_px", "height_px", *shape_keys} <= values.keys():
            columns, rows = _pixels(values)
            for key, other, side in (("width_px", "height_px", columns), ("height_px", "width_px", rows)):
                if side > MOST_PIXELS:
                    source = " and ".join(name for name in (other, *shape_keys) if name in given) or "the default width"
                    yield key, f"comes out as {side} pixels from {source}; must lie between 1 and {MOST_PIXELS} pixels"


def _pixels(values: Mapping[str, Any]) -> tuple[int, int]:
    """Return columns and rows, the missing one from the aspect of the sensor or panorama."""
    columns, rows = values["width_px"], values["height_px"]
    if values["lens"] == "panorama":
        width, height = values["width_deg"] or PANORAMA_DEG[0], values["height_deg"] or PANORAMA_DEG[1]
    else:
        width, height = values["sensor_mm"] or SENSOR_MM
    if columns is None:
        # A minute height_deg makes the quotient overflow to infinity, which no pixel count can hold.
        columns = WIDTH_PX if rows is None else max(1, round(min(rows * (width / height), 1e9)))
    if rows is None:
        rows = max(1, round(min(columns * (height / width), 1e9)))
    return columns, rows


class Picture(Table):
    """What comes out: wavelengths, brightness and colour."""

    wavelengths_nm: Annotated[
        tuple[Annotated[float, Field(ge=300, le=1100)], ...] | None,
        Strict(False),
        listing("Exactly these wavelengths; left out with bin_nm, the standard bins are taken", "nm"),
        AfterValidator(lambda entries: None if entries is None else distinct(entries)),
    ] = None
    bin_nm: Annotated[
        float | None, number(0.5, 100, "nm", "Bins of this width through the visible, instead of wavelengths_nm")
    ] = None
    exposure_ev: Annotated[
        float | None, number(-20, 40, "EV", "Exposure; left out, it is chosen from the picture's brightness")
    ] = None
    metering: Annotated[
        Literal["sky", "average"],
        note(
            "What chooses an exposure that is left out: a rule for bows and halos before a sky, or the mean of the picture, as "
            "a reflected-light meter takes it"
        ),
    ] = "sky"
    sky: Annotated[
        Literal["plain", "clear", "overcast"],
        note(
            "What lies behind: one plain radiance; the clear sky with the light and air of [light]; or a closed level cloud "
            "under it"
        ),
    ] = "plain"
    cloud_depth: Annotated[
        float, number(1, 1000, "", 'Optical depth of the cloud with sky = "overcast"; 100 makes a dark rain cloud')
    ] = CLOUD_DEPTH
    background: Annotated[
        float,
        number(0, 1e6, "W m⁻² sr⁻¹ nm⁻¹", "Spectral radiance of a plain sky behind, the same at every wavelength"),
    ] = BACKGROUND
    ground: Annotated[
        float,
        number(
            0, 1, "", "Share of a plain background's radiance seen below the horizon; albedo of the ground under a sky"
        ),
    ] = 0.25
    white: Annotated[
        Literal["display", "light", "daylight", "auto"],
        note(
            "What looks neutral: equal to the display's white (nothing is adapted), the light that falls on the "
            "particles, daylight of 5500 K, or a light found in the picture, 3000 to 7000 K"
        ),
    ] = "display"
    white_kelvin: Annotated[
        float | None, number(2000, 25000, "K", "Colour temperature of the light that looks neutral, instead of white")
    ] = None
    glare: Annotated[
        Literal["none", "eye"],
        note(
            "Whether bright things are spread as by the eye's optics, the sun or moon in the picture drawn among them"
        ),
    ] = "none"
    show_sun: Annotated[
        bool | None,
        note(
            "Whether the sun or moon itself is drawn, a round disc of its true brightness; left out, it is where there is glare"
        ),
    ] = None
    observer: Annotated[
        Literal["1931", "1964", "scotopic"],
        note(
            "CIE standard observer: 1931 (2 degrees), 1964 (10 degrees), or scotopic: the dark-adapted eye, without colours"
        ),
    ] = "1931"
    depth_bits: Annotated[Literal[8, 16], note("Bits per channel of the picture file", unit="bits")] = 8

    @property
    def wavelengths(self) -> tuple[float, ...] | None:
        """Wavelengths [m]."""
        return None if self.wavelengths_nm is None else tuple(value * NM for value in self.wavelengths_nm)

    @property
    def bin(self) -> float | None:
        """Width of a bin [m]."""
        return None if self.bin_nm is None else self.bin_nm * NM

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield what would decide twice: wavelengths, exposure or white; and whites for an eye without colours."""
        if values.get("exposure_ev") is not None and values.get("metering", "sky") != "sky":
            yield "metering", "has nothing to decide beside exposure_ev; keep one of the two"
        if values.get("white_kelvin") is not None and values.get("white", "display") != "display":
            yield "white_kelvin", "cannot stand beside white; keep one of the two"
        if values.get("observer") == "scotopic":
            for key in ("white_kelvin", "white"):
                if values.get(key) not in (None, "display", "light"):
                    yield key, "has nothing to balance: the dark-adapted eye sees no colours"
        if values.get("wavelengths_nm") is not None and values.get("bin_nm") is not None:
            yield "bin_nm", "cannot stand beside wavelengths_nm; keep one of the two"
        if values.get("sky", "plain") != "plain" and values.get("background", BACKGROUND) != BACKGROUND:
            yield "background", 'is for sky = "plain"; leave it out'
        if values.get("sky", "overcast") != "overcast" and values.get("cloud_depth", CLOUD_DEPTH) != CLOUD_DEPTH:
            yield "cloud_depth", 'is for sky = "overcast"; leave it out'


class Mixture(Table):
    """A cloud of several kinds of crystals, those with a share of their own."""

    optical_depth: Annotated[
        float, number(0, 50, "", "Optical depth at 550 nm of all of them together, as of one kind")
    ] = 0.1
    by: Annotated[
        Literal["number", "cross-section", "optical-depth"],
        note(
            "What the shares count: crystals; their cross-section, mean over all orientations; or the vertical optical depth "
            "with the crystals as they stand"
        ),
    ] = "number"


class Scene(Table):
    """A whole scene: what lights it, what floats in the air, who looks, what comes out."""

    title: Annotated[str | None, text(200, "Title of the picture")] = None
    author: Annotated[str | None, text(200, "Who made it; goes into captions and picture files")] = None
    licence: Annotated[str | None, text(200, "Its licence, a line for captions and picture files")] = None
    look_for: Annotated[str | None, text(500, "One sentence on what to look for in the picture")] = None
    light: Annotated[Light, note("What lights the scene")]
    medium: Annotated[Medium, note("What the particles float in")] = Medium()
    air: Annotated[
        tuple[AnyParticles, ...],
        Strict(False),
        Field(
            min_length=1, max_length=100, description="What floats in the air, one [[air]] table per kind of particle"
        ),
    ]
    mixture: Annotated[Mixture | None, note("The cloud of those [[air]] tables that have a share")] = None
    ground: Annotated[Ground | None, note("The land around; left out, it is level and even")] = None
    camera: Annotated[Camera, note("Who looks")] = Camera()
    picture: Annotated[Picture, note("What comes out")] = Picture()

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield what would fix the exposure twice: a camera's settings beside an exposure value or a meter."""
        camera, picture = values.get("camera"), values.get("picture")
        if not isinstance(camera, Camera) or not isinstance(picture, Picture) or camera.aperture is None:
            return
        for key, usual in (("exposure_ev", None), ("metering", "sky")):
            if getattr(picture, key) != usual:
                yield (
                    f"picture.{key}",
                    "cannot stand beside camera.aperture, exposure_s and iso, which fix the exposure; keep one of the two",
                )
