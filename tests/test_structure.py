"""The tree keeps its promises: modules import alone, kernels match their plain Python, files stay small."""

import importlib
import pkgutil
import subprocess
import sys
from pathlib import Path

import pytest

import skyoptics

ROOT = Path(skyoptics.__file__).parent
MODULES = sorted(
    module.name for module in pkgutil.walk_packages([str(ROOT)], "skyoptics.") if not module.name.endswith("__main__")
)
NUMBA_FREE = ("skyoptics.scene", "skyoptics.camera", "skyoptics.light", "skyoptics.colour")


@pytest.mark.parametrize("name", MODULES)
def test_every_module_imports(name):
    assert importlib.import_module(name).__doc__


@pytest.mark.slow
@pytest.mark.parametrize("name", MODULES)
def test_every_module_imports_alone(name):
    subprocess.run([sys.executable, "-c", f"import {name}"], check=True)


def test_rooms_without_numba():
    names = [name for name in MODULES if name.startswith(NUMBA_FREE)]
    script = f"import sys, importlib; [importlib.import_module(n) for n in {names!r}]; print('numba' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"


def test_packages_hold_a_docstring_only():
    for path in ROOT.rglob("__init__.py"):
        if path.parent not in (ROOT, ROOT / "kernels"):
            assert len(path.read_text(encoding="utf-8").splitlines()) < 12, path
