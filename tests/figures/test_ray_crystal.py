"""Rays through crystals: closed forms of the arcs, Snell, shares; angles measured from the SVG."""

import xml.etree.ElementTree as ET

import numpy as np
import pytest

from skyoptics.crystals.arc_regions import parhelion_azimuth
from skyoptics.errors import DomainError, NothingFoundError
from skyoptics.figures import drawing_svg
from skyoptics.figures.crystal_passage import passage
from skyoptics.figures.crystal_views import views
from skyoptics.figures.ray_crystal import CrystalRay, draw
from skyoptics.optics import interface
from skyoptics.units import DEG

SPACE = {"s": "http://www.w3.org/2000/svg"}
N = 1.31


@pytest.fixture(scope="module")
def circumzenithal():
    return passage("circumzenithal", 20 * DEG, N)


@pytest.fixture(scope="module")
def parhelia():
    return passage("parhelia", 20 * DEG, N)


def ways(root, view):
    """Directions of the ray in a view, y up, one a step."""
    lines = [
        line
        for line in root.findall("s:line", SPACE)
        if line.get("class").startswith("ray ") and line.get("data-view") == view
    ]
    lines.sort(key=lambda line: int(line.get("data-step")))
    return [
        np.array([float(line.get("x2")) - float(line.get("x1")), float(line.get("y1")) - float(line.get("y2"))])
        for line in lines
    ]


def angle(first, second):
    cosine = first @ second / np.linalg.norm(first) / np.linalg.norm(second)
    return np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0)))


def bearing(way):
    return np.degrees(np.arctan2(way[1], way[0]))


def parsed(drawing):
    return ET.fromstring(drawing_svg.svg(drawing))


def test_the_circumzenithal_ray_is_drawn_at_its_true_angles(circumzenithal):
    """Bravais 1847: sin e = √(n² − cos²h) for the arc's elevation e; the ray stays in the sun's vertical."""
    root = parsed(draw(CrystalRay(circumzenithal)))
    before, inside, after = ways(root, "plane")
    assert -bearing(before) == pytest.approx(20.0, abs=0.01)
    elevation = np.degrees(np.arcsin(np.sqrt(N**2 - np.cos(20 * DEG) ** 2)))
    assert -bearing(after) == pytest.approx(elevation, abs=0.01)
    # Snell at the upper face, which is level, and at the side, which is upright
    i, r = 90 + bearing(before), 90 + bearing(inside)
    assert r == pytest.approx(np.degrees(np.arcsin(np.sin(i * DEG) / N)), abs=0.01)
    assert -bearing(after) == pytest.approx(np.degrees(np.arcsin(N * np.sin(-bearing(inside) * DEG))), abs=0.01)
    assert circumzenithal.seen[0] == pytest.approx(0.0, abs=1e-6)
    assert circumzenithal.sequence == (1, 3)


def test_along_the_axis_light_bends_by_bravais_index(parhelia):
    """Seen along the c-axis skew light obeys Snell's law with n' = √(n² − sin²h)/cos h (Bravais 1847), least deviation."""
    root = parsed(draw(CrystalRay(parhelia)))
    before, inside, after = ways(root, "axis")
    bravais = np.sqrt(N**2 - np.sin(20 * DEG) ** 2) / np.cos(20 * DEG)
    turned = angle(before, after)
    assert turned == pytest.approx(2 * np.degrees(np.arcsin(bravais / 2)) - 60, abs=0.01)
    assert angle(before, inside) == pytest.approx(turned / 2, abs=0.01)  # symmetrical passage
    assert abs(parhelia.seen[0]) == pytest.approx(parhelion_azimuth(20 * DEG, N), abs=1e-6)
    assert parhelia.seen[1] / DEG == pytest.approx(20.0, abs=1e-6)


@pytest.mark.parametrize(
    ("name", "apex"), [("halo_22", 60.0), ("halo_46", 90.0), ("halo_18", 52.38), ("upper_tangent", 60.0)]
)
def test_least_deviation(name, apex):
    """D = 2 asin(n sin(A/2)) − A; the wedge of the 18° halo from c/a = 1.629 (Goto, Hondoh & Mae 1990 give 1.6285)."""
    found = passage(name, 20 * DEG, N)
    wanted = 2 * np.degrees(np.arcsin(N * np.sin(apex / 2 * DEG))) - apex
    assert found.deviation / DEG == pytest.approx(wanted, abs=0.01)
    assert found.seen[0] == pytest.approx(0.0, abs=1e-6)
    assert found.seen[1] / DEG == pytest.approx(20 + wanted, abs=0.01)
    true = [view.name for view in views(found) if view.true]
    before, *_, after = ways(parsed(draw(CrystalRay(found))), true[0])
    assert angle(before, after) == pytest.approx(wanted, abs=0.01)


@pytest.mark.parametrize("name", ["parhelia_120", "subsun", "subparhelia", "subparhelia_120"])
def test_every_meeting_obeys_the_laws(name):
    found = passage(name, 20 * DEG, N)
    share = 1.0
    for one in found.meetings:
        assert one.share_before == pytest.approx(share, abs=1e-12)
        share = one.share_after
        facing = one.normal if one.does in ("leaves", "reflects") else -one.normal
        assert one.before @ facing == pytest.approx(np.cos(one.incidence), abs=1e-9)
        assert np.linalg.norm(one.after) == pytest.approx(1.0)
        if one.does == "reflects":
            assert one.after == pytest.approx(one.before - 2 * (one.before @ one.normal) * one.normal, abs=1e-12)
            total = one.incidence > float(interface.critical_angle(1 / N))
            assert one.total == total
            assert (one.share_after == pytest.approx(one.share_before, abs=1e-12)) == total
            assert (one.other is None) == total
        else:
            n = N if one.does == "enters" else 1 / N
            assert np.sin(one.incidence) == pytest.approx(n * np.sin(one.refraction), abs=1e-12)
            # the tangential part is kept (n times it inside)
            kept = np.cross(one.before, one.normal) - n * np.cross(one.after, one.normal)
            assert kept == pytest.approx(0.0, abs=1e-12)
    for one, other in zip(found.meetings, found.meetings[1:], strict=False):
        gap = other.place - one.place
        assert gap / np.linalg.norm(gap) == pytest.approx(one.after, abs=1e-9)
    body = np.array([one.place for one in found.meetings]) @ found.rotation
    reach = body @ found.shape.face_normals.T - found.shape.offsets.ravel()
    assert reach.max() == pytest.approx(0.0, abs=1e-9)  # on the surface, never outside


def test_shares_in_a_plane_are_fresnel_s_of_each_polarisation(circumzenithal):
    """Both faces share the plane of incidence, so the share is the mean of T_s T_s' and T_p T_p' (Born & Wolf §1.5.2)."""
    first, last = circumzenithal.meetings
    entry = interface.transmittances(N, first.incidence)
    leave = interface.transmittances(1 / N, last.incidence)
    wanted = 0.5 * sum(float(a * b) for a, b in zip(entry, leave, strict=True))
    assert last.share_after == pytest.approx(wanted, abs=1e-12)


def test_total_reflection_is_named_and_has_no_stub():
    found = passage("parhelia_120", 20 * DEG, N)
    root = parsed(draw(CrystalRay(found)))
    assert "total reflection" in "".join(root.itertext())
    mirrored = {str(one.face) for one in found.meetings if one.total}
    assert mirrored
    stubs = {line.get("data-face") for line in root.findall("s:line[@class='ray stub']", SPACE)}
    assert not stubs & mirrored


def test_partial_reflection_inside_is_told():
    found = passage("subcircumzenithal", 20 * DEG, N)
    assert found.sequence == (1, 2, 3)
    assert not found.meetings[1].total
    assert found.meetings[1].share_after < 0.2 * found.meetings[1].share_before
    assert "partial" in draw(CrystalRay(found)).description


@pytest.mark.parametrize("lang", ["en", "fr"])
def test_no_label_covers_another(circumzenithal, lang):
    drawing = draw(CrystalRay(circumzenithal, 589.0, angles=True, lang=lang))
    found = []
    for item in drawing.items:
        if isinstance(item, drawing_svg.Text):
            width, height = item.box
            left = item.place[0] - width * {"left": 0.0, "middle": 0.5, "right": 1.0}[item.anchor]
            found.append((left, item.place[1] - height / 2, left + width, item.place[1] + height / 2, item.lines))
    for k, one in enumerate(found):
        assert one[0] >= 0
        assert one[2] <= drawing.width
        for other in found[k + 1 :]:
            apart = one[0] >= other[2] or other[0] >= one[2] or one[1] >= other[3] or other[1] >= one[3]
            assert apart, (one[4], other[4])


def test_limits_are_told():
    with pytest.raises(NothingFoundError, match=r"sun at 40°.*32\.2°"):
        passage("circumzenithal", 40 * DEG, N)
    with pytest.raises(DomainError, match="two crystals"):
        passage("parhelia_44", 20 * DEG, N)
    with pytest.raises(DomainError, match="did you mean"):
        passage("circumzenithel", 20 * DEG, N)


@pytest.mark.slow
def test_every_arc_has_a_drawing():
    from skyoptics.crystals import arcs

    for name in arcs.names():
        if arcs.feature(name).scatterings > 1:
            continue
        heights = [h for h in (20, 5, 40, 60) if arcs.exists(name, h * DEG, N)]
        assert heights, name
        found = passage(name, heights[0] * DEG, N)
        assert arcs.feature(name) is found.entry
        assert len(draw(CrystalRay(found)).items) > 20
