"""Cautions: what is said where, and the sources named in them."""

import pytest

from skyoptics.planning import cautions


def test_bows_bring_lightning_and_halos_the_sun():
    """US National Weather Service: "When thunder roars, go indoors", 30 minutes after the last thunder."""
    bow = " ".join(cautions.for_feature("primary"))
    assert "When thunder roars, go indoors" in bow
    assert "30 minutes" in bow
    assert "sun is often in view" not in bow
    halo = " ".join(cautions.for_feature("halo_22"))
    assert "optical viewfinder" in halo
    assert "thunder" not in halo
    assert "frost" in halo
    assert "frost" not in " ".join(cautions.for_feature("circumhorizontal"))


@pytest.mark.parametrize("name", ["primary", "secondary", "fogbow", "moonbow", "halo_22", "circumhorizontal"])
def test_every_feature_defers_to_the_weather_service(name):
    body = "moon" if name == "moonbow" else "sun"
    found = cautions.for_feature(name, body)
    assert found[-1] == cautions.AUTHORITY
    assert any("road" in text for text in found)
    assert (cautions.NIGHT in found) == (body == "moon")
    assert len(set(found)) == len(found)


def test_aims():
    """ISO 12312-2: filters for viewing without magnification."""
    assert cautions.for_aim(10.0, 31.7) == (cautions.SUN_IN_FRAME,)
    assert cautions.for_aim(33.0, 31.7) == (cautions.SUN_NEAR_FRAME,)
    assert cautions.for_aim(60.0, 31.7) == ()
    assert "ISO 12312-2" in cautions.SUN_IN_FRAME
    assert "unaided eye" in cautions.SUN_IN_FRAME
