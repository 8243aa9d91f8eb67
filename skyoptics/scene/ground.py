"""The [ground] table: what lies below the horizon, and the horizon itself."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal

from pydantic import AfterValidator

from skyoptics.scene.fields import note, number, text
from skyoptics.scene.particles import beside_scene
from skyoptics.scene.table import Conflict, Table
from skyoptics.units import DEG, KM

Cover = Literal["grass", "forest", "soil", "sand", "rock", "snow"]


class Ground(Table):
    """The land around the observer: lit by sun and sky, with a horizon; and calm water."""

    surface: Annotated[Cover, note("What covers the level land")] = "grass"
    relief: Annotated[Cover, note("What covers hills, or stands up on the horizon")] = "forest"
    horizon: Annotated[
        Literal["flat", "hills", "ridge", "trees", "town"],
        note("Outline of the land against the sky: level, or a silhouette of our own drawing"),
    ] = "flat"
    horizon_csv: Annotated[
        str | None,
        text(
            1000, "CSV file of the horizon, columns azimuth_deg and elevation_deg, its path counted from the scene file"
        ),
        AfterValidator(beside_scene),
    ] = None
    horizon_height_deg: Annotated[
        float | None, number(0, 45, "degrees", "Height of the silhouette's highest point; left out, its usual one")
    ] = None
    seed: Annotated[int, number(0, 10**6, "", "Another number draws another silhouette")] = 0
    distance_km: Annotated[
        float,
        number(0, 300, "km", "Distance of hills, trees or houses: rain that begins farther away hangs behind them"),
    ] = 5.0
    sunlit: Annotated[float, number(0, 1, "", "Share of the sun's light that reaches the land; 0 under a cloud")] = 1.0
    water: Annotated[
        Literal["none", "lake", "sea"],
        note("Calm water from the observer to the horizon, a mirror for sky, land and bow; its colour from within"),
    ] = "none"

    @property
    def horizon_height(self) -> float | None:
        """Height of the silhouette [rad]; None for its usual one."""
        return None if self.horizon_height_deg is None else self.horizon_height_deg * DEG

    @property
    def distance(self) -> float:
        """Distance of what stands on the horizon [m]."""
        return self.distance_km * KM

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield what would draw the horizon twice, or not at all."""
        if values.get("horizon_csv") is not None:
            for key, usual in (("horizon", "flat"), ("horizon_height_deg", None), ("seed", 0)):
                if values.get(key, usual) != usual:
                    yield key, "cannot stand beside horizon_csv, which draws the horizon; keep one of the two"
        elif values.get("horizon_height_deg") is not None and values.get("horizon", "flat") == "flat":
            yield (
                "horizon_height_deg",
                'a flat horizon has no height; take horizon = "hills", "ridge", "trees" or "town"',
            )
