"""Remake the pictures of the README from the example scenes: python docs/tools/make_pictures.py [NAME...]."""

import sys
import time
from pathlib import Path

import imageio.v3 as iio
import numpy as np
from PIL import Image

import skyoptics
from skyoptics.scene.load import load

ROOT = Path(__file__).parents[2]
WIDTH = 900
LABELLED = {"mixed-whole-sky": 2000, "pyramid-display": None, "over-the-ice-fog": None}
"""Scenes of which a labelled copy is kept too, and the width they are rendered at [pixel]."""


def main(names: list[str]) -> None:
    """Render scenes and keep small copies."""
    folder = ROOT / "docs" / "pictures"
    folder.mkdir(exist_ok=True)
    for name in names or sorted(path.stem for path in (ROOT / "scenes").glob("*.toml")):
        start = time.perf_counter()
        width = LABELLED.get(name)
        scene = load(ROOT / "scenes" / f"{name}.toml", () if width is None else (f"camera.width_px={width}",))
        picture = skyoptics.render(scene, seed=1)
        keep(iio.imread(picture._repr_png_()), folder / f"{name}.png")
        if name in LABELLED:
            keep(picture.labelled(), folder / f"{name}.labels.png")
        print(f"{name}: {time.perf_counter() - start:.0f} s, EV {picture.report['exposure_ev']:g}", flush=True)


def keep(pixels: np.ndarray, path: Path) -> None:
    """Write a small copy."""
    image = Image.fromarray(pixels)
    height = round(image.height * WIDTH / image.width)
    iio.imwrite(path, np.asarray(image.resize((WIDTH, height), Image.Resampling.LANCZOS)))


if __name__ == "__main__":
    main(sys.argv[1:])
