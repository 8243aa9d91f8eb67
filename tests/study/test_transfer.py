"""Tables for radiative transfer: moments that rebuild the curve."""

from __future__ import annotations

import numpy as np
import pytest
import xarray

from skyoptics.droplets import legendre
from skyoptics.droplets.averages import average
from skyoptics.droplets.sizes import quadrature
from skyoptics.errors import DomainError
from skyoptics.study import transfer
from skyoptics.study.question import Question


@pytest.fixture(scope="module")
def table():
    question = Question(radius_um=(5.0,), spread=(0.1,), wavelength_nm=(450.0, 650.0))
    return question, transfer.dataset(question, question.steps()[0], command="skyoptics study")


def test_zeroth_is_one_and_first_is_g(table):
    data = table[1]
    moments = data["legendre_moment"].sel(element="P11").to_numpy()
    np.testing.assert_allclose(moments[:, 0], 1.0, atol=1e-9)
    np.testing.assert_allclose(moments[:, 1], data["asymmetry"], atol=1e-9)
    assert np.all(np.abs(moments[:, -1]) < 1e-9)
    np.testing.assert_allclose(moments, data["legendre_moment"].sel(element="P22"))


def test_their_sum_rebuilds_the_curve(table):
    """At nodes and between them, every element, within 1e-6 of P11."""
    question, data = table
    step = question.steps()[0]
    between = np.cos(np.deg2rad([0.0, 0.7, 33.3, 90.1, 141.9, 179.5, 180.0]))
    for w in range(2):
        p11 = data["mueller"][w, :, 0].to_numpy()
        moments = data["legendre_moment"][w].to_numpy()
        cosine = np.cos(np.deg2rad(data["scattering_angle"].to_numpy()))
        np.testing.assert_allclose(legendre.series(moments[:, 0], cosine), p11, rtol=1e-6)
        for element in range(6):
            rebuilt = legendre.series(moments[:, element], cosine)
            assert np.max(np.abs(rebuilt - data["mueller"][w, :, element].to_numpy()) / p11) < 1e-6
        # an average of its own, drop for drop
        sizes = int(data.attrs["sizes"])
        level = next(k for k in range(8) if len(quadrature(step.distribution, k)[0]) == sizes)
        exact = average(
            step.distribution,
            step.law(question.wavelength[w]),
            question.wavelength[w],
            between,
            tolerance=0.0,
            largest_level=level,
        )
        np.testing.assert_allclose(legendre.series(moments[:, 0], between), exact.elements[:, 0, 0], rtol=1e-6)


def test_file_reads_back(table, tmp_path):
    from skyoptics.study.dataset import write

    question, data = table
    path = tmp_path / transfer.name(question, question.steps()[0])
    assert path.name == "transfer-radius-um-5.nc"
    write(data, path)
    with xarray.open_dataset(path, engine="h5netcdf") as found:
        assert found.attrs["Conventions"].startswith("CF-")
        assert found["scattering_angle"].attrs["units"] == "degree"
        np.testing.assert_array_equal(found["legendre_moment"], data["legendre_moment"])


def test_too_large():
    with pytest.raises(DomainError, match="up to 350 is allowed"):
        transfer.check(Question(radius_um=(1000.0,), wavelength_nm=(550.0,)))
