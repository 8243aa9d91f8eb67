"""Write skyoptics/planning/arc_standings.npz: how halo arcs stand at every height of the sun.

Following the light of all arcs through a hundred sun heights takes half an hour; a year of planning needs them at once. Arcs
that are in the file are kept: delete it to begin anew. Run from the root of the repository:
``python docs/tools/bake_arc_standings.py``.
"""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np

from skyoptics.planning import arc_table, features

TARGET = Path(__file__).parents[2] / "skyoptics" / "planning" / "arc_standings.npz"
FIRST = ("upper_tangent", "lower_tangent", "circumscribed", "supralateral", "infralateral")
"""What is asked for most."""
LAST = ("column_arc", "tricker", "kern", "subhelic", "heliac", "wegener")
"""What takes longest; a row every two degrees."""


def order(name: str) -> tuple[int, str]:
    """Return the place of an arc in the order of work."""
    return (0 if name in FIRST else 2 if name.startswith(LAST) else 1), name


def main() -> None:
    """Write the file and say how long each arc took."""
    stored: dict[str, np.ndarray] = {}
    if TARGET.exists():
        with np.load(TARGET) as before:
            stored = {name: before[name] for name in before.files if name in features.tabulated()}
    for name in sorted(features.tabulated(), key=order):
        if name in stored:
            continue
        begin = time.perf_counter()
        made = arc_table.build(name, arc_table.INDEX, 0.0, 2.0 if name.startswith(LAST) else arc_table.STEP)
        stored[name] = np.array(made)
        print(f"{name}: {len(made.height)} rows, {time.perf_counter() - begin:.0f} s", flush=True)
        part = TARGET.with_suffix(".part.npz")
        np.savez_compressed(part, **stored)
        part.replace(TARGET)
    print(f"{TARGET}: {TARGET.stat().st_size} bytes")


if __name__ == "__main__":
    main()
