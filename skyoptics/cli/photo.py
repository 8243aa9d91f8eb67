"""``skyoptics photo``: arcs drawn on a photograph, and circles measured on it."""

from __future__ import annotations

import json
from math import isfinite
from pathlib import Path
from textwrap import fill
from typing import Any

import click

from skyoptics.cli.options import Between, Word
from skyoptics.errors import DomainError

WIDTH = 79
"""Of the text on the terminal."""


class Numbers(click.ParamType[tuple[float, ...]]):
    """A fixed count of numbers parted by commas."""

    def __init__(self, names: str, example: str, least: int | None = None) -> None:
        self.name, self.example = names, example
        self.most = names.count(",") + 1
        self.least = self.most if least is None else least

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, ...]:
        """Return the numbers."""
        if isinstance(value, tuple):
            return value
        try:
            numbers = tuple(float(word) for word in str(value).split(","))
        except ValueError:
            numbers = ()
        if not self.least <= len(numbers) <= self.most or not all(map(isfinite, numbers)):
            self.fail(
                f"{value!r} is not {self.name}; give numbers parted by commas, such as {self.example}", param, ctx
            )
        return numbers


class Size(click.ParamType[tuple[float, float]]):
    """A sensor, by name or by size."""

    name = "sensor"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, float]:
        """Return its sides [mm]."""
        if isinstance(value, tuple):
            return value
        from skyoptics.planning import sensors
        from skyoptics.units import MM

        try:
            found = sensors.find(str(value))
        except DomainError as error:
            self.fail(str(error), param, ctx)
        return found.width / MM, found.height / MM


def _angles(param: str, elevation: float, azimuth: float) -> None:
    """Refuse a direction that is none."""
    if not -90.0 <= elevation <= 90.0 or not -360.0 <= azimuth <= 360.0:
        raise click.UsageError(
            f"{param}: azimuth {azimuth:g}, elevation {elevation:g} is out of range: -360 to 360 and -90 to 90 degrees"
        )


LENSES = ("rectilinear", "equidistant", "equisolid", "stereographic", "orthographic")


@click.command("photo", short_help="Arcs on a photograph; circles measured on it.")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--lat", "latitude", help="Latitude, north positive; default that of the EXIF entries.")
@click.option("--lon", "longitude", help="Longitude, east positive.")
@click.option("--height-m", type=Between(-500, 10000), help="Of the eye above the sea [m].")
@click.option("--time", help="When, as 2027-05-12T19:40+02:00; default that of the EXIF entries.")
@click.option("--tz", "zone", help="Zone of a time without offset, such as Europe/Zurich.")
@click.option("--sun-azimuth-deg", type=Between(-360, 360), help="Instead of place and time: azimuth of the sun [°].")
@click.option("--sun-elevation-deg", type=Between(-90, 90), help="And its height [°].")
@click.option("--body", type=Word(["sun", "moon"]), default="sun", show_default=True, help="What lights the arcs.")
@click.option(
    "--aim", type=Numbers("az,el,roll", "90,15,0", 2), help="Where the picture's middle looks, and the roll [°]."
)
@click.option(
    "--sun-pixel", type=Numbers("x,y", "2310,845"), help="Where the sun (moon) stands in the picture [pixel]."
)
@click.option(
    "--antisolar-pixel", type=Numbers("x,y", "1520,2980"), help="Where the shadow of the camera falls [pixel]."
)
@click.option("--roll-deg", type=Between(-360, 360), help="Roll of the camera, clockwise; default level [°].")
@click.option(
    "--mark",
    "marks",
    type=Numbers("x,y,az,el", "310,1204,87.5,2.1"),
    multiple=True,
    help="Pixel of a known direction; twice or more.",
)
@click.option("--focal-mm", type=Between(0.5, 5000), help="Focal length; default that of the EXIF entries [mm].")
@click.option("--sensor", "sensor_mm", type=Size(), help="Sensor by size or name: 36x24, aps-c, ….")
@click.option("--equivalent-mm", type=Between(0.5, 5000), help="Focal length on 36 × 24 mm instead of both [mm].")
@click.option("--lens", type=Word(LENSES), default="rectilinear", show_default=True, help="Projection.")
@click.option(
    "--feature",
    "features",
    multiple=True,
    help="Arc to draw; repeatable. Default primary and secondary, on the sun's side halo_22 and parhelia.",
)
@click.option("--radius-deg", type=Between(0.1, 90), help="Radius of the line of one bow [°].")
@click.option(
    "--measure", "points", type=click.Path(path_type=Path), help="CSV of points: x,y and by choice arc,order."
)
@click.option("--centre", type=Word(["antisolar", "sun"]), help="Centre of measured circles; default the nearer one.")
@click.option("--fit-centre", is_flag=True, help="Fit the centres of measured circles too.")
@click.option(
    "--wavelength-nm",
    type=Between(350, 780),
    default=550.0,
    show_default=True,
    help="Of measured supernumeraries [nm].",
)
@click.option("--temperature-c", type=Between(-12, 99), default=15.0, show_default=True, help="Of the drops [°C].")
@click.option("--index", type=Between(1.0001, 2), help="Index of the drops instead of that of water.")
@click.option("--out", type=click.Path(path_type=Path), required=True, help="Folder for the files.")
@click.option("--keep-place", is_flag=True, help="Let the position of the EXIF entries into the files.")
@click.option("--force", is_flag=True, help="Overwrite files.")
@click.option("--json", "as_json", is_flag=True, help="Print the report as JSON on stdout.")
def command(file: Path, as_json: bool, **options: Any) -> None:
    """Draw predicted arcs on a copy of a photograph (JPEG), and measure circles on it.

    The lens, the time and the place come from the EXIF entries where they are not given. One of --aim, --sun-pixel and
    --mark says where the camera looked. Pixels are counted from 0, x to the right, y down, in the picture as it is
    shown. Written are NAME-arcs.jpg, NAME-arcs.csv and NAME-arcs.json; the photograph itself is never changed.

    Supernumeraries measured with order 0 (the bow), 1, 2, … give the size of the drops.

    Example: skyoptics photo bow.jpg --antisolar-pixel 2010,2950 --out marked
    """
    report = _answered(file, options)
    for path in report["files"]:
        click.echo(str(options["out"] / path), err=as_json)
    if as_json:
        click.echo(json.dumps(report, ensure_ascii=False))
        return
    click.echo("")
    for line in _lines(report):
        click.echo(line)


def _answered(file: Path, options: dict[str, Any]) -> dict[str, Any]:
    """Do the work."""
    if options["aim"] is not None:
        _angles("--aim", options["aim"][1], options["aim"][0])
        options["aim"] = (*options["aim"], 0.0)[:3]
    for mark in options["marks"]:
        _angles("--mark", mark[3], mark[2])
    if len(options["marks"]) == 1 and options["sun_pixel"] is None and options["antisolar_pixel"] is None:
        raise click.UsageError(
            "--mark is given once; it takes two known directions (or one beside --sun-pixel) to aim a camera"
        )
    from skyoptics.planning.photo_circles import Measuring
    from skyoptics.planning.photo_report import Asked, answer

    how = ("centre", "fit_centre", "wavelength_nm", "temperature_c", "index")
    measuring = Measuring(**{name: options.pop(name) for name in how})
    return answer(Asked(photo=file, measuring=measuring, **options))


def _lines(report: dict[str, Any]) -> list[str]:
    """Return the report in words."""
    camera, body = report["camera"], report["body"].capitalize()
    rows = [
        (
            body,
            f"azimuth {report['sun_azimuth_deg']:.2f}°, height {report['sun_elevation_deg']:.2f}° ({report['sun_from']})",
        ),
        (
            "Camera",
            f"{camera['lens']}, azimuth {camera['azimuth_deg']:.2f}°, elevation {camera['elevation_deg']:.2f}°, roll "
            f"{camera['roll_deg']:.2f}° ({camera['aim_from']})",
        ),
        ("Lens", f"{camera['focal_px']:.1f} pixels ({camera['focal_from']})"),
    ]
    if camera["residual_deg"] is not None:
        rows.append(("Marks", f"off by {camera['residual_deg']:.3f}°, {camera['residual_px']:.1f} pixels, rms"))
    for arc in report["arcs"]:
        where = "drawn" if arc["in_picture"] else "not in this picture" if arc["exists"] else "cannot stand"
        at = "" if arc["radius_deg"] is None else f", {arc['radius_deg']:.2f}°"
        rows.append(("Arc", f"{arc['title']}{at}: {where}"))
    rows += [("Measured", _measured(entry)) for entry in report["measured"]]
    rows += [("Drops", _drops(entry)) for entry in report["drops"]]
    rows += [("Note", f"{note[:1].upper()}{note[1:]}") for note in report["notes"]]
    return [fill(f"{name:<9} {text}", WIDTH, subsequent_indent=" " * 10) for name, text in rows]


def _measured(entry: dict[str, Any]) -> str:
    """Return one measured circle in words."""
    name = f"{entry['arc']}: " if entry["arc"] else ""
    about = "the antisolar point" if entry["centre"] == "antisolar" else "the sun"
    half = entry["half_width_deg"]
    interval = "" if half is None else f" ± {half:.3f}° (95 %)"
    text = f"{name}{entry['radius_deg']:.3f}°{interval} about {about}, {entry['points']} points over {entry['stretch_deg']:.0f}°"
    if entry["centre_fitted"]:
        text += f", centre fitted, {entry['centre_off_deg']:.2f}° off"
    return f"{text}: {entry['words']}"


def _drops(entry: dict[str, Any]) -> str:
    """Return a drop size in words."""
    name = f"{entry['arc']}: " if entry["arc"] else ""
    low, high = entry["low_um"], entry["high_um"]
    interval = "no interval" if low is None else f"95 %: {low:.0f} to {'∞' if high is None else f'{high:.0f}'} µm"
    text = (
        f"{name}radius {entry['radius_um']:.0f} µm ({interval}), from {entry['points']} points of the {entry['bow']} bow at "
        f"{entry['wavelength_nm']:g} nm, index {entry['index']:.4f}"
    )
    return ". ".join([text, *(note[:1].upper() + note[1:] for note in entry["notes"])])
