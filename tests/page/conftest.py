"""A page of three small pictures, made once; one browser for it."""

import os
import re
import shutil
import subprocess
import tarfile
from dataclasses import dataclass
from typing import Any

import pytest

from skyoptics.page.document import Asked, page
from skyoptics.page.pictures import take, together
from skyoptics.page.varied import varied
from skyoptics.rendering.run import Settings

MARKUP = "<img src=x onerror=alert(1)> & </script><b>bow</b>"
SCENE = f"""
title = "{MARKUP}"
look_for = "</title><script>document.title='taken'</script>"

[light]
elevation_deg = 20
azimuth_deg = 250

[[air]]
name = "<i>rain</i>"
kind = "drops"
optical_depth = 0.3

[camera]
focal_mm = 13
width_px = 240
aim = {{ azimuth_deg = 71, elevation_deg = 20, roll_deg = 7 }}

[picture]
background = 0.002
bin_nm = 40
"""
FISHEYE = """
[light]
elevation_deg = 20
[[air]]
kind = "drops"
optical_depth = 0.1
[camera]
lens = "orthographic"
focal_mm = 8
width_px = 90
height_px = 60
aim = { azimuth_deg = 0, elevation_deg = 90 }
[picture]
wavelengths_nm = [450, 550, 650]
"""


@pytest.fixture(scope="session")
def scene_file(tmp_path_factory):
    """Return the path of a scene whose texts hold markup."""
    path = tmp_path_factory.mktemp("page") / "markup.toml"
    path.write_text(SCENE, encoding="utf-8")
    return path


@pytest.fixture(scope="session")
def along(scene_file):
    return varied(scene_file, (), "light.elevation_deg=5,15,25", "en")


@pytest.fixture(scope="session")
def pictures(along):
    """Return the pictures of three heights of the sun."""
    settings = Settings("draft", 1, 1)
    return together([take(scene, "markup.toml", settings, 2, "en") for scene in along.scenes], "en")


@pytest.fixture(scope="session")
def asked(along):
    return Asked(along, "en", True, ("skyoptics", "page", "markup.toml"))


@pytest.fixture(scope="session")
def text(pictures, asked):
    """Return the page."""
    return page(pictures, asked)


CHROMIUM = ("chromium", "chromium-browser", "google-chrome")
SWITCHES = (
    "--no-sandbox",
    "--disable-gpu",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-quic",
)


def missing(why):
    """Skip and say why; fail where the browser has been promised (SKYOPTICS_BROWSER=required, as in CI)."""
    if os.environ.get("SKYOPTICS_BROWSER") == "required":
        pytest.fail(why)
    pytest.skip(why)


@pytest.fixture(scope="session")
def browser():
    """Return the one browser of a test run."""
    program = next((found for name in CHROMIUM if (found := shutil.which(name))), None)
    if program is None:
        missing(f"no browser: none of {', '.join(CHROMIUM)} is installed (.ci/browser installs Debian's)")
    playwright = pytest.importorskip(
        "playwright.sync_api", reason="playwright is not installed: pip install -e .[test]"
    )
    with playwright.sync_playwright() as driver:
        started = driver.chromium.launch(executable_path=program, args=list(SWITCHES))
        yield started
        started.close()


@pytest.fixture(scope="session")
def axe(tmp_path_factory):
    """Return the source of the accessibility checker axe-core, from the npm registry."""
    if shutil.which("npm") is None:
        missing(
            "npm is not installed, so the accessibility checker axe-core cannot be fetched (.ci/browser installs it)"
        )
    folder = tmp_path_factory.mktemp("axe")
    words = ["npm", "pack", "axe-core@4", "--silent", "--no-audit", "--no-fund"]
    try:
        done = subprocess.run(words, cwd=folder, capture_output=True, text=True, timeout=120, check=False)
    except subprocess.TimeoutExpired:
        missing("the npm registry does not answer, so there is no accessibility checker axe-core")
    packed = list(folder.glob("axe-core-*.tgz"))
    if done.returncode or not packed:
        missing(f"npm cannot fetch the accessibility checker axe-core: {done.stderr.strip()[-200:]}")
    with tarfile.open(packed[0]) as archive:
        return archive.extractfile("package/axe.min.js").read().decode("utf-8")


@pytest.fixture(scope="session")
def page_file(text, tmp_path_factory):
    """Return the page as a file."""
    path = tmp_path_factory.mktemp("browser") / "bow.html"
    path.write_text(text, encoding="utf-8")
    return path


@pytest.fixture(scope="session")
def fisheye_file(tmp_path_factory):
    """Return a page of one fisheye picture in three wavelengths."""
    folder = tmp_path_factory.mktemp("fisheye")
    scene, path = folder / "fisheye.toml", folder / "fisheye.html"
    scene.write_text(FISHEYE, encoding="utf-8")
    along = varied(scene, (), None, "en")
    found = take(along.scenes[0], scene.name, Settings("draft", 1, 1), 2, "en")
    path.write_text(page([found], Asked(along, "en", True, ("skyoptics", "page", scene.name))), encoding="utf-8")
    return path


@dataclass
class Opened:
    """A page in the browser, and all that it did wrong."""

    page: Any
    file: Any
    requests: list[str]
    complaints: list[str]

    def text(self, name):
        return self.page.locator(f"#{name}").inner_text()

    def number(self, name):
        found = re.match(r"−?[\d.]+", self.text(name))
        return float(found[0].replace("−", "-"))


@pytest.fixture
def opened(browser, page_file):
    """Return a function that opens the page; whatever leaves the file or is complained of fails the test."""
    contexts, seen = [], []

    def start(width=1280, height=800, file=page_file, **options):
        context = browser.new_context(viewport={"width": width, "height": height}, **options)
        contexts.append(context)
        window = context.new_page()
        found = Opened(window, file, [], [])
        seen.append(found)

        def asked(route):
            found.requests.append(route.request.url)
            route.continue_() if route.request.url == file.as_uri() else route.abort()

        context.route("**/*", asked)
        window.on("request", lambda request: found.requests.append(request.url))
        window.on("console", lambda message: found.complaints.append(f"{message.type}: {message.text}"))
        window.on("pageerror", lambda error: found.complaints.append(str(error)))
        window.on("dialog", lambda dialog: (found.complaints.append(dialog.message), dialog.dismiss()))
        window.goto(file.as_uri())
        return found

    yield start
    for context in contexts:
        context.close()
    for found in seen:
        assert found.complaints == []
        assert {url for url in found.requests if not url.startswith("data:")} == {found.file.as_uri()}
