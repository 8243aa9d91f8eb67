"""The only unit factors: multiply by one to come in (to SI), divide by it to go out.

``radius = radius_um * UM``; ``angle_deg = angle / DEG``.
"""

from __future__ import annotations

from math import pi
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

FloatArray: TypeAlias = NDArray[np.float64]
Float32Array: TypeAlias = NDArray[np.float32]
ComplexArray: TypeAlias = NDArray[np.complex128]
BoolArray: TypeAlias = NDArray[np.bool_]
IntArray: TypeAlias = NDArray[np.int64]
ArrayLike: TypeAlias = Any

NM = 1e-9
"""Nanometre [m]."""
UM = 1e-6
"""Micrometre [m]."""
MM = 1e-3
"""Millimetre [m]."""
KM = 1e3
"""Kilometre [m]."""
DEG = pi / 180.0
"""Degree [rad]."""
ARCMIN = DEG / 60.0
"""Minute of arc [rad]."""
HPA = 100.0
"""Hectopascal [Pa]."""
CELSIUS_ZERO = 273.15
"""Zero of the Celsius scale [K]; add it, do not multiply."""
