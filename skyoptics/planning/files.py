"""Files of a plan: refused before the work where they are in the way, written all or none."""

from __future__ import annotations

import json
from contextlib import ExitStack
from pathlib import Path
from typing import NamedTuple

from skyoptics.colour.images import replacing
from skyoptics.errors import ResourceError
from skyoptics.planning.answers import Plan


class Wanted(NamedTuple):
    """Which files are to be written, each None for no such file."""

    csv: Path | None = None
    ics: Path | None = None
    pdf: Path | None = None
    geojson: Path | None = None

    @property
    def paths(self) -> tuple[Path, ...]:
        """Those that are wanted."""
        return tuple(path for path in self if path is not None)


def check(wanted: Wanted, force: bool) -> None:
    """Refuse files that cannot or must not be written.

    Parameters
    ----------
    wanted : Wanted
        The files.
    force : bool
        Whether to replace those that are there.

    Raises
    ------
    ResourceError
        For a file that is there and may not be replaced, a folder in its place, a folder that is not there, and a
        name given twice.
    """
    if len({path.resolve() for path in wanted.paths}) < len(wanted.paths):
        raise ResourceError("two kinds of output have the same file name; give each its own")
    for path in wanted.paths:
        if path.is_dir():
            raise ResourceError(f"{path} is a folder; give the name of a file")
        if not path.parent.is_dir():
            raise ResourceError(f"{path}: there is no folder {path.parent}; make it first")
        if path.exists() and not force:
            raise ResourceError(f"{path} is there already; --force replaces it")


def write(plan: Plan, wanted: Wanted, body: str, alarm_minutes: int = 60, line_km: float = 20.0) -> list[Path]:
    """Write the files of a plan.

    Parameters
    ----------
    plan : Plan
        The answer.
    wanted : Wanted
        The files, checked.
    body : {"sun", "moon"}
        What lights the feature.
    alarm_minutes : int
        Between alarm and start of calendar entries.
    line_km : float
        Length of lines of sight.

    Returns
    -------
    list of Path
        Those that were written.

    Raises
    ------
    ResourceError
        Where the disk refuses.
    """
    from skyoptics.planning import calendar_file, sheet_pdf
    from skyoptics.planning.geojson import geojson
    from skyoptics.planning.listing import listing

    contents: dict[Path, bytes] = {}
    if wanted.csv is not None:
        contents[wanted.csv] = listing(plan).encode()
    if wanted.ics is not None:
        contents[wanted.ics] = calendar_file.calendar(plan, body, alarm_minutes)
    if wanted.pdf is not None:
        contents[wanted.pdf] = sheet_pdf.write(plan, body)
    if wanted.geojson is not None:
        contents[wanted.geojson] = (json.dumps(geojson(plan, line_km, body), ensure_ascii=False) + "\n").encode()
    with ExitStack() as stack:
        for path, content in contents.items():
            stack.enter_context(replacing(path)).write_bytes(content)
    return list(contents)
