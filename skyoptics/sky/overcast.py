"""Clouded skies: the standard general skies, and a thick cloud's dimming of the light above it.

ISO 15469:2004 / CIE S 011/E:2003 gives luminance relative to the zenith's as a gradation from zenith to horizon times an
indicatrix about the sun. Types 1–5 are overcast, 6–10 partly cloudy, 11–15 clear; 16 is the traditional overcast sky. One
spectrum holds for the whole sky: a cloud's light is nearly white, so colour comes with the light that falls on it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.materials.ranges import within
from skyoptics.units import DEG, ArrayLike, FloatArray

TYPES: dict[int, tuple[float, float, float, float, float]] = {
    1: (4.0, -0.70, 0.0, -1.0, 0.0),
    2: (4.0, -0.70, 2.0, -1.5, 0.15),
    3: (1.1, -0.8, 0.0, -1.0, 0.0),
    4: (1.1, -0.8, 2.0, -1.5, 0.15),
    5: (0.0, -1.0, 0.0, -1.0, 0.0),
    6: (0.0, -1.0, 2.0, -1.5, 0.15),
    7: (0.0, -1.0, 5.0, -2.5, 0.30),
    8: (0.0, -1.0, 10.0, -3.0, 0.45),
    9: (-1.0, -0.55, 2.0, -1.5, 0.15),
    10: (-1.0, -0.55, 5.0, -2.5, 0.30),
    11: (-1.0, -0.55, 10.0, -3.0, 0.45),
    12: (-1.0, -0.32, 10.0, -3.0, 0.45),
    13: (-1.0, -0.32, 16.0, -3.0, 0.30),
    14: (-1.0, -0.15, 16.0, -3.0, 0.30),
    15: (-1.0, -0.15, 24.0, -2.8, 0.15),
}
"""a, b of the gradation, c, d, e of the indicatrix (ISO 15469:2004, table 1)."""
UNIFORM = 5
OVERCAST = 1
TRADITIONAL = 16
"""L/Lz = (1 + 2 cos Z) / 3 (Moon & Spencer 1942), kept in the standard beside the fifteen types."""


def relative_luminance(kind: int, elevation: ArrayLike, from_sun: ArrayLike, sun_elevation: float) -> FloatArray:
    """Return the luminance of a standard sky ÷ that of its zenith.

    Parameters
    ----------
    kind : int
        Type 1 to 15, or 16, the traditional overcast sky.
    elevation : array_like
        Of the viewing direction, 0 to 90° [rad]; below the horizon the horizon's gradation is used.
    from_sun : array_like, broadcastable
        Angle between viewing direction and sun [rad].
    sun_elevation : float
        [rad]

    Returns
    -------
    ndarray
        f(χ) φ(Z) / (f(Zs) φ(0)), φ = 1 + a exp(b / cos Z), f = 1 + c [exp(dχ) − exp(dπ/2)] + e cos² χ; nan for nan.

    Raises
    ------
    DomainError
        For a type that does not exist.

    References
    ----------
    ISO 15469:2004, equations 1–5.
    """
    cosine = np.maximum(np.sin(np.asarray(elevation, dtype=np.float64)), 1e-6)
    chi = np.asarray(from_sun, dtype=np.float64)
    if kind == TRADITIONAL:
        return (1.0 + 2.0 * cosine) / 3.0 + 0.0 * chi
    if kind not in TYPES:
        raise DomainError(f"standard skies have types 1 to 15, or 16 for the traditional overcast sky, got {kind!r}")
    a, b, c, d, e = TYPES[kind]
    gradation = (1.0 + a * np.exp(b / cosine)) / (1.0 + a * np.exp(b))
    at_zenith = _indicatrix(np.asarray(0.5 * np.pi - sun_elevation), c, d, e)
    return gradation * _indicatrix(chi, c, d, e) / at_zenith


def horizontal_ratio(kind: int, sun_elevation: float) -> float:
    """Return the irradiance of level ground by a standard sky ÷ the radiance of its zenith [sr]; π for the uniform sky.

    Parameters
    ----------
    kind, sun_elevation
        As for `relative_luminance`.
    """
    node, weight = np.polynomial.legendre.leggauss(64)
    sine = 0.5 * (1.0 + node)[:, None]
    azimuth = (np.arange(128) + 0.5) * (np.pi / 128)
    cosine = sine * np.sin(sun_elevation) + np.sqrt(1.0 - sine**2) * np.cos(sun_elevation) * np.cos(azimuth)
    sky = relative_luminance(kind, np.arcsin(sine), np.arccos(np.clip(cosine, -1.0, 1.0)), sun_elevation)
    return float(np.pi * np.sum(weight[:, None] * sine * sky) / 128)


def cloud_transmission(
    optical_depth: float, sun_elevation: float, albedo: float = 0.2, asymmetry: float = 0.85
) -> float:
    """Return what a level cloud lets through: irradiance below it ÷ irradiance above it.

    Parameters
    ----------
    optical_depth : float
        Vertical, 0 and more [1]; a few for thin stratus, 20 to 60 for a grey day, 100 and more for rain clouds.
    sun_elevation : float
        −90° to 90° [rad]; below the horizon the light is taken as if from the horizon.
    albedo : float
        Of the ground, 0 to 1: light goes to and fro between it and the cloud.
    asymmetry : float
        Mean cosine of scattering, 0 to below 1; 0.85 for cloud drops (common practice, no source).

    Returns
    -------
    float
        0 to 1 and, over a bright ground, a little more.

    Raises
    ------
    DomainError
        Outside these ranges.

    Notes
    -----
    Eddington's approximation without absorption (Shettle & Weinman, J. Atmos. Sci. 27, 1048 (1970)): with
    t = (1 − g) τ, T = [2/3 + µ + (2/3 − µ) e^(−t/µ)] / (4/3 + t), and over a ground T / (1 − A t / (4/3 + t)).
    """
    within("optical depth of a cloud", optical_depth, 0.0, 1e4)
    within("elevation of the sun", sun_elevation, -90.0 * DEG, 90.0 * DEG, "°", DEG)
    within("albedo of the ground", albedo, 0.0, 1.0)
    within("asymmetry of scattering", asymmetry, 0.0, 0.999)
    mu = max(float(np.sin(sun_elevation)), 1e-3)
    t = (1.0 - asymmetry) * optical_depth
    through = (2.0 / 3.0 + mu + (2.0 / 3.0 - mu) * np.exp(-t / mu)) / (4.0 / 3.0 + t)
    return float(through / (1.0 - albedo * t / (4.0 / 3.0 + t)))


@dataclass(frozen=True, eq=False)
class StandardSky:
    """A sky of one spectrum and one of the standard shapes.

    Parameters
    ----------
    kind : int
        Type 1 to 16; 1 is overcast with bright zenith, 5 uniform.
    sun : ndarray, shape (3,)
        Unit vector towards the sun (east, north, up).
    zenith : ndarray, shape (nλ,)
        Spectral radiance of the zenith [W m⁻² sr⁻¹ nm⁻¹].
    albedo : float
        Of the ground, 0 to 1.

    Raises
    ------
    DomainError
        For a type that does not exist, a zenith that is negative or no number, or an albedo outside 0 to 1.
    """

    kind: int
    sun: FloatArray
    zenith: FloatArray
    albedo: float = 0.2

    def __post_init__(self) -> None:
        zenith = np.asarray(self.zenith, dtype=np.float64)
        relative_luminance(self.kind, 0.0, 0.0, self.sun_elevation)
        within("radiance of the zenith", zenith, 0.0, np.inf)
        within("albedo of the ground", self.albedo, 0.0, 1.0)
        object.__setattr__(self, "zenith", zenith)

    @classmethod
    def lit(cls, kind: int, sun: FloatArray, irradiance: FloatArray, albedo: float = 0.2) -> StandardSky:
        """Return the sky that gives level ground a spectral irradiance (nλ,) [W m⁻² nm⁻¹]."""
        elevation = float(azimuth_elevation(sun)[1])
        return cls(kind, sun, np.asarray(irradiance) / horizontal_ratio(kind, elevation), albedo)

    @classmethod
    def cloud(
        cls, kind: int, sun: FloatArray, above: FloatArray, optical_depth: float, albedo: float = 0.2
    ) -> StandardSky:
        """Return the sky below a thick level cloud.

        Parameters
        ----------
        kind, sun, albedo
            As for the class.
        above : ndarray, shape (nλ,)
            Irradiance that falls on the cloud, such as a clear sky's `diffuse` + `direct` [W m⁻² nm⁻¹].
        optical_depth : float
            Of the cloud; 100 makes a dark rain cloud.
        """
        through = cloud_transmission(optical_depth, float(azimuth_elevation(sun)[1]), albedo)
        return cls.lit(kind, sun, through * np.asarray(above), albedo)

    @property
    def sun_elevation(self) -> float:
        """Return the sun's elevation [rad]."""
        return float(azimuth_elevation(self.sun)[1])

    @property
    def diffuse(self) -> FloatArray:
        """Return the irradiance of level ground, shape (nλ,) [W m⁻² nm⁻¹]."""
        return self.zenith * horizontal_ratio(self.kind, self.sun_elevation)

    @property
    def ground(self) -> FloatArray:
        """Return the radiance of the ground, shape (nλ,) [W m⁻² sr⁻¹ nm⁻¹]."""
        return self.albedo / np.pi * self.diffuse

    def radiance(self, vectors: ArrayLike) -> FloatArray:
        """Return the spectral radiance of sky and ground.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            Unit vectors of viewing directions (east, north, up).

        Returns
        -------
        ndarray, shape (..., nλ)
            [W m⁻² sr⁻¹ nm⁻¹]; below the horizon the ground's; nan for nan.
        """
        vectors = np.asarray(vectors, dtype=np.float64)
        elevation = np.arcsin(np.clip(vectors[..., 2], -1.0, 1.0))
        away = angle_between(self.sun, vectors) if self.kind != TRADITIONAL else np.zeros_like(elevation)
        result = relative_luminance(self.kind, elevation, away, self.sun_elevation)[..., None] * self.zenith
        result[elevation < 0.0] = self.ground
        return result


def _indicatrix(chi: FloatArray, c: float, d: float, e: float) -> FloatArray:
    """Return f(χ)."""
    return 1.0 + c * (np.exp(d * chi) - np.exp(0.5 * np.pi * d)) + e * np.cos(chi) ** 2
