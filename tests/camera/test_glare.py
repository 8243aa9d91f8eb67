"""Glare against the published equations, conservation of light, and the disc against its closed form."""

import numpy as np
import pytest

from skyoptics.camera import frame, glare
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between, direction
from skyoptics.units import DEG

RADIUS = 0.2666 * DEG
DARKENED = np.zeros((3, 6))
DARKENED[:, 0], DARKENED[:, 1] = 0.3, 0.7
TOTAL = np.pi * RADIUS**2 * (0.3 + 0.7 * 2.0 / 3.0)  # ∫ (0.3 + 0.7 µ) over the disc
SUN = direction(np.pi, 25.0 * DEG)


@pytest.mark.parametrize(("age", "pigment"), [(20.0, 0.0), (35.0, 0.5), (70.0, 1.0)])
def test_outer_spread_is_the_disability_glare_equation(age, pigment):
    # CIE 146:2002, general disability glare equation (from memory), 2 to 30 degrees; a fit of its own, so to 20 %.
    theta = np.linspace(2.0, 30.0, 50)
    published = (
        10.0 / theta**3 + (5.0 / theta**2 + 0.1 * pigment / theta) * (1.0 + (age / 62.5) ** 4) + 0.0025 * pigment
    )
    np.testing.assert_allclose(glare.eye_spread(theta * DEG, age, pigment), published, rtol=0.2)


@pytest.mark.parametrize("age", [20.0, 35.0])
def test_published_spread_moves_about_all_light(age):
    # A point-spread function has the integral 1 (Vos & van den Berg 1999); scaling and fading alter it little in young eyes.
    angle = np.geomspace(1e-7, glare.FADES[0], 20001)
    density = 2.0 * np.pi * np.sin(angle) * glare.eye_spread(angle, age) * angle
    assert np.trapezoid(density, np.log(angle)) == pytest.approx(1.0, abs=0.05)


def test_scaled_spread_moves_all_light():
    angle = np.geomspace(1e-7, np.pi, 40001)
    density = 2.0 * np.pi * np.sin(angle) * glare.scaled_spread(angle) * angle
    assert np.trapezoid(density, np.log(angle)) == pytest.approx(1.0, abs=1e-4)
    assert glare.scaled_spread(101.0 * DEG) == 0.0


def test_a_point_of_light_becomes_the_spread():
    pixel = 0.05 * DEG
    picture = np.zeros((121, 161, 3))
    picture[60, 80] = 1.0, 2.0, 3.0
    seen = glare.spread(picture, pixel)
    np.testing.assert_allclose(seen.sum(axis=(0, 1)), [1.0, 2.0, 3.0], rtol=1e-12)
    apart = np.array([4, 8, 14])  # further out the mirrored borders add to it
    expected = 2.0 * glare.scaled_spread(apart * pixel) * pixel**2
    np.testing.assert_allclose(seen[60, 80 + apart, 1], expected, rtol=0.02)
    np.testing.assert_allclose(seen[60 - apart, 80, 1], seen[60 + apart, 80, 1], rtol=1e-9)  # alike on all sides


def test_light_is_kept_and_an_even_sky_stays_even():
    rng = np.random.default_rng(4)
    picture = rng.lognormal(0.0, 3.0, (60, 90, 3))
    seen = glare.spread(picture, 0.1 * DEG)
    np.testing.assert_allclose(seen.sum(axis=(0, 1)), picture.sum(axis=(0, 1)), rtol=1e-12)
    assert seen.min() >= 0.0
    assert seen.max() < picture.max()
    np.testing.assert_allclose(glare.spread(np.full((60, 90, 3), 7.0), 0.1 * DEG), 7.0, rtol=1e-12)


def test_outside_the_image_nothing_is_lost_or_lit():
    rng = np.random.default_rng(5)
    picture = rng.lognormal(0.0, 1.0, (50, 50, 3)).astype(np.float32)
    out = np.hypot(*np.mgrid[-24.5:25.0, -24.5:25.0]) > 22.0
    picture[out] = np.nan
    seen = glare.spread(picture, 0.2 * DEG)
    assert seen.dtype == np.float32
    assert np.array_equal(np.isnan(seen[..., 0]), out)
    np.testing.assert_allclose(np.nansum(seen, axis=(0, 1)), np.nansum(picture, axis=(0, 1)), rtol=1e-5)
    even = np.where(out[..., None], np.nan, np.full((50, 50, 3), 7.0))
    np.testing.assert_allclose(glare.spread(even, 0.2 * DEG)[~out], 7.0, rtol=1e-12)


def test_spread_disc_keeps_its_light():
    angle = np.geomspace(1e-7, glare.FADES[1], 40001)
    light = glare.disc_glare(angle, RADIUS, DARKENED)[:, 1]
    assert np.trapezoid(light * 2.0 * np.pi * np.sin(angle) * angle, np.log(angle)) == pytest.approx(TOTAL, rel=3e-3)
    assert light[np.searchsorted(angle, 5.0 * DEG)] == pytest.approx(TOTAL * glare.scaled_spread(5.0 * DEG), rel=0.02)
    assert glare.disc_glare(np.array([120.0 * DEG]), RADIUS, DARKENED).max() == 0.0


def test_disc_and_pixels_agree_on_glare():
    # Two ways to the same picture: rings over the disc, and cosines over fine pixels.
    lens = frame.photograph("rectilinear", 0.3, (0.036, 0.024), (240, 360), frame.aim(np.pi, 25.0 * DEG, 0.0))
    by_angle, by_pixel = np.zeros((*lens.shape, 3)), np.zeros((*lens.shape, 3))
    whole = slice(0, lens.shape[0])
    glare.add_disc(by_angle, lens, whole, lens.pixel_size(whole), SUN, RADIUS, DARKENED, glare=True)
    glare.add_disc(by_pixel, lens, whole, lens.pixel_size(whole), SUN, RADIUS, DARKENED, glare=False)
    # By pixels, the light that would leave the picture stays where it was.
    by_angle += (1.0 - by_angle.sum() / by_pixel.sum()) * by_pixel
    by_pixel = glare.spread(by_pixel, float(np.median(lens.pixel_size())))
    away = angle_between(SUN, lens.vectors())
    for low, high in ((0.0, 0.8), (0.8, 0.95), (1.05, 1.2), (1.2, 2.0)):
        there = (away >= low * RADIUS) & (away < high * RADIUS)
        assert by_angle[there, 1].mean() == pytest.approx(by_pixel[there, 1].mean(), rel=0.02)


@pytest.mark.parametrize(
    ("lens", "focal", "shape"), [("rectilinear", 0.024, (400, 600)), ("equidistant", 0.012, (200, 300))]
)
@pytest.mark.parametrize("off", [0.0, 0.13])
def test_drawn_disc_has_its_light(lens, focal, shape, off):
    grid = frame.photograph(lens, focal, (0.036, 0.024), shape, frame.aim(np.pi + off * DEG, (25.0 + off) * DEG, 0.0))
    picture = np.zeros((*shape, 3))
    for rows in (
        slice(0, shape[0] // 2),
        slice(shape[0] // 2, shape[0]),
    ):  # in two goes, through the middle of the disc
        glare.add_disc(picture[rows], grid, rows, grid.pixel_size(rows), SUN, RADIUS, DARKENED, glare=False)
    assert (picture[..., 1] * grid.solid_angle()).sum() == pytest.approx(TOTAL, rel=5e-3)


def test_glare_in_a_panorama_keeps_all_light():
    grid = frame.panorama(2.0 * np.pi, np.pi, (180, 360), np.pi, 0.0, 0.0)
    picture = np.zeros((180, 360, 3))
    glare.add_disc(picture, grid, slice(0, 180), grid.pixel_size(slice(0, 180)), SUN, RADIUS, DARKENED, glare=True)
    assert (picture[..., 1] * grid.solid_angle()).sum() == pytest.approx(TOTAL, rel=0.01)


def test_a_disc_is_cut_at_the_horizon():
    level = direction(np.pi, 0.0)
    grid = frame.photograph("rectilinear", 0.4, (0.036, 0.024), (200, 300), frame.aim(np.pi, 0.0, 0.0))
    halves = []
    for upper in (True, False, None):
        picture = np.zeros((200, 300, 3))
        glare.add_disc(
            picture,
            grid,
            slice(0, 200),
            grid.pixel_size(slice(0, 200)),
            level,
            RADIUS,
            DARKENED,
            glare=False,
            upper=upper,
        )
        halves.append(picture)
    np.testing.assert_allclose(halves[0] + halves[1], halves[2], atol=1e-12)
    assert not halves[0][101:].any()
    assert halves[0].sum() == pytest.approx(halves[1].sum(), rel=1e-9)


def test_faults_are_worded():
    with pytest.raises(DomainError, match="needs shape"):
        glare.spread(np.zeros((4, 4)), 1e-3)
    with pytest.raises(DomainError, match="pixels a size"):
        glare.spread(np.zeros((4, 4, 3)), 0.0)
    with pytest.raises(DomainError, match="years old"):
        glare.eye_spread(0.1, age=150.0)
