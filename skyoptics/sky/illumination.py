"""Light that falls on level ground and on slopes: from sources, from the sky, and from the ground before a slope.

The sky's part is an integral over directions by Gauss's rule in the sine of elevation and even steps of azimuth: for clear and
clouded skies within 0.2 %.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.materials.ranges import within
from skyoptics.optics.source import Source
from skyoptics.sky.compose import Behind
from skyoptics.units import FloatArray

_HEIGHTS, _TURNS = 24, 72


@dataclass(frozen=True, eq=False)
class Illumination:
    """Light on the ground.

    Parameters
    ----------
    sky : Behind
        What shines above the horizon; its own ground is not asked for.
    sources : sequence of Source
        Sun or moon; those below the horizon give nothing.
    sunlit : float
        Share of the sources' light that reaches the ground, 0 in the shadow of a cloud, to 1 [1].

    Attributes
    ----------
    direct, diffuse : ndarray, shape (nλ,)
        Irradiance of level ground by the sources and by the sky [W m⁻² nm⁻¹].

    Raises
    ------
    DomainError
        If the share is not 0 to 1.
    """

    sky: Behind
    sources: Sequence[Source]
    sunlit: float = 1.0
    direct: FloatArray = field(init=False)
    diffuse: FloatArray = field(init=False)
    _vectors: FloatArray = field(init=False, repr=False)
    _light: FloatArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        within("sunlit share", self.sunlit, 0.0, 1.0)
        node, weight = np.polynomial.legendre.leggauss(_HEIGHTS)
        azimuth = (np.arange(_TURNS) + 0.5) * (2.0 * np.pi / _TURNS)
        if self.sources:  # even steps on both sides of the first source
            azimuth = azimuth + float(azimuth_elevation(self.sources[0].direction)[0])
        vectors = direction(azimuth, np.arcsin(0.5 * (1.0 + node))[:, None])
        solid = (0.5 * weight * (2.0 * np.pi / _TURNS))[:, None, None]
        light = (self.sky.radiance(vectors) * solid).reshape(_HEIGHTS * _TURNS, -1)
        set_ = object.__setattr__
        set_(self, "_vectors", vectors.reshape(-1, 3))
        set_(self, "_light", light)
        set_(self, "diffuse", self._vectors[:, 2] @ light)
        set_(self, "direct", self._from_sources(np.array([[0.0, 0.0, 1.0]]))[0])

    @property
    def level(self) -> FloatArray:
        """Irradiance of level ground, shape (nλ,) [W m⁻² nm⁻¹]."""
        return self.direct + self.diffuse

    def on(self, normals: FloatArray, ground: FloatArray) -> FloatArray:
        """Return the irradiance of slopes that stand free above level ground.

        Parameters
        ----------
        normals : ndarray, shape (n, 3)
            Unit vectors out of the slopes (east, north, up).
        ground : ndarray, shape (nλ,)
            Radiance of the level ground [W m⁻² sr⁻¹ nm⁻¹].

        Returns
        -------
        ndarray, shape (n, nλ)
            [W m⁻² nm⁻¹]
        """
        cosine = np.maximum(normals @ self._vectors.T, 0.0)
        below = np.pi * 0.5 * (1.0 - normals[:, 2])
        return cosine @ self._light + below[:, None] * ground + self._from_sources(normals)

    def _from_sources(self, normals: FloatArray) -> FloatArray:
        """Return the irradiance by sources above the horizon, shape (n, nλ)."""
        total = np.zeros((len(normals), self._light.shape[1]))
        for source in self.sources:
            if source.direction[2] > 0.0:
                cosine = np.maximum(normals @ source.direction, 0.0)
                total += self.sunlit * cosine[:, None] * source.irradiance
        return total
