"""Lines of sight for a map (RFC 7946)."""

import math

import pytest
from sample_plans import Place, plan

from skyoptics.planning.geojson import geojson, sight
from skyoptics.planning.subject import seen_from


def test_lines_of_a_window():
    found = geojson(plan(2), 20.0)
    assert found["type"] == "FeatureCollection"
    assert found["features"][0]["geometry"] == {"type": "Point", "coordinates": [8.9, 47.2]}
    what = [feature["properties"]["what"] for feature in found["features"]]
    assert what == ["place"] + ["sun", "crown", "left foot", "right foot"] * 2
    for feature in found["features"][1:]:
        assert feature["geometry"]["type"] == "LineString"
        first, *_, last = feature["geometry"]["coordinates"]
        assert first == [8.9, 47.2]
        seen = seen_from(Place(47.2, 8.9), last[1], last[0], 0.0)
        assert seen.azimuth_deg == pytest.approx(feature["properties"]["azimuth_deg"], abs=0.002)
        assert seen.distance_m == pytest.approx(20e3, abs=2.0)


def test_subject_line_ends_at_the_subject():
    found = geojson(plan(3, 2))
    (line,) = (feature for feature in found["features"] if feature["properties"]["what"] == "subject")
    last = line["geometry"]["coordinates"][-1]
    assert seen_from(Place(47.2, 8.9), last[1], last[0], 0.0).distance_m == pytest.approx(5200.0, abs=1.0)
    assert sum(feature["properties"]["what"] == "left foot" for feature in found["features"]) == 2


def test_great_circle():
    """Points stay in the plane through the centre of the earth (sphere) to 1e-4 of the length."""
    (line,) = sight(Place(47.2, 8.9), 90.0, 100e3)
    assert len(line) == 51
    vectors = []
    for longitude, latitude in line:
        phi, lam = math.radians(latitude), math.radians(longitude)
        vectors.append((math.cos(phi) * math.cos(lam), math.cos(phi) * math.sin(lam), math.sin(phi)))
    a, b = vectors[0], vectors[-1]
    normal = [a[i - 2] * b[i - 1] - a[i - 1] * b[i - 2] for i in range(3)]
    size = math.hypot(*normal)
    assert max(abs(sum(n * v for n, v in zip(normal, vector, strict=True))) / size for vector in vectors) < 2e-6
    assert line[-1][1] < 47.2  # east along a great circle turns south


def test_cut_at_the_180th_meridian():
    for azimuth, start in ((90.0, 179.9), (270.0, -179.9)):
        one, other = sight(Place(10.0, start), azimuth, 50e3)
        edge = math.copysign(180.0, start)
        assert one[-1][0] == edge
        assert other[0][0] == -edge
        assert one[-1][1] == other[0][1]
        assert all(abs(point[0]) <= 180.0 for point in one + other)
    found = geojson(plan(1, place=Place(10.0, 179.99)), 50.0)
    assert {feature["geometry"]["type"] for feature in found["features"]} >= {"MultiLineString", "LineString"}
