"""The Python face: the README's quick start runs as it stands; a picture knows its radiance."""

import re
from pathlib import Path

import numpy as np
import pytest

import skyoptics
from skyoptics.errors import DomainError

ROOT = Path(__file__).parents[2]


def test_names():
    assert skyoptics.__all__ == sorted(skyoptics.__all__)
    assert set(dir(skyoptics)) == set(skyoptics.__all__)
    with pytest.raises(AttributeError, match="it has Picture"):
        _ = skyoptics.rendr


def test_quick_start_of_the_readme(tmp_path, monkeypatch):
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    code = re.search(r"<!-- quick start -->\n```python\n(.*?)```", text, re.DOTALL).group(1)
    monkeypatch.chdir(tmp_path)
    names = {}
    exec(compile(code.replace('"scenes/', f'"{ROOT}/scenes/'), "README.md", "exec"), names)
    picture = names["picture"]
    assert picture._repr_png_().startswith(b"\x89PNG")
    assert list(tmp_path.rglob("*.png"))


def test_radiance_and_picture_agree(tiny):
    from skyoptics.colour.observer import weights

    picture = skyoptics.render(skyoptics.load(tiny), quality="draft", threads=1)
    radiance = picture.radiance
    assert radiance.dims == ("y", "x", "wavelength")
    assert radiance.attrs["units"] == "W m-2 sr-1 nm-1"
    assert radiance.values @ weights(picture._result.job.bins) == pytest.approx(picture.xyz, rel=1e-5)
    assert "primary bow" in repr(picture)
    assert "0x" not in repr(picture)


def test_saved_data_opens_with_xarray(tiny, tmp_path):
    import xarray

    picture = skyoptics.render(skyoptics.load(tiny), quality="draft", threads=1)
    path = picture.save(tmp_path / "out", data=True)
    with xarray.open_dataset(path.with_suffix(".nc")) as data:
        assert data.radiance.dims == ("y", "x", "wavelength")
        assert data.wavelength.values == pytest.approx([450, 550, 650])
        assert float(data.elevation[0, 30]) > float(data.elevation[-1, 30])
        assert data.azimuth.attrs["units"] == "degree"
        assert np.isfinite(data.radiance).all()


def test_unknown_quality(tiny):
    with pytest.raises(DomainError, match="did you mean draft"):
        skyoptics.render(skyoptics.load(tiny), quality="drft")
