"""The [[air]] tables: one model for each kind of particle.

A new kind is a subclass of `Particles` with its own `NAME`, named twice in `AnyParticles`; loading, faults, help, the
reference page and the schema then know it.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Annotated, Any, ClassVar, Literal

from pydantic import AfterValidator, Field, GetCoreSchemaHandler, Strict, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from skyoptics.scene.fields import listing, note, number, text
from skyoptics.scene.table import Conflict, Table, distinct
from skyoptics.units import CELSIUS_ZERO, DEG, KM, UM

ORDERS = tuple(range(11))
NEAR_KM, FAR_KM, TOP_KM = 2.0, 6.0, 2.5


def beside_scene(path: str | None, info: ValidationInfo) -> str | None:
    """Make a path absolute, counted from the folder of the scene file."""
    folder = (info.context or {}).get("folder")
    return path if path is None or folder is None else str(Path(folder, path))


IndexTable = Annotated[
    str | None,
    text(1000, "CSV file of refractive index by wavelength, its path counted from the scene file; excludes index"),
    AfterValidator(beside_scene),
]
Place = Annotated[
    Literal["curtain", "layer", "shaft"],
    note(
        "A curtain has the same optical depth in every direction of view, a layer is a level sheet overhead, a shaft is rain "
        "between two distances and under a top, which weakens the light on its way through"
    ),
]
_Distance = Annotated[float, Field(ge=0, le=500)]
CrystalPlace = Annotated[
    Literal["curtain", "layer", "slab"],
    note(
        "A curtain has the same optical depth in every direction of view, a layer is a thin level sheet, a slab is a level "
        "sheet that weakens the light on its way through; all tables with a slab float in one"
    ),
]
BelowHorizon = Annotated[bool, note("Whether a curtain goes on below the horizon")]


class Particles(Table):
    """What every kind of particle has; a new kind is a subclass, named in `AnyParticles`."""

    NAME: ClassVar[str]
    """The value of `kind`."""

    kind: Annotated[str, note("Kind of particle")]
    name: Annotated[str | None, text(100, "Name for reports")] = None
    optical_depth: Annotated[
        float, number(0, 50, "", "Optical depth at 550 nm: along the line of sight (curtain) or vertical (layer)")
    ] = 0.1


class Drops(Particles):
    """Water drops, all of one size."""

    NAME: ClassVar[str] = "drops"

    kind: Annotated[Literal["drops"], note("Kind of particle")]
    radius_um: Annotated[float, number(1, 10000, "µm", "Radius of the drops")] = 500.0
    temperature_c: Annotated[
        float, number(-12, 99, "°C", "Temperature of the water; not used with index or index_table")
    ] = 10.0
    index: Annotated[
        float | None, number(1.0001, 3, "", "Refractive index, one for all wavelengths, instead of that of water")
    ] = None
    index_table: IndexTable = None
    orders: Annotated[
        tuple[Annotated[int, Field(ge=0, le=10)], ...],
        Strict(False),
        listing(
            "Which light to show: 0 external reflection, 1 direct transmission, 2 primary bow, 3 secondary bow, and on",
            most=len(ORDERS),
        ),
        AfterValidator(distinct),
        AfterValidator(lambda orders: tuple(sorted(orders))),
    ] = ORDERS
    method: Annotated[
        Literal["rays", "mie", "airy", "auto"],
        note("Ray optics, Lorenz-Mie, Airy's theory of the primary and secondary bow, or whichever fits the drops"),
    ] = "rays"
    sizes: Annotated[
        Literal["gaussian", "lognormal", "effective", "gamma", "rain", "cloud", "measured"],
        note(
            "How sizes are spread: gaussian and lognormal about radius_um by spread; effective radius and variance; gamma by "
            "mean volume radius and shape; rain by rain rate; a cloud model; a measured spectrum"
        ),
    ] = "gaussian"
    spread: Annotated[
        float,
        number(0, 0.5, "", "Relative standard deviation of the radius (gaussian) or of its logarithm (lognormal)"),
    ] = 0.0
    effective_variance: Annotated[float, number(0.001, 0.49, "", 'With sizes = "effective"')] = 0.1
    gamma_shape: Annotated[float, number(-0.9, 20, "", 'Exponent µ with sizes = "gamma"')] = 3.0
    rain_mm_h: Annotated[float, number(0.1, 200, "mm/h", 'Rain rate with sizes = "rain" (Marshall & Palmer)')] = 5.0
    cloud: Annotated[Literal["C1", "C2", "C3"], note('Cloud model with sizes = "cloud" (Deirmendjian)')] = "C1"
    spectrum: Annotated[
        str | None,
        text(1000, 'CSV file with sizes = "measured", its path counted from the scene file'),
        AfterValidator(beside_scene),
    ] = None
    spectrum_time: Annotated[str | None, text(100, "Which row in time of the spectrum; left out, all are averaged")] = (
        None
    )
    axis_ratios: Annotated[
        Literal["round", "thurai2007", "brandes2002", "beard-chuang1987"],
        note(
            "Round drops, or the law by which they flatten with size as they fall; flattened drops are shown by rays with "
            "Airy fringes, whatever the method, up to p = 7"
        ),
    ] = "round"
    canting_deg: Annotated[
        float,
        number(0, 30, "degrees", "Standard deviation of each of the two components of the tilt of flattened drops"),
    ] = 0.0
    liquid_water_g_m3: Annotated[
        float | None, number(1e-6, 100, "g/m³", "Liquid water content; with path_m it gives the optical depth")
    ] = None
    concentration_per_m3: Annotated[
        float | None, number(1e-3, 1e12, "1/m³", "Number of drops in a volume; with path_m it gives the optical depth")
    ] = None
    path_m: Annotated[
        float | None, number(0.01, 1e6, "m", "Depth of the curtain along the line of sight, or thickness of the layer")
    ] = None
    near_km: Annotated[
        float | None, number(0, 500, "km", "Distance of the near side of a shaft, on the level", default=NEAR_KM)
    ] = None
    far_km: Annotated[
        float | None, number(0, 500, "km", "Distance of the far side of a shaft, on the level", default=FAR_KM)
    ] = None
    top_km: Annotated[
        float | None, number(0.01, 20, "km", "Height of the top of a shaft above the ground", default=TOP_KM)
    ] = None
    lit_km: Annotated[
        tuple[_Distance, _Distance] | None,
        Strict(False),
        note("Between which distances the sun shines on a shaft; left out, everywhere", unit="km"),
    ] = None
    sunlit: Annotated[
        float | None, number(0, 1, "", "Share of the sun's light that gets past the clouds to a shaft", default=1.0)
    ] = None
    shade: Annotated[
        bool | None, note("Whether the drops of a shaft weaken the sunlight of those behind them; left out, they do")
    ] = None
    place: Place = "curtain"
    below_horizon: BelowHorizon = False

    @property
    def radius(self) -> float:
        """Radius [m]."""
        return self.radius_um * UM

    @property
    def reach(self) -> tuple[float, float]:
        """Level distances of a shaft's near and far side [m]."""
        near = NEAR_KM if self.near_km is None else self.near_km
        far = FAR_KM if self.far_km is None else self.far_km
        return near * KM, far * KM

    @property
    def top(self) -> float:
        """Height of a shaft's top [m]."""
        return (TOP_KM if self.top_km is None else self.top_km) * KM

    @property
    def lit(self) -> tuple[float, float]:
        """Level distances between which the sun shines on a shaft [m]."""
        return (0.0, math.inf) if self.lit_km is None else (self.lit_km[0] * KM, self.lit_km[1] * KM)

    @property
    def canting(self) -> float:
        """Canting spread [rad]."""
        return self.canting_deg * DEG

    @property
    def temperature(self) -> float:
        """Temperature [K]."""
        return self.temperature_c + CELSIUS_ZERO

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield conflicts between index and index_table, and between below_horizon and place."""
        yield from _shared_conflicts(values)
        if values.get("sizes") == "measured" and "spectrum" in values and values["spectrum"] is None:
            yield "spectrum", 'is missing; sizes = "measured" needs a CSV file'
        if values.get("sizes") == "lognormal" and values.get("spread") == 0.0:
            yield "spread", 'must lie above 0 with sizes = "lognormal"'
        given = [key for key in ("liquid_water_g_m3", "concentration_per_m3") if values.get(key) is not None]
        if len(given) == 2:
            yield "concentration_per_m3", "cannot stand beside liquid_water_g_m3; keep one of the two"
        yield from _shaft_conflicts(values)
        shaft = values.get("place") == "shaft"
        if given and not shaft and "path_m" in values and values["path_m"] is None:
            yield "path_m", f"is missing; {given[0]} needs it for an optical depth"
        if not given and values.get("path_m") is not None:
            yield "path_m", "needs liquid_water_g_m3 or concentration_per_m3 beside it"
        if values.get("axis_ratios", "round") != "round" and "orders" in values and values["orders"] != ORDERS:
            beyond = [order for order in values["orders"] if order > 7]
            if beyond:
                yield "orders", f"flattened drops are traced up to order 7, got {beyond[0]}; leave it out"
        if values.get("method") == "mie" and "orders" in values and values["orders"] != ORDERS:
            yield (
                "orders",
                'Mie theory does not part the light by order; take method = "rays" or "airy", or leave orders out',
            )


def _shaft_conflicts(values: Mapping[str, Any]) -> Iterator[Conflict]:
    """Yield what goes wrong between the keys of a rain shaft."""
    keys = ("near_km", "far_km", "top_km", "lit_km", "sunlit", "shade")
    if values.get("place", "shaft") != "shaft":
        for key in keys:
            if values.get(key) is not None:
                yield key, f'is for place = "shaft"; got place = {values["place"]!r}'
        return
    if values.get("place") == "shaft" and values.get("path_m") is not None:
        yield "path_m", "a shaft's path is from near_km to far_km; leave it out"
    if {"near_km", "far_km"} <= values.keys():
        near = NEAR_KM if values["near_km"] is None else values["near_km"]
        far = FAR_KM if values["far_km"] is None else values["far_km"]
        if not far > near:
            key = "far_km" if values["far_km"] is not None else "near_km"
            yield key, f"the far side of a shaft lies beyond the near one; got near_km = {near:g}, far_km = {far:g}"
    lit = values.get("lit_km")
    if lit is not None and not lit[0] < lit[1]:
        yield "lit_km", f"the first distance is the smaller one; got {lit[0]:g} and {lit[1]:g}"


_Miller = Annotated[int, Field(ge=-9, le=9)]
_Factor = Annotated[float, Field(ge=0.05, le=20)]


class Crystals(Particles):
    """Ice crystals of one kind of shape."""

    NAME: ClassVar[str] = "crystals"

    kind: Annotated[Literal["crystals"], note("Kind of particle")]
    shape: Annotated[
        Literal["prism", "bipyramid", "truncated-bipyramid", "pyramid", "trigonal"],
        note(
            "Hexagonal prism; two pyramids base to base; the same cut off by basal faces, with a prism between; a prism with a "
            "pyramid on its upper end; a prism of triangular cross-section"
        ),
    ] = "prism"
    aspect: Annotated[
        float | None,
        number(
            0.01,
            100,
            "",
            "Length of the prism part along the c-axis divided by the diameter across corners; below 1 a plate; left out, "
            "that of a typical crystal of the shape; not for a bipyramid",
            default=1.0,
        ),
    ] = None
    pyramid_upper: Annotated[
        float | None, number(0, 1, "", "Height of the upper pyramid divided by that of a pointed one", above=True)
    ] = None
    pyramid_lower: Annotated[
        float | None, number(0, 1, "", "Height of the lower pyramid divided by that of a pointed one", above=True)
    ] = None
    trigonality: Annotated[
        float | None, number(0, 1, "", "Of a trigonal prism: 0 a regular hexagon, 1 a triangle", default=1.0)
    ] = None
    miller: Annotated[
        tuple[_Miller, _Miller, _Miller, _Miller],
        Strict(False),
        note("Miller index of the pyramid faces, {h 0 -h l} or {h h -2h l}"),
    ] = (1, 0, -1, 1)
    face_distances: Annotated[
        tuple[_Factor, _Factor, _Factor, _Factor, _Factor, _Factor] | None,
        Strict(False),
        note("Six factors on the distances of the side faces from the c-axis; left out, a regular hexagon"),
    ] = None
    aspect_spread: Annotated[float, number(0, 1, "", "Standard deviation of the logarithm of the aspect")] = 0.0
    distance_spread: Annotated[
        float, number(0, 0.5, "", "Relative standard deviation of the distances of the faces")
    ] = 0.0
    diameter_um: Annotated[
        float, number(10, 10000, "µm", "Diameter across corners; matters for absorption and diffraction alone")
    ] = 100.0
    diffraction: Annotated[bool, note("Whether diffraction by the crystals spreads the light")] = False
    angle_spread_deg: Annotated[float, number(0, 5, "degrees", "Standard deviation of the angle between two faces")] = (
        0.0
    )
    birefringence: Annotated[bool, note("Whether the two indices of ice are told apart by polarisation")] = False
    orientation: Annotated[
        Literal["random", "plate", "column", "parry", "lowitz", "axis"],
        note(
            "How they stand: any way, c-axis near the vertical (plate), c-axis near the horizontal with free spin "
            "(column), the same with two opposite side faces near the horizontal (parry), a diagonal across the c-axis near "
            "the horizontal with free spin (lowitz), an axis of your own with free spin"
        ),
    ] = "random"
    axis_polar_deg: Annotated[
        float, number(0, 180, "degrees", 'With orientation = "axis": angle of the spin axis to the c-axis')
    ] = 0.0
    axis_azimuth_deg: Annotated[
        float,
        number(
            -360, 360, "degrees", 'With orientation = "axis": its azimuth in the crystal, from a side face\'s normal'
        ),
    ] = 0.0
    axis_inclination_deg: Annotated[
        float, number(0, 180, "degrees", 'With orientation = "axis": angle of the spin axis to the vertical')
    ] = 0.0
    tilt_deg: Annotated[
        float,
        number(
            0, 90, "degrees", "Standard deviation of each of the two components of tilt; not for random orientation"
        ),
    ] = 1.0
    tilt_law: Annotated[
        Literal["gaussian", "cone", "table"],
        note("How tilts are spread: Gaussian, evenly within a cone of tilt_deg, or by tilt_table"),
    ] = "gaussian"
    tilt_table: Annotated[
        str | None,
        text(1000, "CSV file of the number of crystals by tilt, its path counted from the scene file"),
        AfterValidator(beside_scene),
    ] = None
    share: Annotated[
        float | None, number(0, 1e12, "", "Share in the cloud of [mixture], instead of an optical depth of its own")
    ] = None
    seen_from: Annotated[
        Literal["below", "above"],
        note("Whether a layer or slab hangs over the observer, or lies under one who looks down on it from the air"),
    ] = "below"
    scatterings: Annotated[
        Literal[1, 2, "all"],
        note('With place = "slab": whether light is followed to one crystal, to two, or to the end'),
    ] = 1
    index: Annotated[
        float | None, number(1.0001, 2, "", "Refractive index, one for all wavelengths, instead of that of ice")
    ] = None
    index_table: IndexTable = None
    place: CrystalPlace = "layer"
    height_km: Annotated[
        float | None,
        number(
            0,
            80,
            "km",
            "Height of a layer or slab above the observer: the air above it and below it dims its light; left out, none does",
        ),
    ] = None
    below_horizon: BelowHorizon = False

    @property
    def height(self) -> float | None:
        """Height of the layer [m]; None where no air is to lie in front of it."""
        return None if self.height_km is None else self.height_km * KM

    @property
    def diameter(self) -> float:
        """Diameter across corners [m]."""
        return self.diameter_um * UM

    @property
    def tilt(self) -> float:
        """Tilt spread [rad]."""
        return self.tilt_deg * DEG

    @property
    def angle_spread(self) -> float:
        """Spread of interfacial angles [rad]."""
        return self.angle_spread_deg * DEG

    @property
    def axis(self) -> tuple[float, float]:
        """Polar angle and azimuth of the spin axis in the crystal [rad]."""
        return self.axis_polar_deg * DEG, self.axis_azimuth_deg * DEG

    @property
    def axis_inclination(self) -> float:
        """Angle of the spin axis to the vertical [rad]."""
        return self.axis_inclination_deg * DEG

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield keys that another key leaves without meaning."""
        yield from _shared_conflicts(values)
        shape = values.get("shape", "prism")
        if shape == "bipyramid" and values.get("aspect") is not None:
            yield "aspect", "a bipyramid has none, its faces fix it; leave it out or take a truncated-bipyramid"
        for key, shapes in (
            ("pyramid_upper", ("truncated-bipyramid", "pyramid")),
            ("pyramid_lower", ("truncated-bipyramid",)),
            ("trigonality", ("trigonal",)),
        ):
            if values.get(key) is not None and shape not in shapes:
                yield key, f"is for shape = {' or '.join(shapes)}; got shape = {shape!r}"
        if values.get("birefringence") is True and (
            values.get("index") is not None or values.get("index_table") is not None
        ):
            yield "birefringence", "tells the two indices of ice apart; leave index and index_table out"
        orientation = values.get("orientation", "random")
        given = [key for key in ("axis_polar_deg", "axis_azimuth_deg", "axis_inclination_deg") if values.get(key)]
        if given and orientation != "axis":
            yield given[0], f'is for orientation = "axis"; got orientation = {orientation!r}'
        if values.get("tilt_law") == "table" and "tilt_table" in values and values["tilt_table"] is None:
            yield "tilt_table", 'is missing; tilt_law = "table" needs a CSV file'
        if values.get("tilt_table") is not None and values.get("tilt_law", "table") != "table":
            yield "tilt_table", 'is for tilt_law = "table"'
        if values.get("seen_from", "below") != "below" and values.get("place") == "curtain":
            yield "seen_from", "a curtain hangs all around; leave this out or take a layer or a slab"
        if values.get("height_km") is not None and values.get("place") == "curtain":
            yield "height_km", "a curtain hangs all around; leave this out or take a layer or a slab"
        if values.get("scatterings", 1) != 1 and values.get("place", "slab") != "slab":
            yield "scatterings", 'further scatterings are for place = "slab"'


def _shared_conflicts(values: Mapping[str, Any]) -> Iterator[Conflict]:
    """Yield what goes wrong between the keys that drops and crystals share."""
    if values.get("index") is not None and values.get("index_table") is not None:
        yield "index_table", "cannot stand beside index; keep one of the two"
    if values.get("below_horizon") is True and values.get("place") in ("layer", "slab"):
        yield "below_horizon", f'a {values["place"]} ends at the horizon; leave this out or set place = "curtain"'


class _ByKind:
    """Annotation that picks the model of a table by its `kind`; works for a single kind too."""

    def __init__(self, *kinds: type[Particles]) -> None:
        self.kinds = {kind.NAME: kind for kind in kinds}

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        choices = {name: handler.generate_schema(kind) for name, kind in self.kinds.items()}
        return core_schema.tagged_union_schema(choices, discriminator=_kind)


def _kind(value: Any) -> str | None:
    """Return the kind that an [[air]] table states, or ``None`` where that is no text."""
    kind = value.get("kind") if isinstance(value, dict) else getattr(value, "kind", None)
    return kind if isinstance(kind, str) else None


_BY_KIND = _ByKind(Drops, Crystals)
AnyParticles = Annotated[Drops | Crystals, _BY_KIND]
KINDS: Mapping[str, type[Particles]] = _BY_KIND.kinds
"""Model by value of `kind`, for every kind of particle there is."""
