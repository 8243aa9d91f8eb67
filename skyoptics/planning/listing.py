"""An answer as a comma-separated table: a row a window, or a row a meeting where there is a subject."""

from __future__ import annotations

import csv
import io
from typing import Any

from skyoptics.planning.answers import Meeting, Plan, Window
from skyoptics.planning.document import iso, standing

COLUMNS = (
    "feature",
    "part",
    "start",
    "best",
    "end",
    "sun_azimuth_deg",
    "sun_elevation_deg",
    "crown_elevation_deg",
    "crown_azimuth_deg",
    "left_foot_azimuth_deg",
    "right_foot_azimuth_deg",
    "share_up",
    "distance_deg",
    "moon_illuminated",
    "weak",
    "note",
)
"""Of the table; angles are those at best, cells without a value are empty."""


def listing(plan: Plan) -> str:
    """Return a plan as comma-separated values (RFC 4180, but with plain line feeds).

    Parameters
    ----------
    plan : Plan
        The answer; with a subject, the meetings are listed, else the windows.

    Returns
    -------
    str
        A header and a row each; `COLUMNS` are as in the JSON document.
    """
    text = io.StringIO()
    table = csv.DictWriter(text, COLUMNS, lineterminator="\n")
    table.writeheader()
    table.writerows(_row(entry) for entry in (plan.windows if plan.subject is None else plan.meetings))
    return text.getvalue()


def _row(entry: Window | Meeting) -> dict[str, Any]:
    """Return the cells of a row."""
    best = standing(entry.best)
    feet = best.pop("foot_azimuths_deg")
    row = {
        "feature": entry.feature,
        "start": iso(entry.start.time),
        "best": iso(entry.best.time),
        "end": iso(entry.end.time),
        **best,
        "left_foot_azimuth_deg": feet[0] if feet else "",
        "right_foot_azimuth_deg": feet[-1] if len(feet) > 1 else "",
    }
    if isinstance(entry, Meeting):
        return {**row, "part": entry.part, "distance_deg": round(entry.distance_deg, 3)}
    lit = entry.moon_illuminated
    return {
        **row,
        "moon_illuminated": "" if lit is None else round(lit, 4),
        "weak": "yes" if entry.weak else "no",
        "note": entry.note,
    }
