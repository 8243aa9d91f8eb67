"""``skyoptics when``: when a bow or halo can stand at a place, fits a lens, or meets a subject."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from skyoptics.cli.options import AzimuthElevation, Between, Word

if TYPE_CHECKING:
    from skyoptics.planning.answers import Place, Subject
    from skyoptics.planning.features import Feature
    from skyoptics.planning.question import Filters, Question

FILE = click.Path(path_type=Path)


class Heights(click.ParamType[tuple[float, float]]):
    """Lowest and highest elevation, parted by a colon."""

    name = "low:high"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, float]:
        """Return both, -90 to 90 degrees."""
        if isinstance(value, tuple):
            return value
        try:
            low, high = (float(word) for word in str(value).split(":"))
        except ValueError:
            self.fail(f"{value!r} is no range; give lowest and highest in degrees, such as 5:20", param, ctx)
        if not -90.0 <= low <= high <= 90.0:
            self.fail(f"{value} is no range; the lowest comes first, both between -90 and 90 degrees", param, ctx)
        return low, high


@click.command("when", short_help="When a bow or halo can stand at a place, or meets a subject.")
@click.option("--lat", help="Latitude, north positive: 47.2, 47.2N or 47°12'N.")
@click.option("--lon", help="Longitude, east positive.")
@click.option("--place", help="Instead: coordinates in one text (also ISO 6709), or a name in your own file of places.")
@click.option("--places", type=FILE, help="File of places (TOML); default places.toml in your configuration folder.")
@click.option("--height-m", type=float, help="Of the eye above the sea [m].")
@click.option("--from", "first", help="First day, or a time; default today.")
@click.option("--to", "last", help="Last day, looked through to its end, or a time; default a week from the first day.")
@click.option("--tz", help="Time zone, such as Europe/Zurich; default by the coordinates, with the package tzfpy.")
@click.option(
    "--feature", "name", default="primary", show_default=True, help="Bow or halo, such as secondary, halo_22."
)
@click.option("--radius-deg", type=float, help="Radius of a bow's upper edge [°] instead of its usual one.")
@click.option("--body", type=Word(["sun", "moon"]), help="What lights it; default the sun, for a moonbow the moon.")
@click.option("--horizon", type=FILE, help="Profile of the horizon: CSV with azimuth_deg, elevation_deg.")
@click.option(
    "--hill-m", type=Between(0, 10000), help="Height of a hill above the plain around: its horizon lies lower [m]."
)
@click.option("--pressure-hpa", type=float, default=1013.25, show_default=True, help="Air pressure at the place [hPa].")
@click.option("--temperature-c", type=float, default=10.0, show_default=True, help="Air temperature at the place [°C].")
@click.option("--sun-height-deg", type=Heights(), help="Only with the sun (or moon) that high, such as 5:20 [°].")
@click.option(
    "--least-share", type=Between(0, 1), default=0.0, help="Only with that share of its length above the horizon."
)
@click.option("--least-moon", type=Between(0, 1), default=0.0, help="Only with that share of the moon's disc lit.")
@click.option("--focal-mm", type=float, help="Only where it fits a lens of this focal length [mm].")
@click.option("--equivalent-mm", type=float, help="Instead: its 35-mm equivalent [mm].")
@click.option("--lens", help="Kind of lens, default rectilinear.")
@click.option("--sensor", help="By name or size in mm, default 36x24.")
@click.option(
    "--orientation",
    type=Word(["landscape", "portrait"]),
    help="How the camera is held; default as the sensor is given.",
)
@click.option("--crop", help="Of the frame, such as 16:9.")
@click.option("--hold", type=Word(["whole", "feet", "pair"]), help="What of it has to fit; default whole.")
@click.option("--subject", type=AzimuthElevation(), help="Subject to be met: azimuth and elevation [°].")
@click.option("--subject-lat", help="Instead: its latitude.")
@click.option("--subject-lon", help="Its longitude.")
@click.option("--subject-height-m", type=float, help="Its height above the sea [m].")
@click.option(
    "--part",
    type=Word(["bow", "foot", "crown"]),
    default="bow",
    show_default=True,
    help="Part that is to meet the subject.",
)
@click.option(
    "--tolerance-deg", type=Between(0.001, 30), default=0.5, show_default=True, help="How near it has to come [°]."
)
@click.option("--csv", type=FILE, help="Write a table.")
@click.option("--ics", type=FILE, help="Write calendar entries with alarms.")
@click.option("--alarm-minutes", type=click.IntRange(0, 10080), default=60, show_default=True, help="Before the start.")
@click.option("--pdf", type=FILE, help="Write a page of A4 to print.")
@click.option("--geojson", type=FILE, help="Write lines of sight for a map.")
@click.option("--line-km", type=Between(0.1, 200), default=20.0, show_default=True, help="Their length [km].")
@click.option("--force", is_flag=True, help="Replace files that are there.")
@click.option("--json", "as_json", is_flag=True, help="Print the answer as JSON on stdout.")
def command(as_json: bool, alarm_minutes: int, line_km: float, force: bool, **options: Any) -> int:
    """When a bow or halo can stand at a place, fits a lens, or meets a subject.

    A window is a stretch of time in which the feature's upper edge is above the horizon and the sun (or moon) is up; best
    is when its crown is highest. Whether there is rain or ice in the air then, nobody knows beforehand.

    \b
    Example: skyoptics when --lat 47.2 --lon 8.9 --tz Europe/Zurich
                 --from 2027-05-01 --to 2027-05-31
             skyoptics when --place mill --subject 120,1.5 --part foot
                 --tolerance-deg 2 --ics mill.ics

    Exit code 3: nothing found; the nearest miss is told.
    """  # noqa: D301 (the command line needs the backspace itself)
    from skyoptics.planning import files
    from skyoptics.planning.document import document
    from skyoptics.planning.question import answer
    from skyoptics.planning.table import show

    wanted = files.Wanted(*(options.pop(kind) for kind in files.Wanted._fields))
    files.check(wanted, force)
    asked = _question(options)
    found = answer(asked)
    # before anything is printed: who reads the output may close it early
    written = [] if found.nothing else files.write(found.plan, wanted, asked.feature.body, alarm_minutes, line_km)
    if as_json:
        click.echo(json.dumps(document(found.plan, found.miss, asked.feature.body), indent=2, ensure_ascii=False))
    elif not found.nothing:
        show(found.plan, asked.feature.body)
    for path in written:
        click.echo(str(path), err=as_json)
    if not found.nothing:
        return 0
    click.echo(found.nothing + ("; no file written" if wanted.paths else ""), err=True)
    return 3


def _question(options: dict[str, Any]) -> Question:
    """Return what is asked."""
    from skyoptics.planning import days, features, question
    from skyoptics.planning import place as places

    place, own_zone = _place(options)
    zone = places.zone_of(place, options["tz"] or own_zone)
    begin, end = days.span(options["first"], options["last"], zone.zone)
    feature = features.find(options["name"], options["radius_deg"], body=options["body"])
    return question.Question(
        place,
        zone,
        begin,
        end,
        feature,
        _filters(options, feature),
        _subject(options, place),
        options["part"],
        options["tolerance_deg"],
        _horizon(options),
        options["pressure_hpa"],
        options["temperature_c"],
    )


def _place(options: dict[str, Any]) -> tuple[Place, str | None]:
    """Return the observer, and the zone that the file of places gives."""
    from skyoptics.planning import coordinates
    from skyoptics.planning import place as places

    latitude, longitude, text = options["lat"], options["lon"], options["place"]
    if text is not None:
        if latitude is not None or longitude is not None:
            raise click.UsageError("--place stands for --lat and --lon; give one or the other")
        return places.find(text, options["places"], options["height_m"])
    if latitude is None or longitude is None:
        raise click.UsageError("where? give --lat and --lon, or --place with coordinates or a name of your own")
    return places.at(coordinates.parse_pair(latitude, longitude), options["height_m"]), None


def _subject(options: dict[str, Any], place: Place) -> Subject | None:
    """Return what is to be met."""
    from skyoptics.planning import coordinates, subject

    latitude, longitude, height = (options[f"subject_{name}"] for name in ("lat", "lon", "height_m"))
    if options["subject"] is not None:
        if not latitude is longitude is height is None:
            raise click.UsageError(
                "--subject gives a direction; leave out --subject-lat, --subject-lon, --subject-height-m"
            )
        return subject.toward(*options["subject"])
    if latitude is longitude is height is None:
        return None
    if latitude is None or longitude is None or height is None:
        raise click.UsageError(
            "a subject needs --subject-lat, --subject-lon and --subject-height-m (above the sea), all three"
        )
    where = coordinates.parse_pair(latitude, longitude)
    return subject.seen_from(place, where.latitude_deg, where.longitude_deg, height)


def _horizon(options: dict[str, Any]) -> Any:
    """Return the horizon, None for a flat one."""
    from skyoptics.geometry import horizon

    if options["horizon"] is not None:
        if options["hill_m"] is not None:
            raise click.UsageError("--horizon and --hill-m exclude each other: a measured profile has the dip in it")
        return horizon.read(options["horizon"])
    return None if not options["hill_m"] else horizon.flat(float(horizon.dip(options["hill_m"])))


def _filters(options: dict[str, Any], feature: Feature) -> Filters:
    """Return what windows must have."""
    from skyoptics.planning.question import Filters

    holds = None
    words = ("lens", "sensor", "orientation", "crop", "hold")
    if options["focal_mm"] is not None or options["equivalent_mm"] is not None:
        holds = _fits(options, feature)
    elif any(options[word] is not None for word in words):
        given = ", ".join(f"--{word}" for word in words if options[word] is not None)
        raise click.UsageError(f"a lens needs a focal length: give --focal-mm or --equivalent-mm with {given}")
    return Filters(options["sun_height_deg"], options["least_share"], options["least_moon"], holds)


def _fits(options: dict[str, Any], feature: Feature) -> Any:
    """Return a test of whether the feature fits the lens."""
    from skyoptics.planning import framing, lens_filter, sensors
    from skyoptics.units import MM

    if options["focal_mm"] is not None and options["equivalent_mm"] is not None:
        raise click.UsageError("--focal-mm and --equivalent-mm exclude each other")
    sensor = sensors.find(options["sensor"] or "36x24")
    if options["orientation"] is not None:
        sensor = sensor.held(options["orientation"])
    focal = options["focal_mm"]
    if focal is None:
        focal = sensors.from_equivalent(options["equivalent_mm"] * MM, sensor) / MM
    if options["crop"] is not None:
        sensor = sensor.cropped(options["crop"])
    camera = framing.Camera(options["lens"] or "rectilinear", focal * MM, sensor)
    return lens_filter.fits(feature, camera, options["hold"] or "whole")
