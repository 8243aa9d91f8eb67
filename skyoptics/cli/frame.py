"""``skyoptics frame``: where a bow or halo falls in the frame of a lens, which lens holds it, a preview."""

from __future__ import annotations

import json
from math import isfinite
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from skyoptics.cli.options import QUALITIES, AzimuthElevation, Between, SceneFile, Word

if TYPE_CHECKING:
    from skyoptics.planning.features import Feature
    from skyoptics.planning.framing import Camera
    from skyoptics.planning.shot import Light, Shot

LENSES = ("rectilinear", "equidistant", "equisolid", "stereographic", "orthographic")


class AimWords(click.ParamType[Any]):
    """best, level, or azimuth, elevation and roll parted by commas."""

    name = "best|level|az,el,roll"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        """Return the word, or three angles in degrees."""
        if isinstance(value, tuple) or value in ("best", "level"):
            return value
        try:
            angles = tuple(float(word) for word in str(value).split(","))
        except ValueError:
            angles = ()
        if len(angles) not in (2, 3) or not all(map(isfinite, angles)):
            self.fail(f"{value!r} is no aim; give best, level, or azimuth,elevation,roll such as 90,15,0", param, ctx)
        azimuth, elevation, roll = (*angles, 0.0)[:3]
        if not (-90.0 <= elevation <= 90.0 and -360.0 <= azimuth <= 360.0 and -360.0 <= roll <= 360.0):
            self.fail(f"{value} is out of range: azimuth and roll -360 to 360, elevation -90 to 90 degrees", param, ctx)
        return azimuth, elevation, roll


@click.command("frame", short_help="Where arcs fall in a lens's frame, and which lens holds them.")
@click.option("--lat", help="Latitude, north positive: 47.2, 47.2N or 47°12'N.")
@click.option("--lon", help="Longitude, east positive.")
@click.option("--height-m", type=float, help="Of the eye above the sea [m].")
@click.option("--time", help="When, such as 2027-05-12T19:40+02:00.")
@click.option("--tz", help="Time zone of a time without offset, such as Europe/Zurich.")
@click.option("--sun-azimuth-deg", type=Between(-360, 360), help="Instead of place and time: the sun's azimuth [°].")
@click.option("--sun-elevation-deg", type=Between(-90, 90), help="And its height [°].")
@click.option(
    "--feature", "name", default="primary", show_default=True, help="Bow or halo, such as secondary, parhelia."
)
@click.option("--radius-deg", type=float, help="Radius of a bow's upper edge [°] instead of its usual one.")
@click.option("--body", type=Word(["sun", "moon"]), help="What lights it; default the sun, for a moonbow the moon.")
@click.option("--focal-mm", type=float, help="Focal length [mm].")
@click.option("--equivalent-mm", type=float, help="Instead: its 35-mm equivalent [mm].")
@click.option("--sensor", default="36x24", show_default=True, help="By size in mm or name, such as aps-c.")
@click.option(
    "--orientation", type=Word(["landscape", "portrait"]), help="How it is held; default as the sensor is given."
)
@click.option("--crop", help="Of the frame, such as 16:9.")
@click.option("--lens", type=Word(LENSES), default="rectilinear", show_default=True, help="Projection.")
@click.option(
    "--aim",
    type=AimWords(),
    default="best",
    show_default=True,
    help="best allows the longest focal length; level looks at the horizon; or a direction [°].",
)
@click.option(
    "--hold",
    type=Word(["whole", "feet", "pair"]),
    default="whole",
    show_default=True,
    help="What has to be in the frame: all above the horizon, both feet, the pair of parhelia.",
)
@click.option("--panorama", "stitched", is_flag=True, help="Frames to be stitched, instead of one.")
@click.option(
    "--overlap",
    type=Between(0, 0.8),
    help="Share of a frame that neighbours have in common; default 0.3. Asks for a panorama.",
)
@click.option("--subject", type=AzimuthElevation(), help="Also say where this lands, and mark it [°].")
@click.option("--preview", type=click.Path(path_type=Path, dir_okay=False), help="Write a picture (PNG).")
@click.option("--thirds", is_flag=True, help="Lines at thirds in the preview.")
@click.option("--also", multiple=True, help="A further bow or halo in the preview; repeatable.")
@click.option("--render", "scene", type=SceneFile(), help="Scene that is rendered under the preview.")
@click.option(
    "--quality", type=Word(QUALITIES), default="draft", show_default=True, help="Of that render, as for render."
)
@click.option("--force", is_flag=True, help="Replace a file that is there.")
@click.option("--json", "as_json", is_flag=True, help="Print the answer as JSON on stdout.")
def command(as_json: bool, preview: Path | None, force: bool, **options: Any) -> None:
    """Where a bow or halo falls in the frame of a lens, which lens holds it, with a preview.

    "missing" is the length of the arc (for feet: of the horizon between them) less what of it the frame holds.

    \b
    Example: skyoptics frame --sun-azimuth-deg 270 --sun-elevation-deg 10
                 --focal-mm 20 --hold feet
             skyoptics frame --lat 47.2 --lon 8.9 --time 2027-05-12T19:40+02:00
                 --focal-mm 24 --orientation portrait --panorama
                 --preview plan.png
    """  # noqa: D301
    from skyoptics.planning import features, shot, shot_words
    from skyoptics.planning.aiming import Aim
    from skyoptics.planning.panorama import OVERLAP
    from skyoptics.units import DEG

    for name in ("thirds", "also", "scene"):
        if options[name] and preview is None:
            raise click.UsageError(
                f"--{'render' if name == 'scene' else name} draws into a preview; give --preview too"
            )
    if preview is not None:
        _writable(preview, force)
    feature = features.find(options["name"], options["radius_deg"], body=options["body"])
    light = _light(options, feature.body)
    camera = _camera(options)
    aim = options["aim"]
    if isinstance(aim, tuple):
        aim = Aim(*(angle * DEG for angle in aim))
    stitched = options["stitched"] or options["overlap"] is not None
    overlap = (OVERLAP if options["overlap"] is None else options["overlap"]) if stitched else None
    subject = None if options["subject"] is None else (options["subject"][0] * DEG, options["subject"][1] * DEG)
    found = shot.shoot(feature, light, camera, options["hold"], aim, overlap, subject)
    report = shot_words.document(found)
    if preview is not None:
        _draw(preview, found, options, stitched, subject)
        report["preview"] = str(preview)
    if as_json:
        click.echo(json.dumps(report, indent=2, ensure_ascii=False))
        return
    click.echo(shot_words.text(found))
    if preview is not None:
        click.echo(f"\n{preview}")


def _light(options: dict[str, Any], body: Any) -> Light:
    """Return where the sun or moon stands."""
    from skyoptics.errors import DomainError
    from skyoptics.light import position, rising
    from skyoptics.light.zones import parse_time
    from skyoptics.planning import coordinates, place
    from skyoptics.planning.shot import Light
    from skyoptics.units import DEG

    azimuth, elevation = options["sun_azimuth_deg"], options["sun_elevation_deg"]
    by_place = [f"--{word}" for word in ("lat", "lon", "time") if options[word] is not None]
    if azimuth is not None or elevation is not None:
        if by_place:
            raise click.UsageError(f"{by_place[0]} and the sun's direction exclude each other; give one or the other")
        if azimuth is None or elevation is None:
            raise click.UsageError("the sun's direction needs both --sun-azimuth-deg and --sun-elevation-deg")
        if elevation < 0.0:
            raise DomainError(
                f"the {body} at {elevation:g}° is below the horizon and lights nothing; give 0 to 90, or --lat, --lon and "
                "--time, which tells when it rises"
            )
        return Light(azimuth % 360.0 * DEG, elevation * DEG)
    if len(by_place) < 3:
        raise click.UsageError(
            "where is the sun? give --lat, --lon and --time, or --sun-azimuth-deg and --sun-elevation-deg"
        )
    where = place.at(coordinates.parse_pair(options["lat"], options["lon"]), options["height_m"])
    try:
        when = parse_time(options["time"], options["tz"])
    except DomainError as error:  # its advice is for scene files
        raise DomainError(str(error).replace('zone = "Europe/Paris"', "--tz Europe/Paris")) from None
    there = (where.latitude_deg, where.longitude_deg, when, where.height_m)
    seen = position.sun(*there) if body == "sun" else position.moon(*there)
    if seen.elevation_deg < 0.0:
        raise DomainError(rising.describe(body, *there))
    return Light(seen.azimuth_deg * DEG, seen.elevation_deg * DEG, when)


def _camera(options: dict[str, Any]) -> Camera:
    """Return lens and sensor."""
    from skyoptics.planning import framing, sensors
    from skyoptics.units import MM

    focal, equivalent = options["focal_mm"], options["equivalent_mm"]
    if (focal is None) == (equivalent is None):
        raise click.UsageError("which lens? give --focal-mm or --equivalent-mm, one of them")
    sensor = sensors.find(options["sensor"])
    if options["orientation"] is not None:
        sensor = sensor.held(options["orientation"])
    length = focal * MM if equivalent is None else sensors.from_equivalent(equivalent * MM, sensor)
    if options["crop"] is not None:
        sensor = sensor.cropped(options["crop"])
    return framing.Camera(options["lens"], length, sensor)


def _writable(path: Path, force: bool) -> None:
    """Refuse a file that cannot or must not be written, before any work."""
    from skyoptics.errors import ResourceError

    if path.suffix.lower() != ".png":
        raise click.UsageError(f"--preview {path}: the picture is a PNG; let its name end in .png")
    if not path.parent.is_dir():
        raise ResourceError(f"{path}: there is no folder {path.parent}; make it first")
    if path.exists() and not force:
        raise ResourceError(f"{path}: is there already; give another name, or --force to replace it")


def _draw(
    path: Path, found: Shot, options: dict[str, Any], stitched: bool, subject: tuple[float, float] | None
) -> None:
    """Write the preview."""
    from skyoptics.planning import preview, shot_words, view

    framing, light = found.framing, found.light
    if stitched and found.panorama is not None and len(found.panorama.aims) > 1:
        aims = found.panorama.aims
        seen = view.around_frames(framing.camera, aims)
        facts = [shot_words.camera_words(framing.camera), shot_words.panorama_words(found.panorama)]
    else:
        aims = (framing.aim,)
        seen = view.around_frame(framing.camera, framing.aim)
        facts = [
            f"{shot_words.camera_words(framing.camera)}; aim {shot_words.aim_words(framing.aim)}",
            f"{shot_words.verdict(found)}; longest focal length: {shot_words.longest_words(found)}",
        ]
    facts = [line[:1].upper() + line[1:] for line in facts]
    title = shot_words.text(found).partition("\n")[0]
    asked = preview.Preview(
        seen,
        framing.camera,
        aims,
        _drawn(found.feature, options),
        light.azimuth,
        light.elevation,
        title,
        tuple(facts),
        options["thirds"],
        subject,
    )
    under = None if options["scene"] is None else _rendered(options, asked, found.feature.body)
    preview.write(path, preview.draw(asked, under), title)


def _drawn(feature: Feature, options: dict[str, Any]) -> tuple[Feature, ...]:
    """Return the features to draw: the one asked for, its fellow bow, and what was asked for besides."""
    from skyoptics.planning import features

    fellows = {"primary": "secondary", "secondary": "primary"}
    names = [fellows[feature.name]] if feature.name in fellows else []
    names += [name for name in options["also"] if name not in (feature.name, *names)]
    return (feature, *(features.find(name, body=feature.body) for name in names if name != "moonbow"))


def _rendered(options: dict[str, Any], asked: Any, body: str) -> Any:
    """Return the render under the preview."""
    from skyoptics.cli import progress
    from skyoptics.planning import under
    from skyoptics.scene.load import load

    scene = under.refitted(load(options["scene"]), asked.view, asked.sun_azimuth, asked.sun_elevation, body)
    progress.note_first_compilation()
    with progress.shown() as tell:
        return under.render(scene, str(options["scene"]), options["quality"], tell)
