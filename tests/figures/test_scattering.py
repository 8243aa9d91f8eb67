"""Scattering curves as figures."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.figures import palette, scattering, scattering_lines
from skyoptics.units import DEG, NM

ANGLE = (np.arange(180) + 0.5) * DEG
WAVELENGTH = np.array([430.0, 470.0, 510.0, 550.0, 590.0, 630.0, 670.0, 700.0]) * NM


def plot(**more):
    curve = np.exp(-ANGLE)[:, None] * np.ones(len(WAVELENGTH))
    bump = np.exp(-(((ANGLE / DEG - 138.0) / 3.0) ** 2))[:, None] * np.ones(len(WAVELENGTH))
    parts = {"one": curve, "two": bump} if more.pop("both", False) else {"one": curve}
    return scattering_lines.Plot(ANGLE, WAVELENGTH, parts, **more)


def panel(figure):
    return figure.axes[0]


def test_a_line_a_wavelength_in_its_hue():
    lines = panel(scattering.draw(plot())).lines
    assert [line.get_label() for line in lines] == [f"{w / NM:g}\u00a0nm" for w in WAVELENGTH]
    assert lines[0].get_color() == palette.wavelength_colour(430.0)
    assert lines[0].get_ydata() == pytest.approx(np.exp(-ANGLE))


def test_a_line_a_part_in_colours_all_eyes_tell_apart():
    lines = panel(scattering.draw(plot(both=True))).lines
    assert [line.get_label() for line in lines] == ["one", "two"]
    assert [line.get_color() for line in lines] == list(palette.CATEGORICAL[:2])
    assert lines[0].get_linestyle() != lines[1].get_linestyle()


@pytest.mark.parametrize("scale", ["linear", "log"])
def test_scales(scale):
    assert panel(scattering.draw(plot(scale=scale))).get_yscale() == scale


def test_marks_stand_at_their_angle_and_near_ones_share_a_name():
    marks = [(60.0 * DEG, "a"), (61.0 * DEG, "b"), (138.0 * DEG, "c")]
    axes = panel(scattering.draw(plot(marks=marks)))
    assert [text.get_text() for text in axes.texts] == ["a, b", "c"]
    dotted = [line.get_xdata()[0] for line in axes.lines if len(line.get_xdata()) == 2]
    assert dotted == pytest.approx([60.0, 138.0])


def test_error_bands_are_one_standard_error_either_side():
    error = 0.1 * np.exp(-ANGLE)[:, None] * np.ones(len(WAVELENGTH))
    axes = panel(scattering.draw(plot(errors={"one": error}, scale="linear")))
    assert len(axes.collections) == len(WAVELENGTH)
    corners = axes.collections[0].get_paths()[0].vertices
    at = corners[np.abs(corners[:, 0] - ANGLE[50] / DEG) < 1e-6, 1]
    assert sorted(set(np.round(at, 6))) == pytest.approx([0.9 * np.exp(-ANGLE[50]), 1.1 * np.exp(-ANGLE[50])], abs=1e-5)


def test_around_the_particle_both_halves_are_alike():
    axes = panel(scattering.draw(plot(polar=True, scale="linear")))
    around, radius = axes.lines[0].get_data()
    assert np.cos(around) == pytest.approx(np.cos(around[::-1]))
    assert radius == pytest.approx(radius[::-1])


def test_colours_of_the_band():
    assert (
        np.ptp(scattering_lines.colours(plot())[5]) < 0.02
    )  # what scatters all wavelengths alike is white in sunlight
    red = np.where(WAVELENGTH > 600 * NM, 1.0, 0.05) * np.ones((len(ANGLE), 1))
    shown = scattering_lines.colours(scattering_lines.Plot(ANGLE, WAVELENGTH, {"one": red}))
    assert shown[90].argmax() == 0
    assert shown[90][0] > shown[90][2] + 0.3
    bright = scattering_lines.colours(plot()).mean(axis=1)
    assert np.all(np.diff(bright) <= 1e-9)  # brighter where there is more light


def test_the_spike_ahead_does_not_set_the_scale():
    values = np.ones((len(ANGLE), len(WAVELENGTH)))
    values[0] = 1e5
    axes = panel(scattering.draw(scattering_lines.Plot(ANGLE, WAVELENGTH, {"one": values}, scale="linear")))
    assert axes.get_ylim()[1] < 2.0


def test_refusals(tmp_path):
    with pytest.raises(DomainError, match="linear or log"):
        plot(scale="cubic")
    with pytest.raises(DomainError, match="3 wavelengths"):
        scattering_lines.Plot(ANGLE, WAVELENGTH[:2], {"one": np.ones((180, 2))}, colour_band=True)
    with pytest.raises(DomainError, match="no colours"):
        scattering_lines.colours(scattering_lines.Plot(ANGLE, WAVELENGTH * 3, {"one": np.ones((180, 8))}))
    with pytest.raises(DomainError, match=r"\.png, \.svg or \.pdf"):
        scattering.write(plot(), tmp_path / "a.gif")


def test_the_same_plot_is_the_same_file(tmp_path):
    for name in ("a.svg", "b.svg"):
        scattering.write(plot(both=True, marks=[(1.0, "x")]), tmp_path / name)
    assert (tmp_path / "a.svg").read_bytes() == (tmp_path / "b.svg").read_bytes()
