"""Memory: said before, refused in words."""

import json
import subprocess
import sys

import pytest

from skyoptics.errors import ResourceError
from skyoptics.rendering import memory

SCRIPT = """
import json, sys
from skyoptics.rendering import memory
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import load
scene = load(sys.argv[1], [f"camera.width_px={sys.argv[2]}"])
need = memory.predict(build(scene, "x"), 2, False)
render(scene, "x", Settings("draft", int(sys.argv[3]), 2, rays=1))
status = open("/proc/self/status").read()  # not getrusage: that counts what the parent held before exec
print(json.dumps([need, 1024 * int(status.split("VmHWM:")[1].split()[0])]))
"""


def measured(scene, width, seed):
    words = [sys.executable, "-c", SCRIPT, scene, str(width), str(seed)]
    return json.loads(subprocess.run(words, capture_output=True, text=True, check=True).stdout)


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads /proc")
@pytest.mark.parametrize("width", [1200, pytest.param(4000, marks=pytest.mark.slow)])
def test_prediction_is_within_20_percent(tiny, width):
    tiny.write_text(
        tiny.read_text()
        .replace('kind = "drops"', 'kind = "crystals"\norientation = "plate"')
        .replace("height_px = 40\n", "")
        .replace("wavelengths_nm = [450, 550, 650]", "")
    )
    measured(str(tiny), 90, 3)  # the compiler, if it has to run, takes memory of its own
    need, taken = measured(str(tiny), width, 4)
    assert need == pytest.approx(taken, rel=0.2)


def test_too_much_is_refused():
    with pytest.raises(ResourceError, match="make the picture smaller"):
        memory.check(10**15)
