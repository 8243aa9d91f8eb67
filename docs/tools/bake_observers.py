"""Write skyoptics/colour/observers.npz: the CIE standard observers at 1 nm, 360 to 830 nm.

Run from the project's top folder: ``python docs/tools/bake_observers.py``. Importing colour-science takes over a second,
reading the baked file a few milliseconds; tests/colour/test_observer.py holds the two equal.

The tables are those of CIE 15 (CIE 1931 2° and CIE 1964 10°; ISO/CIE 11664-1) and V'(λ) of CIE 1951 (ISO 23539) as
colour-science carries them.
"""

from __future__ import annotations

from pathlib import Path

import colour
import numpy as np

TARGET = Path(__file__).resolve().parents[2] / "skyoptics" / "colour" / "observers.npz"
NAMES = {"1931": "CIE 1931 2 Degree Standard Observer", "1964": "CIE 1964 10 Degree Standard Observer"}


def tables() -> dict[str, np.ndarray]:
    """Return the arrays of the file: wavelength_nm (471,) and one (471, 3) table for each observer."""
    wavelength_nm = np.arange(360.0, 831.0)
    arrays = {"wavelength_nm": wavelength_nm}
    for observer, name in NAMES.items():
        functions = colour.MSDS_CMFS[name]
        if not np.array_equal(functions.wavelengths, wavelength_nm):
            raise SystemExit(f"{name}: expected 360..830 nm in steps of 1 nm")
        arrays[f"cie_{observer}"] = np.asarray(functions.values, dtype=np.float64)
    arrays["cie_scotopic"] = scotopic(wavelength_nm)
    return arrays


def scotopic(wavelength_nm: np.ndarray) -> np.ndarray:
    """Return V'(λ) of the CIE 1951 scotopic observer (471,), 0 outside its table."""
    curve = colour.SDS_LEFS["CIE 1951 Scotopic Standard Observer"]
    return np.interp(wavelength_nm, curve.wavelengths, curve.values, 0.0, 0.0)


if __name__ == "__main__":
    np.savez_compressed(TARGET, **tables())
    print(f"{TARGET.name}: {TARGET.stat().st_size} bytes")
