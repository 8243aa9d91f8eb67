"""The spectral render that may lie under a preview: a scene seen through the preview's view, lit by the plan's sun."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal, cast

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.planning.view import View
from skyoptics.units import DEG, MM, FloatArray

if TYPE_CHECKING:
    from skyoptics.rendering.scatter import Progress
    from skyoptics.scene.model import Scene


def refitted(scene: Scene, view: View, sun_azimuth: float, sun_elevation: float, body: str) -> Scene:
    """Return a scene whose camera is a view and whose light stands where the plan's does.

    Parameters
    ----------
    scene : Scene
        Any; its air, ground and picture are kept, and of its camera exposure and polariser.
    view : View
        From `skyoptics.planning.view`.
    sun_azimuth, sun_elevation : float
        [rad]
    body : {"sun", "moon"}
        What shines; a moon keeps the phase of a scene with a moon, else it is full.

    Raises
    ------
    DomainError
        For a lens that is too short for its sensor to stand in a scene.
    """
    from skyoptics.scene.model import Aim, Camera, Light

    rows, columns = view.shape
    sensor = view.camera.sensor
    # a scene takes sides of 1 to 1000 mm; angles depend on ratios only
    factor = min(1.0, 900.0 / (max(sensor.width, sensor.height) / MM))
    if view.camera.focal / MM * factor < 0.5:
        raise DomainError(
            f"a sensor of {sensor.width / MM:.4g} × {sensor.height / MM:.4g} mm is too large for a lens of "
            f"{view.camera.focal / MM:g} mm: no scene can be rendered through it; take a longer one"
        )
    camera = Camera(
        lens=cast(Any, view.camera.lens),
        focal_mm=view.camera.focal / MM * factor,
        sensor_mm=(sensor.width / MM * factor, sensor.height / MM * factor),
        width_px=columns,
        height_px=rows,
        aim=Aim(
            azimuth_deg=view.aim.azimuth / DEG, elevation_deg=view.aim.elevation / DEG, roll_deg=view.aim.roll / DEG
        ),
        aperture=scene.camera.aperture,
        exposure_s=scene.camera.exposure_s,
        iso=scene.camera.iso,
        polariser_deg=scene.camera.polariser_deg,
    )
    place = {"latitude_deg": None, "longitude_deg": None, "time": None, "zone": None}
    light = Light(
        **{name: getattr(scene.light, name) for name in Light.model_fields}
        | place
        | {
            "body": cast(Literal["sun", "moon"], body),
            "elevation_deg": sun_elevation / DEG,
            "azimuth_deg": sun_azimuth / DEG,
            "phase_angle_deg": scene.light.phase_angle_deg if body == scene.light.body == "moon" else 0.0,
        }
    )
    return scene.model_copy(update={"camera": camera, "light": light})


def render(scene: Scene, where: str, quality: str, tell: Progress) -> FloatArray:
    """Return the render, display-encoded, shape (ny, nx, 3), 0 to 1, nan outside the image.

    Parameters
    ----------
    scene : Scene
        From `refitted`.
    where : str
        Its file, for faults.
    quality : str
        "draft", "normal" or "fine".
    tell : callable
        Told what goes on.
    """
    from skyoptics.colour.display import encode
    from skyoptics.rendering import run

    result = run.render(scene, where, run.Settings(quality), tell)
    rgb = np.asarray(encode(result.developed.rgb), dtype=np.float64)
    return np.where(np.isfinite(result.xyz), rgb, np.nan)
