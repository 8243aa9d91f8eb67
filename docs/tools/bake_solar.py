"""Write skyoptics/light/solar_g173.npz from colour-science's copy of ASTM G173-03 (extraterrestrial column).

Reading colour-science takes more than a second, so the few numbers needed are kept beside the module that reads them.
Run from the root of the repository: ``python docs/tools/bake_solar.py``.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from colour.plotting.datasets import SD_ASTMG173_ETR

TARGET = Path(__file__).parents[2] / "skyoptics" / "light" / "solar_g173.npz"
LOWEST_NM, HIGHEST_NM = 280.0, 1100.0


def main() -> None:
    """Write the file and say how large it is."""
    wavelength = SD_ASTMG173_ETR.wavelengths
    keep = (wavelength >= LOWEST_NM) & (wavelength <= HIGHEST_NM)
    np.savez_compressed(TARGET, wavelength_nm=wavelength[keep], irradiance=SD_ASTMG173_ETR.values[keep])
    print(f"{TARGET}: {keep.sum()} samples, {TARGET.stat().st_size} bytes")


if __name__ == "__main__":
    main()
