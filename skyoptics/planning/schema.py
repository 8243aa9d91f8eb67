"""The form of the JSON document of ``skyoptics when``, and its schema file.

``python -m skyoptics.planning.schema`` writes ``when.schema.json`` beside this module; a test shows that the two agree.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field

FILE = Path(__file__).with_name("when.schema.json")
"""The schema, as shipped."""
DIALECT = "https://json-schema.org/draft/2020-12/schema"
"""Of JSON Schema."""

_ISO = r"^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d[+-]\d\d:\d\d(:\d\d)?$"
Time = Annotated[str, Field(pattern=_ISO, description="ISO 8601 with offset from universal time.")]
Azimuth = Annotated[float, Field(ge=0.0, lt=360.0, description="Degrees, clockwise from north.")]
Elevation = Annotated[float, Field(ge=-90.0, le=90.0, description="Degrees above the horizontal, apparent.")]
Latitude = Annotated[float, Field(ge=-90.0, le=90.0, description="Degrees, north positive.")]
Longitude = Annotated[float, Field(ge=-180.0, le=180.0, description="Degrees, east positive.")]
Share = Annotated[float, Field(ge=0.0, le=1.0)]


class _Form(BaseModel):
    """An object with these keys and no others."""

    model_config = ConfigDict(extra="forbid")


class StandingForm(_Form):
    """How the feature stands at an instant."""

    sun_azimuth_deg: Azimuth = Field(description="Of the body that lights the feature (see body), degrees.")
    sun_elevation_deg: Elevation = Field(description="Of that body's centre, apparent, degrees.")
    crown_elevation_deg: Elevation = Field(description="Of the highest point, degrees.")
    crown_azimuth_deg: Azimuth
    foot_azimuths_deg: list[Azimuth] = Field(description="Where the feature meets the horizon, left one first.")
    share_up: Share = Field(description="Part of the feature's length above the horizon.")


class WindowForm(StandingForm):
    """A stretch of time in which the feature can stand; angles are those at best."""

    start: Time
    best: Time = Field(description="When the crown is highest.")
    end: Time
    at_start: StandingForm
    at_end: StandingForm
    weak: bool = Field(description="Whether the best is within 1° of a limit of the sun's height.")
    moon_illuminated: Share | None = Field(description="Lit share of the moon's disc at best; null for the sun.")
    note: str


class AlignmentForm(StandingForm):
    """A time at which part of the feature meets the subject; angles are those at best."""

    part: Literal["bow", "foot", "crown"]
    start: Time = Field(description="Since when the distance is within the tolerance.")
    best: Time = Field(description="When the distance is least.")
    end: Time
    distance_deg: Annotated[float, Field(ge=0.0)] = Field(description="Least distance on the sky, degrees.")


class PlaceForm(_Form):
    """The observer."""

    name: str
    latitude_deg: Latitude
    longitude_deg: Longitude
    height_m: float = Field(description="Of the eye above the sea.")
    iso6709: str


class SubjectForm(_Form):
    """What was to be met."""

    azimuth_deg: Azimuth
    elevation_deg: Elevation
    distance_m: float | None
    latitude_deg: Latitude | None
    longitude_deg: Longitude | None
    height_m: float | None


class HeightForm(_Form):
    """When the sun or moon came closest to the heights at which the feature can stand."""

    time: Time
    sun_azimuth_deg: Azimuth
    sun_elevation_deg: Elevation
    wanted_deg: Annotated[list[Elevation], Field(min_length=2, max_length=2)] = Field(description="Lowest and highest.")
    missing_deg: Annotated[float, Field(ge=0.0)] = Field(
        description="0 where something else than the height was missing."
    )


class WhenForm(_Form):
    """When a bow or halo can stand at a place."""

    version: Literal[1]
    place: PlaceForm
    zone: str = Field(description="IANA name of the zone of all times.")
    begin: Time
    end: Time = Field(description="First instant that was not looked at.")
    feature: str
    title: str
    body: Literal["sun", "moon"]
    radius_deg: float | None = Field(description="Of the upper edge of a bow about the antisolar point, degrees.")
    windows: list[WindowForm]
    subject: SubjectForm | None
    alignments: list[AlignmentForm]
    nearest_miss: AlignmentForm | None = Field(description="Nearest approach to the subject, where nothing met it.")
    nearest_height: HeightForm | None = Field(description="Where there is no window.")
    notes: list[str]


def schema() -> dict[str, Any]:
    """Return the JSON schema of the document."""
    made = _tidy(WhenForm.model_json_schema(mode="serialization"))
    return {"$schema": DIALECT, **made, "title": "skyoptics when"}


def _tidy(node: Any) -> Any:
    """Return a part of the schema without machine-made titles, its definitions named after what they are."""
    if isinstance(node, list):
        return [_tidy(part) for part in node]
    if not isinstance(node, dict):
        return node
    tidy: dict[str, Any] = {}
    for key, value in node.items():
        if key == "title" and isinstance(value, str):
            continue
        if key == "$ref":
            tidy[key] = _short(value)
        elif key == "$defs":
            tidy[key] = {_short(name): _tidy(part) for name, part in value.items()}
        else:
            tidy[key] = _tidy(value)
    return tidy


def _short(name: str) -> str:
    """Return the name of a definition, or the reference to it, in small letters."""
    return name.removesuffix("Form").lower()


def main() -> None:
    """Write the schema file."""
    FILE.write_text(json.dumps(schema(), indent=2, ensure_ascii=False) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
