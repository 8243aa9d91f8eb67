"""Print the polynomials and first direction numbers kept in skyoptics/kernels/sobol.py, from scipy's table (BSD licence).

python docs/tools/bake_sobol.py
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import scipy

table = np.load(Path(scipy.__file__).parent / "stats" / "_sobol_direction_numbers.npz")
polynomials = [int(p) for p in table["poly"][1:12]]
print("_POLYNOMIALS =", tuple(polynomials))
print("_INITIAL = (")
for row, polynomial in enumerate(polynomials, start=1):
    print(f"    {tuple(int(v) for v in table['vinit'][row][: polynomial.bit_length() - 1])},")
print(")")
