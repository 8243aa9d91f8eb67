"""The [[air]] tables: one model for each kind of particle.

A new kind is a subclass of `Particles` with its own `NAME`, named twice in `AnyParticles`; loading, faults, help, the
reference page and the schema then know it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Annotated, Any, ClassVar, Literal

from pydantic import AfterValidator, Field, GetCoreSchemaHandler, Strict, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from skyoptics.scene.fields import listing, note, number, text
from skyoptics.scene.table import Conflict, Table, distinct
from skyoptics.units import CELSIUS_ZERO, DEG, UM

ORDERS = tuple(range(11))


def _beside_scene(path: str | None, info: ValidationInfo) -> str | None:
    """Make a path absolute, counted from the folder of the scene file."""
    folder = (info.context or {}).get("folder")
    return path if path is None or folder is None else str(Path(folder, path))


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
    index_table: Annotated[
        str | None,
        text(1000, "CSV file of refractive index by wavelength, its path counted from the scene file; excludes index"),
        AfterValidator(_beside_scene),
    ] = None
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
    place: Annotated[
        Literal["curtain", "layer"],
        note("A curtain has the same optical depth in every direction of view, a layer is a level sheet overhead"),
    ] = "curtain"
    below_horizon: Annotated[bool, note("Whether a curtain goes on below the horizon")] = False

    @property
    def radius(self) -> float:
        """Radius [m]."""
        return self.radius_um * UM

    @property
    def temperature(self) -> float:
        """Temperature [K]."""
        return self.temperature_c + CELSIUS_ZERO

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield conflicts between index and index_table, and between below_horizon and place."""
        yield from _shared_conflicts(values)


class Crystals(Particles):
    """Hexagonal ice prisms, all of one shape."""

    NAME: ClassVar[str] = "crystals"

    kind: Annotated[Literal["crystals"], note("Kind of particle")]
    aspect: Annotated[
        float, number(0.01, 100, "", "Length along the c-axis divided by the diameter across corners; below 1 a plate")
    ] = 1.0
    diameter_um: Annotated[float, number(10, 10000, "µm", "Diameter across corners; matters for absorption alone")] = (
        100.0
    )
    orientation: Annotated[
        Literal["random", "plate", "column", "parry"],
        note(
            "How they stand: any way, c-axis near the vertical (plate), c-axis near the horizontal with free spin "
            "(column), the same with two opposite side faces near the horizontal (parry)"
        ),
    ] = "random"
    tilt_deg: Annotated[
        float,
        number(
            0, 90, "degrees", "Standard deviation of each of the two components of tilt; not for random orientation"
        ),
    ] = 1.0
    index: Annotated[
        float | None, number(1.0001, 2, "", "Refractive index, one for all wavelengths, instead of that of ice")
    ] = None
    index_table: Annotated[
        str | None,
        text(1000, "CSV file of refractive index by wavelength, its path counted from the scene file; excludes index"),
        AfterValidator(_beside_scene),
    ] = None
    place: Annotated[
        Literal["curtain", "layer"],
        note("A curtain has the same optical depth in every direction of view, a layer is a level sheet overhead"),
    ] = "layer"
    below_horizon: Annotated[bool, note("Whether a curtain goes on below the horizon")] = False

    @property
    def diameter(self) -> float:
        """Diameter across corners [m]."""
        return self.diameter_um * UM

    @property
    def tilt(self) -> float:
        """Tilt spread [rad]."""
        return self.tilt_deg * DEG

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield conflicts between index and index_table, and between below_horizon and place."""
        yield from _shared_conflicts(values)


def _shared_conflicts(values: Mapping[str, Any]) -> Iterator[Conflict]:
    """Yield what goes wrong between the keys that drops and crystals share."""
    if values.get("index") is not None and values.get("index_table") is not None:
        yield "index_table", "cannot stand beside index; keep one of the two"
    if values.get("below_horizon") is True and values.get("place") == "layer":
        yield "below_horizon", 'a layer ends at the horizon; leave this out or set place = "curtain"'


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
