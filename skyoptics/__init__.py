"""skyoptics: rainbows and ice-crystal halos, from light and scatterers to spectral pictures.

The names below are loaded when first used, so that ``import skyoptics`` costs next to nothing.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from skyoptics.rendering.face import Picture, load, render

__version__ = "0.1.0"
__all__ = ["Picture", "__version__", "load", "render"]


def __getattr__(name: str) -> Any:
    """Load a public name on first use."""
    if name in ("Picture", "load", "render"):
        from skyoptics.rendering import face

        return getattr(face, name)
    raise AttributeError(f"module 'skyoptics' has no attribute {name!r}; it has {', '.join(__all__)}")


def __dir__() -> list[str]:
    return sorted(__all__)
