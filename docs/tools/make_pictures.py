"""Remake the pictures of the README from the example scenes: python docs/tools/make_pictures.py [NAME...]."""

import sys
import time
from pathlib import Path

import imageio.v3 as iio
import numpy as np
from PIL import Image

import skyoptics

ROOT = Path(__file__).parents[2]
WIDTH = 900


def main(names: list[str]) -> None:
    """Render scenes and keep small copies."""
    folder = ROOT / "docs" / "pictures"
    folder.mkdir(exist_ok=True)
    for name in names or sorted(path.stem for path in (ROOT / "scenes").glob("*.toml")):
        start = time.perf_counter()
        picture = skyoptics.render(skyoptics.load(ROOT / "scenes" / f"{name}.toml"), seed=1)
        image = Image.fromarray(iio.imread(picture._repr_png_()))
        height = round(image.height * WIDTH / image.width)
        iio.imwrite(folder / f"{name}.png", np.asarray(image.resize((WIDTH, height), Image.Resampling.LANCZOS)))
        print(f"{name}: {time.perf_counter() - start:.0f} s, EV {picture.report['exposure_ev']:g}", flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
