"""``skyoptics animate``: a film along a quantity."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import Between, SceneFile, Word, json_option, sampling_options


@click.command("animate", short_help="Film along a quantity: sun height, drop size, a day's clock.")
@click.argument("scene", type=SceneFile())
@click.option(
    "--vary",
    "varied",
    required=True,
    metavar="KEY=FIRST:LAST",
    help="What changes, e.g. light.elevation_deg=0:40, air.1.radius_um=10:1000:log, light.time=T1/T2 (two times).",
)
@click.option(
    "--out", required=True, type=click.Path(path_type=Path), metavar="FILE", help="The film, .mp4 (H.264) or .gif."
)
@click.option("--seconds", type=Between(0.0, 3600.0), default=5.0, show_default=True, help="Length of the film.")
@click.option("--fps", type=Between(0.1, 120.0), default=25.0, show_default=True, help="Frames a second.")
@click.option(
    "--set", "overrides", multiple=True, metavar="TABLE.KEY=VALUE", help="Change a value, e.g. camera.width_px=1280."
)
@click.option(
    "--exposure",
    type=Word(["shared", "smooth", "each"]),
    default="shared",
    show_default=True,
    help="shared: metered once over five frames, no flicker; smooth: follows the light; each: every frame by itself. A scene "
    "that fixes its exposure keeps it.",
)
@click.option("--keep-frames", is_flag=True, help="Keep the frames, as PNG in FILE.frames.")
@click.option("--force", is_flag=True, help="Replace a film that is there already.")
@click.option("--rays", type=click.IntRange(1), help="Rays of each kind of particle in a frame; overrides --quality.")
@json_option
@sampling_options
def command(
    scene: Path,
    varied: str,
    out: Path,
    seconds: float,
    fps: float,
    overrides: tuple[str, ...],
    exposure: str,
    keep_frames: bool,
    force: bool,
    rays: int | None,
    as_json: bool,
    quality: str,
    seed: int,
    threads: int | None,
) -> None:
    """Film SCENE, a TOML file or the name of an example, while one of its values changes.

    A list of values after commas gives a film that rests on each of them for its share of the time. A film that was stopped
    goes on with the same command: frames lie in FILE.frames until it is done.

    \b
    Example: skyoptics animate double-bow --vary light.elevation_deg=0:40 --out bow.mp4
    """  # noqa: D301
    from skyoptics.colour import video
    from skyoptics.rendering import vary
    from skyoptics.rendering.frames import check, frame_count
    from skyoptics.rendering.reel import Film, Reel
    from skyoptics.rendering.run import Settings, usable_cores
    from skyoptics.rendering.vary_words import caption, quantity

    count = frame_count(seconds, fps)
    video.check(out, fps)
    _free(out, force)
    what = vary.read(varied)
    steps = vary.steps(scene, overrides, what, count if what.spacing != "list" else None)
    if what.spacing == "list":
        if count < len(steps):
            raise click.UsageError(f"{len(steps)} values do not fit into {count} frames; raise --seconds or --fps")
        steps = [steps[k * len(steps) // count] for k in range(count)]
    settings = Settings(quality, seed, threads or usable_cores(), rays=rays)
    film = Film(tuple(step.scene for step in steps), str(scene), settings, exposure)  # type: ignore[arg-type]
    check(film)
    text = _text(film, what, (steps[0], steps[-1]), scene, overrides, seconds, fps)
    reel = Reel(out.with_name(f"{out.name}.frames"), film, text)
    there = _open(reel)
    _make(reel, out, fps)
    if not keep_frames:
        reel.remove()
    report = {
        "film": out.name,
        "scene": scene.name,
        "vary": what.words,
        "frames": count,
        "frames_taken_up": there,
        "fps": fps,
        "seconds": count / fps,
        "width_px": film.scenes[0].camera.pixels[0],
        "height_px": film.scenes[0].camera.pixels[1],
        "exposure": exposure,
        "exposure_ev": (reel.measured or {}).get("exposures"),
        "quality": quality,
        "seed": seed,
        "frames_kept_in": reel.folder.name if keep_frames else None,
    }
    first, last = (caption(step, what) for step in (steps[0], steps[-1]))
    line = f"{out}: {count} frames, {quantity(steps[0], what)} {first} to {last}"
    if as_json:
        click.echo(json.dumps(report, ensure_ascii=False))
        click.echo(line, err=True)
    else:
        click.echo(line)


def _free(out: Path, force: bool) -> None:
    """Refuse a place where no film can or may be written."""
    from skyoptics.errors import ResourceError

    if out.is_dir():
        raise ResourceError(f"{out} is a folder; give the name of a file")
    if not out.parent.is_dir():
        raise ResourceError(f"{out}: there is no folder {out.parent}; make it first")
    if out.exists() and not force:
        raise ResourceError(f"{out} is there already; --force replaces it")


def _open(reel: Any) -> int:
    """Open a reel, say what was found, and return the number of frames that are there."""
    reel.open()
    if reel.dropped:
        click.echo(
            f"note: {reel.folder.name} held {reel.dropped} frames of another film (scene, options or program have changed); "
            "they are made anew",
            err=True,
        )
    there = sum(reel.path(number).exists() for number in range(len(reel.film.scenes)))
    if there:
        click.echo(f"{there} of {len(reel.film.scenes)} frames are there already", err=True)
    return int(there)


def _make(reel: Any, out: Path, fps: float) -> None:
    """Make what frames are missing and write the film."""
    from skyoptics.cli import progress
    from skyoptics.colour import video
    from skyoptics.rendering.frames import shoot

    progress.note_first_compilation()
    title, comment = reel.text.get("Title", out.stem), reel.text["Description"]
    with progress.shown() as tell:
        frames = shoot(reel, tell)
        if out.suffix.lower() == ".mp4":
            about = {
                "title": title,
                "description": comment,
                "comment": f"{reel.text['Software']}: {reel.text['Command']}",
            }
            video.write_mp4(out, frames, fps, about)
            return
        for _ in frames:
            pass
        video.write_gif(out, reel.get, len(reel.film.scenes), fps, f"{title}: {comment}")


def _text(
    film: Any, what: Any, ends: Any, scene: Path, overrides: tuple[str, ...], seconds: float, fps: float
) -> dict[str, str]:
    """Return the metadata of a film and its frames; nothing private in it."""
    from skyoptics import __version__
    from skyoptics.colour.metadata import strip_private
    from skyoptics.rendering.vary_words import caption, quantity

    first, last = ends
    words = ["skyoptics", "animate", scene.name, "--vary", what.words, "--seconds", f"{seconds:g}", "--fps", f"{fps:g}"]
    for override in overrides:
        words += ["--set", override]
    words += ["--exposure", film.exposure, "--quality", film.settings.quality, "--seed", str(film.settings.seed)]
    return {
        "Title": film.scenes[0].title or scene.stem,
        "Software": f"skyoptics {__version__}",
        "Description": strip_private(f"{quantity(first, what)} {caption(first, what)} to {caption(last, what)}"),
        "Command": strip_private(" ".join(words)),
    }
