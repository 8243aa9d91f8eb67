"""``skyoptics paths`` and the plots of ``skyoptics phase``."""

import json
import xml.etree.ElementTree as ET
from pathlib import Path

import numpy as np
import pytest

from skyoptics.optics import bows

SPACE = {"s": "http://www.w3.org/2000/svg"}


def test_a_ray_through_a_drop(command):
    done = command("paths", "drop", "--orders", 2, "--impact", 0.86, "--svg", "a.svg", "--json")
    assert done.code == 0
    assert done.err == ""
    told = json.loads(done.out)
    ray = told["rays"][0]
    # 1.33300 at 589.3 nm, 20 °C in air (Daimon & Masumura, Appl. Opt. 46, 3811 (2007), divided by Ciddor's air)
    assert ray["index"] == pytest.approx(1.3330, abs=2e-4)
    assert np.sin(np.radians(ray["incidence_deg"])) == pytest.approx(0.86)
    assert ray["exits"][0]["share"] + ray["share_rest"] == pytest.approx(1.0)
    exits = ET.parse("a.svg").getroot().findall("s:line[@class='ray exit']", SPACE)
    assert float(exits[0].get("data-deviation-deg")) == pytest.approx(ray["exits"][0]["deviation_deg"], abs=1e-6)
    assert told["files"] == ["a.svg"]


def test_without_a_file_the_figures_are_printed(command):
    done = command("paths", "drop", "--orders", "1,2", "--index", 1.333)
    assert done.code == 0
    bow = np.degrees(float(bows.deviation(1.333, 2)))
    assert f"{bow:.3f}°" in done.out
    assert max(map(len, done.out.splitlines())) <= 80


def test_fan_and_white_light(command):
    assert command("paths", "drop", "--fan", 7, "--svg", "fan.svg").code == 0
    assert len(ET.parse("fan.svg").getroot().findall("s:line[@class='ray exit']", SPACE)) == 7
    done = command("paths", "drop", "--white", "--orders", "2,3", "--json")
    rays = json.loads(done.out)["rays"]
    turned = {p: [ray["exits"][p]["deviation_deg"] for ray in rays] for p in (0, 1)}
    assert all(np.all(np.diff(one) > 0) for one in turned.values())  # red turns least in both bows
    assert [ray["wavelength_nm"] for ray in rays] == sorted((ray["wavelength_nm"] for ray in rays), reverse=True)


def test_a_ray_through_a_crystal(command):
    done = command(
        "paths", "crystal", "--arc", "circumzenithal", "--sun-elevation-deg", 20, "--index", 1.31, "--svg", "c.svg"
    )
    assert done.code == 0
    elevation = np.degrees(np.arcsin(np.sqrt(1.31**2 - np.cos(np.radians(20)) ** 2)))  # Bravais 1847
    assert f"elevation {elevation:.2f}°" in done.out
    assert "faces 1-3" in done.out
    assert max(map(len, done.out.splitlines())) <= 80
    assert Path("c.svg").exists()
    done = command("paths", "crystal", "--arc", "parhelia-120", "--lang", "de", "--json", "--svg", "d.svg")
    told = json.loads(done.out)
    assert abs(told["seen_azimuth_deg"]) == pytest.approx(120.0, abs=1e-4)
    assert any(one["total"] for one in told["faces"])
    assert "Totalreflexion" in Path("d.svg").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (["drop", "--impact", 1.1], 2, "1.1"),
        (["drop", "--orders", "7"], 2, "out of range"),
        (["drop", "--fan", 5, "--white"], 2, "do not go together"),
        (["drop", "--fan", 5, "--orders", "1"], 1, "no rainbow"),
        (["drop", "--svg", "a.png"], 1, "--svg writes a .svg file"),
        (["drop", "--png", "no/such/a.png"], 1, "does not exist"),
        (["drip"], 2, "did you mean drop"),
        (["crystal"], 2, "--arc"),
        (["crystal", "--arc", "circumzenithel"], 2, "did you mean circumzenithal"),
        (["crystal", "--arc", "circumzenithal", "--sun-elevation-deg", 40], 3, "h ≤ 32.2°"),
        (["crystal", "--arc", "parhelia", "--sun-elevation-deg", 95], 2, "95"),
        (["crystal", "--arc", "parhelia_44"], 1, "two crystals"),
        (["crystal", "--arc", "parhelia", "--lang", "it"], 2, "en, de, es, fr"),
    ],
)
def test_bad_input(command, words, code, said):
    done = command("paths", *words)
    assert done.code == code
    assert said in " ".join(done.err.split())
    assert not list(Path().iterdir())


CURVE = ("phase", "drop", "--quality", "draft", "--step-deg", 2, "--index", 1.333, "--wavelength-nm", "450,550,650")


def test_plots_of_a_curve(command):
    plain = command(*CURVE, "--orders", "1,2,3", "--csv", "-").out
    done = command(
        *CURVE,
        "--orders",
        "1,2,3",
        "--csv",
        "-",
        "--plot",
        "p.svg",
        "--by-order",
        "--marks",
        "--errors",
        "--colour-band",
    )
    assert done.code == 0
    assert done.out == plain  # the curve itself is what it was
    assert Path("p.svg").read_text(encoding="utf-8").startswith("<?xml")


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (["--marks"], 2, "go with --plot"),
        (["--plot", "no/such/a.png"], 1, "does not exist"),
        (["--plot", "a.gif"], 1, ".png, .svg, .pdf"),
        (["--plot", "a.png", "--scale", "lin"], 2, "did you mean linear"),
    ],
)
def test_plots_refused(command, words, code, said):
    done = command(*CURVE, *words)
    assert done.code == code
    assert said in done.err


def test_marks_of_bows_and_parts():
    from skyoptics.rendering import curve, curve_plot

    found = curve.drop(curve.DropCurve(index=1.333, step_deg=2.0, quality="draft", orders=(2, 3)))
    plot = curve_plot.plotted(found, curve_plot.Look(by_part=True, marks=True))
    assert list(plot.parts) == ["order p\u00a0=\u00a02", "order p\u00a0=\u00a03"]
    assert plot.total == pytest.approx(found.table.elements[0, :, :, 0])
    wanted = [float(bows.scattering_angle(1.333, p)) for p in (2, 3)]
    assert [angle for angle, _ in plot.marks] == pytest.approx(wanted)
    assert [name for _, name in plot.marks] == ["primary bow", "secondary bow"]
