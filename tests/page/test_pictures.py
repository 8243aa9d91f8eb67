"""What is read from pictures: spectra by cell, names by cell, curves, one exposure."""

from dataclasses import replace

import numpy as np
import pytest

from skyoptics.crystals.arc_regions import parhelion_azimuth
from skyoptics.geometry.axes import angle_between, direction
from skyoptics.optics import bows
from skyoptics.optics.bins import Bins
from skyoptics.page import cells, curve
from skyoptics.page.pictures import exposures_apart, together
from skyoptics.rendering.labels import labels_by_name
from skyoptics.rendering.looking import look
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import from_text
from skyoptics.units import DEG, NM

PLATES = """
[light]
elevation_deg = 20
[[air]]
kind = "crystals"
shape = "prism"
aspect = 0.3
orientation = "plate"
tilt_deg = 1
optical_depth = 0.3
[camera]
lens = "equidistant"
focal_mm = 12
width_px = 96
height_px = 64
aim = "sun"
[picture]
wavelengths_nm = [450, 550, 650]
"""


@pytest.fixture(scope="module")
def halo():
    return render(from_text(PLATES), "plates", Settings("draft", 1, 1, rays=3_000_000))


def test_spectra_are_means_of_the_radiance(pictures, along):
    found = render(along.scenes[0], "x", Settings("draft", 1, 1))
    light = np.concatenate([block for _, block in look(found.job, found.sheets, None)])
    rows, columns, _ = pictures[0].spectra.shape
    mean = light.reshape(rows, 2, columns, 2, -1).mean(axis=(1, 3))
    assert pictures[0].spectra == pytest.approx(mean, rel=1e-5)


def test_many_bands_are_averaged_by_their_width():
    bins = Bins.adjoining(np.array([400.0, 410.0, 440.0]) * NM)
    assert cells.banded(np.array([1.0, 5.0]), bins)[0].tolist() == [1.0, 5.0]
    bins = Bins.adjoining(np.linspace(380.0, 780.0, 401) * NM)
    values, edges = cells.banded(np.arange(400.0), bins)
    assert len(values) == cells.MOST_BANDS
    assert values[0] == pytest.approx(4.5)
    assert edges[0] == pytest.approx(np.array([380.0, 390.0]) * NM)


def test_bows_are_named_where_their_ray_goes(pictures):
    """Primary and secondary by Descartes's ray (`skyoptics.optics.bows`), index of water at 550 nm 1.334 (IAPWS R9-97)."""
    for picture in pictures[:2]:
        grid = picture.directions
        for name, order in (("primary_bow", 2), ("secondary_bow", 3)):
            code = 1 + picture.names.index(name)
            views = grid.coarse(picture.arcs_side).vectors()[picture.arcs == code]
            assert len(views) > 20
            away = angle_between(picture.source, views)
            assert np.median(away) == pytest.approx(float(bows.scattering_angle(1.334, order)), abs=0.8 * DEG)
            assert np.abs(away - np.median(away)).max() < 2.2 * DEG


def test_the_cross_begins_on_the_brightest_feature(pictures):
    picture = pictures[0]
    row, column = picture.start
    assert picture.arcs[int(row) // picture.arcs_side, int(column) // picture.arcs_side] > 0


def test_one_exposure_and_captions_that_fit_it(pictures):
    assert len({picture.developed.exposure_ev for picture in pictures}) == 1
    assert exposures_apart(pictures) == 0.0
    fixed = [
        replace(p, developed=replace(p.developed, automatic=False, exposure_ev=float(k)))
        for k, p in enumerate(pictures)
    ]
    assert [picture.developed.exposure_ev for picture in together(fixed, "en")] == [0.0, 1.0, 2.0]
    keys = {point["key"] for point in pictures[0].report["shows"]["unlike"]}
    assert ("toned_down" in keys) == (pictures[0].developed.clipped >= 0.005)


def test_a_curve_of_drops_has_its_bow_at_the_ray(pictures):
    """As above; mean over the sphere ½ of the extinction, the other half being diffraction (rays)."""
    found = pictures[0].curve
    assert not found.framed
    assert len(found.bands) == 3
    angle = (np.arange(curve.STEPS) + 0.5) * np.pi / curve.STEPS
    back = angle > 100 * DEG
    assert angle[back][np.argmax(found.values[back, 1])] == pytest.approx(
        float(bows.scattering_angle(1.334, 2)), abs=0.5 * DEG
    )
    weight = 2.0 * np.pi * np.sin(angle) * np.pi / curve.STEPS
    assert (found.values * weight[:, None]).sum(axis=0) == pytest.approx(0.5, abs=0.01)


def test_crystals_that_stand_have_a_curve_where_the_picture_is(halo):
    found = curve.curve(halo)
    assert found.framed
    low, high = cells.span(halo)
    angle = (np.arange(curve.STEPS) + 0.5) * np.pi / curve.STEPS
    there = np.isfinite(found.values).all(axis=1)
    assert not there[angle > high + 1.5 * DEG].any()
    assert there[(angle > low + 1.5 * DEG) & (angle < high - 20 * DEG)].all()
    # sundogs: light of the 60° wedge of plates begins outside the least deviation of level rays, 21.8° at index 1.31
    near = (angle > 15 * DEG) & (angle < 35 * DEG)
    best = angle[near][np.nanargmax(found.values[near, 1])]
    assert 21.0 * DEG < best < 26.0 * DEG


def test_sundogs_are_named_where_they_stand(halo):
    """Azimuth of the parhelia from Bravais's law, `skyoptics.crystals.arc_regions.parhelion_azimuth`, at index 1.31."""
    names, code, side = cells.arcs(halo, labels_by_name(halo))
    grid = halo.job.directions.coarse(side)
    away = parhelion_azimuth(20.0 * DEG, 1.31)
    for sense in (-1.0, 1.0):
        row, column = grid.project(direction(np.pi + sense * (away + 0.6 * DEG), 20.0 * DEG))
        assert names[code[int(np.rint(row)), int(np.rint(column))] - 1] == "parhelia"
    views = grid.vectors()[code == 1 + names.index("parhelia")]
    assert np.abs(np.arcsin(views[:, 2]) - 20.0 * DEG).max() < 6.0 * DEG
    assert angle_between(halo.job.sources[0].direction, views).min() > 19.5 * DEG
