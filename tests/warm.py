"""Compile every kernel once, so that test processes side by side find them in the cache."""

import sys
import tempfile
from pathlib import Path

from skyoptics.cli.main import run

SCENE = """
[light]
elevation_deg = 20
[[air]]
kind = "drops"
[[air]]
kind = "crystals"
orientation = "plate"
[[air]]
kind = "crystals"
[camera]
width_px = 60
[picture]
wavelengths_nm = [550]
sky = "clear"
"""

if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as folder:
        scene = Path(folder, "warm.toml")
        scene.write_text(SCENE)
        sys.exit(run(["render", str(scene), "--out", folder, "--quality", "draft"]))
