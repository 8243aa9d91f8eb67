"""Rays through a drop, measured from the SVG."""

import xml.etree.ElementTree as ET

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.figures import drawing_svg
from skyoptics.figures.drop_passage import DropRays, Passage, fan
from skyoptics.figures.ray_drop import draw
from skyoptics.optics import bows
from skyoptics.units import DEG

SPACE = {"s": "http://www.w3.org/2000/svg"}
N = 1.333


def parse(drawing):
    root = ET.fromstring(drawing_svg.svg(drawing))
    return root, {
        kind: [line for line in root.findall("s:line", SPACE) if line.get("class") == f"ray {kind}"]
        for kind in ("incoming", "inside", "exit", "stub")
    }


def ends(line):
    """Start and end of a line, y up."""
    value = [float(line.get(key)) for key in ("x1", "y1", "x2", "y2")]
    return np.array([value[0], -value[1]]), np.array([value[2], -value[3]])


def angle(first, second):
    """Angle between two directions [°]."""
    cosine = first @ second / np.linalg.norm(first) / np.linalg.norm(second)
    return np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0)))


def circle(root):
    drop = root.find("s:circle[@class='drop']", SPACE)
    return np.array([float(drop.get("cx")), -float(drop.get("cy"))]), float(drop.get("r"))


@pytest.mark.parametrize("impact", [0.05, 0.5, 0.86, 0.97])
@pytest.mark.parametrize("orders", [(2,), (0, 1, 2, 3, 4, 5)])
def test_every_angle_obeys_snell_and_reflection(impact, orders):
    root, rays = parse(draw(DropRays((N,), orders=orders, impact=impact)))
    centre, radius = circle(root)
    incoming = ends(rays["incoming"][0])
    assert angle(incoming[1] - incoming[0], np.array([1.0, 0.0])) == pytest.approx(0.0, abs=1e-4)
    assert (incoming[1] - centre)[1] / radius == pytest.approx(impact, abs=1e-6)
    chords = [ends(line) for line in rays["inside"]]
    before = incoming
    for number, chord in enumerate(chords):
        normal = before[1] - centre
        assert np.linalg.norm(normal) == pytest.approx(radius, abs=1e-4)
        inside = angle(chord[1] - chord[0], -normal)
        if number == 0:
            outside = angle(before[0] - before[1], normal)
            assert inside == pytest.approx(np.degrees(np.arcsin(np.sin(outside * DEG) / N)), abs=0.01)  # Snell
        else:
            assert inside == pytest.approx(angle(before[0] - before[1], -normal), abs=0.01)  # law of reflection
        before = chord
    for line in rays["exit"]:
        order, (start, end) = int(line.get("data-order")), ends(line)
        normal, out = start - centre, end - start
        i = angle(out, normal)
        if order:
            inner = chords[order - 1]
            refracted = angle(inner[1] - inner[0], normal)
            assert np.sin(i * DEG) == pytest.approx(N * np.sin(refracted * DEG), abs=2e-5)
        # van de Hulst 1957, §12.21: D = 2 (i − r) + (p − 1)(π − 2r); order 0 turns by π − 2i
        incidence, refraction = np.arcsin(impact), np.arcsin(impact / N)
        turned = 2 * (incidence - refraction) + (order - 1) * (np.pi - 2 * refraction)
        turned = np.pi - 2 * incidence if order == 0 else turned
        folded = float(bows.fold(turned)) / DEG
        assert angle(out, incoming[1] - incoming[0]) == pytest.approx(folded, abs=0.01)
        assert float(line.get("data-deviation-deg")) == pytest.approx(turned / DEG, abs=1e-4)


@pytest.mark.parametrize("order", [2, 3, 4, 5])
def test_the_fan_turns_back_at_the_rainbow_ray(order):
    """Descartes' ray: no ray of the fan turns less, and its impact is sqrt((p² − n²)/(p² − 1))."""
    _, rays = parse(draw(DropRays((N,), orders=(order,), fan=9)))
    impacts = [float(line.get("data-impact")) for line in rays["exit"]]
    turned = [float(line.get("data-deviation-deg")) for line in rays["exit"]]
    best = int(np.argmin(turned))
    assert impacts[best] == pytest.approx(np.sqrt((order**2 - N**2) / (order**2 - 1)), abs=1e-6)
    closed = np.degrees(float(bows.deviation(N, order)))
    assert turned[best] == pytest.approx(closed, abs=1e-4)
    start, end = ends(rays["exit"][best])
    assert angle(end - start, np.array([1.0, 0.0])) == pytest.approx(
        np.degrees(float(bows.scattering_angle(N, order))), abs=0.01
    )
    assert len(impacts) == 9
    steps = np.diff(sorted(impacts))
    assert steps == pytest.approx(steps[0], abs=1e-6)  # crowded rays mean bright light only if they come in evenly


def test_colours_part_as_the_index_says():
    indices = (1.331, 1.3345, 1.340)
    _, rays = parse(draw(DropRays(indices, (650.0, 550.0, 440.0), (2, 3), impact=0.86)))
    assert len(rays["incoming"]) == 1
    for line, (n, order) in zip(rays["exit"], ((n, p) for n in indices for p in (2, 3)), strict=True):
        start, end = ends(line)
        wanted = float(bows.fold(Passage(n, 0.86).turned(order))) / DEG
        assert angle(end - start, np.array([1.0, 0.0])) == pytest.approx(wanted, abs=0.01)


def test_shares_add_up_and_are_fresnel_s():
    # Born & Wolf §1.5.2: ((n − 1)/(n + 1))² at normal incidence
    normal = Passage(N, 0.0)
    assert normal.share(0) == pytest.approx(((N - 1) / (N + 1)) ** 2)
    assert normal.share(1) == pytest.approx((1 - ((N - 1) / (N + 1)) ** 2) ** 2)
    for impact in (0.0, 0.5, 0.86, 0.999):
        one = Passage(N, impact)
        assert sum(one.share(p) for p in range(300)) == pytest.approx(1.0, abs=1e-9)
    assert Passage(N, 1.0).share(0) == pytest.approx(1.0)
    # at the rainbow ray: closed form of both polarisations, not the power of their mean
    bow = Passage(N, float(bows.impact(N, 2)))
    s, p = bows.energies(N, 2)
    assert bow.shares(2) == pytest.approx([s, p])
    assert bow.share(2) == pytest.approx(0.5 * float(s + p))
    mean = bow.reflected().mean()
    assert abs(bow.share(2) - (1 - mean) ** 2 * mean) > 0.003


def test_shares_are_on_the_drawing_and_the_rest_is_told():
    asked = DropRays((N,), orders=(2,), impact=0.86)
    drawing = draw(asked)
    root, rays = parse(drawing)
    numbers = asked.numbers()["rays"][0]
    assert float(rays["exit"][0].get("data-share")) == pytest.approx(numbers["exits"][0]["share"], rel=1e-6)
    assert numbers["share_drawn"] + numbers["share_rest"] == pytest.approx(1.0)
    text = "".join(root.itertext())
    assert "4.5\u00a0%" in text
    assert "95.5\u00a0%" in text
    assert "none is total" in text
    assert {line.get("data-order") for line in rays["stub"]} == {"0", "1"}
    shown = [float(line.get("data-share")) for line in rays["stub"] + rays["exit"]]
    assert sum(shown) == pytest.approx(1.0, abs=0.01)


def test_line_weight_follows_the_share():
    _, rays = parse(draw(DropRays((N,), orders=(0, 1), impact=0.7)))
    one, other = rays["exit"]
    ratio = float(one.get("stroke-width")) / float(other.get("stroke-width"))
    assert ratio == pytest.approx(np.sqrt(float(one.get("data-share")) / float(other.get("data-share"))), rel=1e-3)


def test_marks_carry_the_angle_they_span():
    root, _ = parse(draw(DropRays((N,), orders=(2,), impact=0.86, angles=True)))
    marks = root.findall("s:polyline[@class='angle']", SPACE)
    spans = sorted({round(float(mark.get("data-angle-deg")), 3) for mark in marks if mark.get("data-angle-deg")})
    assert spans == pytest.approx([np.degrees(np.arcsin(0.86 / N)), np.degrees(np.arcsin(0.86))], abs=1e-3)
    deviation = [mark for mark in marks if mark.get("data-deviation-deg")]
    assert float(deviation[0].get("data-deviation-deg")) == pytest.approx(Passage(N, 0.86).turned(2) / DEG, abs=1e-4)
    assert len(root.findall("s:line[@class='normal']", SPACE)) == 3


@pytest.mark.parametrize("lang", ["en", "de", "es", "fr"])
def test_screen_readers_and_every_language(lang):
    root, _ = parse(draw(DropRays((N,), orders=(1, 2), impact=0.86, lang=lang)))
    assert root.get("role") == "img"
    assert root.find("s:title", SPACE).text
    assert len(root.find("s:desc", SPACE).text) > 80
    width, height = (float(value) for value in root.get("viewBox").split()[2:])
    for text in root.findall("s:text", SPACE):
        assert "{" not in "".join(text.itertext())
    for line in root.findall("s:line", SPACE):
        assert all(0 <= float(line.get(key)) <= width for key in ("x1", "x2"))
        assert all(0 <= float(line.get(key)) <= height for key in ("y1", "y2"))


def boxes(drawing):
    for item in drawing.items:
        if isinstance(item, drawing_svg.Text):
            width, height = item.box
            left = item.place[0] - width * {"left": 0.0, "middle": 0.5, "right": 1.0}[item.anchor]
            yield left, item.place[1] - 0.5 * height, left + width, item.place[1] + 0.5 * height, item.lines


@pytest.mark.parametrize(
    "asked",
    [
        DropRays((N,), (589.0,), (2,), 0.86, angles=True),
        DropRays((N,), (589.0,), (0, 1, 2, 3), 0.86, normals=True),
        DropRays((1.331, 1.34), (650.0, 440.0), (2, 3)),
        DropRays((N,), (589.0,), (2,), fan=11, lang="de"),
        DropRays((N,), (589.0,), (5,), lang="fr", angles=True),
        DropRays((N,), (589.0,), (1,), 0.0),
    ],
)
def test_no_label_covers_another_or_leaves_the_sheet(asked):
    drawing = draw(asked)
    found = list(boxes(drawing))
    for k, one in enumerate(found):
        assert one[0] >= 0
        assert one[1] >= 0
        assert one[2] <= drawing.width
        assert one[3] <= drawing.height
        for other in found[k + 1 :]:
            apart = one[0] >= other[2] or other[0] >= one[2] or one[1] >= other[3] or other[1] >= one[3]
            assert apart, (one[4], other[4])


def test_png_and_svg_are_repeatable(tmp_path):
    drawing = draw(DropRays((N,), orders=(2,)))
    for name in ("a.png", "a.svg", "b.png", "b.svg"):
        drawing.write(tmp_path / name)
    for suffix in ("png", "svg"):
        assert (tmp_path / f"a.{suffix}").read_bytes() == (tmp_path / f"b.{suffix}").read_bytes()
    from PIL import Image

    with Image.open(tmp_path / "a.png") as picture:
        assert picture.size == (1920, 1440)
        assert picture.info["Title"] == drawing.title


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ({"orders": (6,)}, "0 to 5"),
        ({"impact": 1.2}, "0 .*to 1"),
        ({"fan": 5, "orders": (2, 3)}, "one order"),
        ({"fan": 5, "orders": (1,)}, "no rainbow"),
        ({"fan": 5, "impact": 0.5}, "leave the other out"),
    ],
)
def test_refusals(words, said):
    with pytest.raises(DomainError, match=said):
        draw(DropRays((N,), **words))


def test_a_drawing_is_svg_or_png(tmp_path):
    with pytest.raises(DomainError, match=r"\.svg or \.png"):
        draw(DropRays((N,))).write(tmp_path / "a.gif")


def test_fan_holds_the_rainbow_ray():
    assert float(bows.impact(N, 2)) in fan(N, 2, 6)
