"""Radiance of the clear sky, from sunlight and the physics of scattering; nothing in it is fitted to skies.

*Air.* Layered as in `skyoptics.light.layers`, with the vertical depths of `skyoptics.light.air`. Molecules scatter with
Rayleigh's phase function with depolarisation. Aerosol scatters with two Henyey–Greenstein functions, a wide forward and a
weak backward one, whose mean cosine is the 0.65 that SPCTRAL2 uses for rural aerosol (Bird & Riordan 1986), and with its
single-scattering albedo; the diffraction peak in the innermost degrees of an aureole is not in it.
*Single scattering* is summed along each line of sight through the spherical shells, each point lit through its own path to
the sun, above the earth's shadow or in its penumbra. *Higher orders* and light from the ground: `skyoptics.sky.multiple`.

The picture is a look-up: along a straight line of sight all sunlight turns by one angle, so phase functions stand in front of
the integrals and are applied exactly in each direction; the integrals are smooth in direction and are tabulated.

Left out: polarisation, refraction (the sun stands where it is said to stand), water vapour and oxygen bands, airglow and
stars. The observer stands on the ground, the earth's surface, whose pressure is the air's.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.kernels import sky as kernels
from skyoptics.light import layers, spectrum
from skyoptics.light.air import Air, aerosol_depth, ozone_depth, rayleigh_depth
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.sky.multiple import DENSITY_STEP, LEVELS, LOW_SUN, Field, Medium, in_parts, solve, zenith_angles
from skyoptics.units import DEG, NM, UM, ArrayLike, FloatArray

LOWEST_SUN = -12.0 * DEG
"""Where the model ends: the stars and airglow that it leaves out take over [rad]."""
DEPOLARISATION = 0.0279
"""Of air at 550 nm (King factor 1.048; Bates, Planet. Space Sci. 32, 785 (1984); from memory)."""
AEROSOL_LOBES = np.array([[0.96, 0.70], [0.04, -0.5]])
"""Share and asymmetry of the two parts of the aerosol's phase function."""

_KNOT_SPACING = 12.5 * NM  # of the wavelengths at which the transfer is solved
_ROWS, _TURNS = 48, 25  # directions that are solved
_FINE_ROWS, _FINE_TURNS = 192, 128  # entries of the table that pictures are read from
_LONGEST = 2.0e4  # piece of a line of sight [m]


def aerosol_albedo(wavelength: ArrayLike) -> FloatArray:
    """Return the share of light met by aerosol that is scattered.

    Parameters
    ----------
    wavelength : array_like
        [m]

    Returns
    -------
    ndarray
        0.945 exp(−0.095 ln²(λ / 0.4 µm)), rural aerosol (Bird & Riordan, J. Climate Appl. Meteorol. 25, 87 (1986)).
    """
    return 0.945 * np.exp(-0.095 * np.log(np.asarray(wavelength, dtype=np.float64) / (0.4 * UM)) ** 2)


def medium(wavelength: FloatArray, air: Air, albedo: float) -> Medium:
    """Return the atmosphere as the solver takes it.

    Parameters
    ----------
    wavelength : ndarray, shape (n,)
        [m]
    air : Air
        What is in it.
    albedo : float
        Of the ground.
    """
    height = np.arange(0.0, LEVELS[-1] + 0.5 * DENSITY_STEP, DENSITY_STEP)
    molecules, ozone, aerosol, _ = np.moveaxis(layers.density(height, air.profile), -1, 0)
    density = np.stack([molecules, aerosol, ozone], axis=1)
    density /= np.trapezoid(density, dx=DENSITY_STEP, axis=0)
    depth = np.stack(
        [
            rayleigh_depth(wavelength, air.pressure),
            aerosol_depth(wavelength, air.aerosol_depth_550, air.aerosol_exponent),
            ozone_depth(wavelength, air.ozone),
        ]
    )
    scattered = np.stack([np.ones_like(wavelength), aerosol_albedo(wavelength)])
    return Medium(density, depth, scattered, DEPOLARISATION, AEROSOL_LOBES, albedo)


@dataclass(frozen=True, eq=False)
class ClearSky:
    """The clear sky under one sun, solved when it is made.

    Parameters
    ----------
    bins : Bins
        Spectral bins within 280 to 1100 nm.
    sun : ndarray, shape (3,)
        Unit vector towards the sun (east, north, up), from −12° up.
    air : Air
        Pressure, ozone, aerosol.
    albedo : float
        Of the ground, the same at all wavelengths, 0 to 1.
    above : ndarray, shape (m,), optional
        Irradiance above the air at the wavelengths of `skyoptics.light.spectrum.samples` [W m⁻² nm⁻¹]; default the sun's
        at 1 AU. With the moon's, this is the moonlit sky.

    Attributes
    ----------
    diffuse, direct : ndarray, shape (nλ,)
        Irradiance of the level ground by the sky and by the sun itself [W m⁻² nm⁻¹].
    ground : ndarray, shape (nλ,)
        Radiance of the ground [W m⁻² sr⁻¹ nm⁻¹].
    orders : int
        Orders of scattering that were added up.
    table : ndarray, shape (elevation, azimuth, 3, nλ)
        What pictures are read from: the lines of sight in even steps of √elevation and of the angle to the sun's plane.

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    bins: Bins
    sun: FloatArray
    air: Air = field(default_factory=Air)
    albedo: float = 0.2
    above: FloatArray | None = None
    diffuse: FloatArray = field(init=False)
    direct: FloatArray = field(init=False)
    ground: FloatArray = field(init=False)
    orders: int = field(init=False)
    table: FloatArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        sun = np.asarray(self.sun, dtype=np.float64)
        if sun.shape != (3,) or not abs(float(np.linalg.norm(sun)) - 1.0) < 1e-6:
            raise DomainError("the direction of the sun must be one unit vector (east, north, up)")
        elevation = float(azimuth_elevation(sun)[1])
        within("elevation of the sun for a sky lit by it", elevation, LOWEST_SUN, 90.0 * DEG, "°", DEG)
        within("albedo of the ground", self.albedo, 0.0, 1.0)
        wavelength, into_bins = _knots(self.bins, self.above)
        stuff = medium(wavelength, self.air, self.albedo)
        zenith_angle = 0.5 * np.pi - elevation
        directions = 8 if zenith_angle > LOW_SUN else 6
        light = solve(stuff, zenith_angles(zenith_angle), directions, directions)
        coarse = _lines_of_sight(stuff, light, zenith_angle)
        here = int(np.argmin(np.abs(light.theta - zenith_angle)))
        diffuse, direct = into_bins @ light.flux[0, here, 1], into_bins @ light.direct[here]
        set_ = object.__setattr__
        set_(self, "sun", sun)
        set_(self, "diffuse", diffuse)
        set_(self, "direct", direct)
        set_(self, "ground", self.albedo / np.pi * (diffuse + direct))
        set_(self, "orders", light.orders)
        set_(self, "table", _refine(coarse @ into_bins.T))

    def radiance(self, vectors: ArrayLike) -> FloatArray:
        """Return the spectral radiance of sky and ground, without the sun's own disc.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            Unit vectors of viewing directions (east, north, up).

        Returns
        -------
        ndarray, shape (..., nλ)
            Bin means [W m⁻² sr⁻¹ nm⁻¹]; below the horizon the ground's; nan for nan.
        """
        vectors = np.asarray(vectors, dtype=np.float64)
        flat = np.ascontiguousarray(vectors.reshape(-1, 3))
        result = np.empty((len(flat), len(self.bins)))
        gamma = DEPOLARISATION / (2.0 - DEPOLARISATION)
        in_parts(
            lambda part: kernels.look_up(
                flat[part], self.sun, self.table, gamma, AEROSOL_LOBES, self.ground, result[part]
            ),
            len(flat),
        )
        return result.reshape(*vectors.shape[:-1], len(self.bins))


def _knots(bins: Bins, above: FloatArray | None) -> tuple[FloatArray, FloatArray]:
    """Return the wavelengths to solve (n,) and the matrix (nλ, n) from transfer at them to light in bins.

    Transfer is a broken line between the wavelengths; the product with the fine solar spectrum is averaged over each bin.
    """
    spectrum.irradiance(bins)  # refuses bins outside the spectrum
    samples, irradiance = spectrum.samples()
    if above is not None:
        irradiance = np.asarray(above, dtype=np.float64)
        if irradiance.shape != samples.shape:
            raise DomainError(f"the irradiance above the air needs {len(samples)} values, got shape {irradiance.shape}")
    low, high = np.clip([bins.edges.min(), bins.edges.max()], samples[0], samples[-1])
    count = 1 + int(np.ceil((high - low) / _KNOT_SPACING * (1.0 - 1e-9)))
    knots = np.linspace(low, high, count)
    if count == 1:
        shares = np.ones((len(samples), 1))
    else:
        shares = np.stack([np.interp(samples, knots, row) for row in np.eye(count)], axis=1)
    inside = Bins(np.clip(bins.edges, samples[0], samples[-1]))
    return knots, inside.mean(samples, irradiance[:, None] * shares)


def _rows(count: int) -> FloatArray:
    """Return the elevations of a table's rows: even steps of √(elevation / 90°)."""
    return 0.5 * np.pi * np.linspace(0.0, 1.0, count) ** 2


def _lines_of_sight(stuff: Medium, light: Field, zenith_angle: float) -> FloatArray:
    """Return single scattering without phase functions and the higher orders, (_ROWS, _TURNS, 3, n)."""
    elevations = _rows(_ROWS)
    turns = np.linspace(0.0, np.pi, _TURNS)
    result = np.empty((_ROWS, _TURNS, 3, stuff.depth.shape[1]))
    places = np.arange(_ROWS)

    def follow(part: slice) -> None:
        mine = places[part]
        rows = np.empty((len(mine), *result.shape[1:]))
        kernels.lines_of_sight(
            elevations[mine],
            turns,
            _LONGEST if zenith_angle < LOW_SUN else 0.25 * _LONGEST,
            zenith_angle,
            LEVELS,
            stuff.density,
            DENSITY_STEP,
            stuff.radius,
            stuff.depth,
            stuff.albedo,
            stuff.legendre,
            light.theta,
            light.moments,
            rows,
        )
        result[mine] = rows

    in_parts(follow, _ROWS)
    return result


def _refine(coarse: FloatArray) -> FloatArray:
    """Return a finer table by cubic splines, even about the sun's plane, nowhere negative."""
    from scipy.interpolate import CubicSpline

    rows = CubicSpline(np.linspace(0.0, 1.0, _ROWS), np.eye(_ROWS))(np.linspace(0.0, 1.0, _FINE_ROWS))
    turns = CubicSpline(np.linspace(0.0, 1.0, _TURNS), np.eye(_TURNS), bc_type="clamped")(
        np.linspace(0.0, 1.0, _FINE_TURNS)
    )
    half = np.tensordot(rows, coarse, axes=1)
    fine = np.moveaxis(np.tensordot(turns, half, axes=(1, 1)), 0, 1)
    return np.ascontiguousarray(np.maximum(fine, 0.0))
