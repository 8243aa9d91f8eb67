import pytest

from skyoptics.errors import SceneError
from skyoptics.scene.load import from_text


def faults(shortest, *changes):
    with pytest.raises(SceneError) as caught:
        from_text(shortest, overrides=list(changes))
    return {(fault.key or fault.where.removeprefix("--set ")): fault.message for fault in caught.value.faults}


def test_defaults_change_nothing(shortest):
    scene = from_text(shortest)
    camera, picture = scene.camera, scene.picture
    assert (camera.aperture, camera.exposure_s, camera.iso) == (None, None, None)
    assert (picture.metering, picture.white, picture.white_kelvin) == ("sky", "display", None)
    assert (picture.glare, picture.show_sun) == ("none", None)


def test_half_an_exposure_is_told(shortest):
    found = faults(shortest, "camera.aperture=8", "camera.iso=100")
    assert list(found) == ["camera.exposure_s"]
    assert "beside aperture" in found["camera.exposure_s"]
    assert list(faults(shortest, "camera.iso=100")) == ["camera.aperture"]
    scene = from_text(shortest, overrides=["camera.aperture=8", "camera.iso=100", "camera.exposure_s=0.01"])
    assert scene.camera.exposure_s == 0.01


@pytest.mark.parametrize(
    ("changes", "key"),
    [
        (["picture.exposure_ev=12", "picture.metering=average"], "picture.metering"),
        (["picture.white=auto", "picture.white_kelvin=5000"], "picture.white_kelvin"),
        (["picture.observer=scotopic", "picture.white_kelvin=5000"], "picture.white_kelvin"),
        (["picture.observer=scotopic", "picture.white=daylight"], "picture.white"),
    ],
)
def test_what_cannot_stand_together(shortest, changes, key):
    assert list(faults(shortest, *changes)) == [key]


@pytest.mark.parametrize(
    "change",
    ["camera.aperture=0", "camera.exposure_s=0", "camera.iso=0", "picture.white_kelvin=1000", "picture.glare=lens"],
)
def test_ranges(shortest, change):
    assert list(faults(shortest, change)) == [change.split("=")[0]]
