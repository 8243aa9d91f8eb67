"""Circles that are known, against published radii."""

import pytest

from skyoptics.planning.photo_known import match, table


def known(name):
    return next(entry for entry in table() if entry.name == name)


@pytest.mark.parametrize(
    ("name", "centre", "low", "high"),
    [
        ("primary", "antisolar", 180 - 139.35, 180 - 137.63),
        ("secondary", "antisolar", 180 - 129.63, 180 - 126.52),
        ("tertiary", "sun", 38.11, 42.47),
        ("quaternary", "sun", 42.76, 48.34),
        ("quinary", "antisolar", 180 - 133.86, 180 - 127.08),
    ],
)
def test_bows_as_in_the_table_of_the_first_20_orders(name, centre, low, high):
    """*Handbook of Optics*, ch. 57, Table 57-1: scattering angles red and violet, to 0.01°."""
    entry = known(name)
    assert entry.centre == centre
    assert (entry.low_deg, entry.high_deg) == pytest.approx((low, high), abs=0.01)


def test_halos_stand_at_least_deviation():
    """Red and violet edges with the index of Warren & Brandt (2008): 21.604° … 22.554°, 45.071° … 47.801° in vacuum."""
    assert (known("halo_22").low_deg, known("halo_22").high_deg) == pytest.approx((21.604, 22.554), abs=0.04)
    assert (known("halo_46").low_deg, known("halo_46").high_deg) == pytest.approx((45.071, 47.801), abs=0.1)


@pytest.mark.parametrize(
    ("radius", "half", "centre", "verdict", "name"),
    [
        (41.9, 0.05, "antisolar", "one", "primary"),
        (51.2, 0.1, "antisolar", "one", "secondary"),
        (37.5, 0.1, "antisolar", "one", "fogbow"),
        (40.25, 0.2, "antisolar", "ambiguous", "fogbow"),
        (22.0, 0.05, "sun", "one", "halo_22"),
        (46.2, 0.1, "sun", "one", "halo_46"),
        (18.4, 0.1, "sun", "one", "halo_18"),
        (30.0, 0.1, "sun", "none", "halo_35"),
    ],
)
def test_names_of_radii(radius, half, centre, verdict, name):
    found = match(radius, half, centre)
    assert (found.verdict, found.known.name) == (verdict, name)
    assert found.known.title in found.words


def test_a_wide_interval_is_ambiguous_and_rare_circles_are_named_beside_common_ones():
    assert match(47.0, 6.0, "antisolar").verdict == "ambiguous"
    assert [other.name for other in match(46.2, 0.1, "sun").others] == ["quaternary"]
    assert match(30.0, 0.1, "sun").off_deg == pytest.approx(34.45 - 0.27 - 30.0, abs=0.01)
