"""Memory: said before, refused in words."""

import json
import subprocess
import sys

import pytest

from skyoptics.errors import ResourceError
from skyoptics.rendering import memory

SCRIPT = """
import json, resource, sys
from skyoptics.rendering import memory
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import load
scene = load(sys.argv[1], [f"camera.width_px={sys.argv[2]}"])
need = memory.predict(build(scene, "x"), 2, False)
render(scene, "x", Settings("draft", 3, 2, rays=1))
print(json.dumps([need, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024]))
"""


def measured(scene, width):
    done = subprocess.run([sys.executable, "-c", SCRIPT, scene, str(width)], capture_output=True, text=True, check=True)
    return json.loads(done.stdout)


@pytest.mark.parametrize("width", [1200, pytest.param(4000, marks=pytest.mark.slow)])
def test_prediction_is_within_20_percent(tiny, width):
    tiny.write_text(
        tiny.read_text()
        .replace('kind = "drops"', 'kind = "crystals"\norientation = "plate"')
        .replace("height_px = 40\n", "")
        .replace("wavelengths_nm = [450, 550, 650]", "")
    )
    need, taken = measured(str(tiny), width)
    assert need == pytest.approx(taken, rel=0.2)


def test_too_much_is_refused():
    with pytest.raises(ResourceError, match="make the picture smaller"):
        memory.check(10**15)
