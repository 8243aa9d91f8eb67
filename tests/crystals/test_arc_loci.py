"""Caustics: the closed forms for columns against zeros of the Jacobian found on a grid, and the Jacobian itself."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial import cKDTree

from skyoptics.crystals.arc_loci import column_fold, curve
from skyoptics.crystals.folds import fold
from skyoptics.crystals.passage import image, rotations
from skyoptics.errors import DomainError
from skyoptics.units import DEG

N = 1.31


@pytest.mark.parametrize(
    ("sequence", "sun_deg"),
    [((3, 5), 15.0), ((3, 5), 50.0), ((3, 1), 20.0), ((1, 3), 20.0), ((1, 3), 65.0), ((3, 1, 5), 40.0)],
)
def test_closed_forms_agree_with_zeros_found_on_a_grid(sequence: tuple[int, ...], sun_deg: float) -> None:
    known = np.concatenate([branch.view for branch in column_fold([sequence], sun_deg * DEG, N)])
    found = np.concatenate([branch.view for branch in fold("column", sequence, sun_deg * DEG, N)])
    assert cKDTree(known).query(found)[0].max() < 0.05 * DEG
    # the grid loses a few degrees at the ends, where light grazes a face
    assert np.mean(cKDTree(found).query(known)[0] < 0.06 * DEG) > 0.85


@pytest.mark.parametrize(
    ("law", "sequence", "sun_deg"), [("column", (3, 5), 25.0), ("column", (3, 1), 10.0), ("lowitz", (4, 8), 20.0)]
)
def test_neighbouring_crystals_send_their_light_to_one_line(
    law: str, sequence: tuple[int, ...], sun_deg: float
) -> None:
    found = column_fold([sequence], sun_deg * DEG, N) if law == "column" else fold(law, sequence, sun_deg * DEG, N)
    step = 1e-5
    for branch in found:
        angles = branch.angles[5:-5:10]
        change = []
        for offset in ((step, 0.0), (0.0, step)):
            ahead, behind = (
                image(sequence, rotations(law, *(angles + sign * np.array(offset)).T), sun_deg * DEG, N)[0]
                for sign in (1, -1)
            )
            change.append((ahead - behind) / (2.0 * step))
        area = np.linalg.norm(np.cross(*change), axis=1)
        size = np.linalg.norm(change[0], axis=1) * np.linalg.norm(change[1], axis=1) + 1e-3
        good = np.isfinite(area)
        assert good.mean() > 0.9
        assert np.median(area[good] / size[good]) < 1e-4


def test_a_curve_needs_light_that_the_spin_does_not_move() -> None:
    assert curve("column", [(1, 3, 5, 2)], 0.3, N)
    with pytest.raises(DomainError, match="draw no curve"):
        curve("column", [(3, 5)], 0.3, N)
