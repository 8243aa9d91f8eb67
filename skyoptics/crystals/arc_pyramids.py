"""The arcs of pyramidal crystals that float like plates or columns: relatives of the odd-radius halos.

The same wedges that make the 9°, 18°, 20°, 23°, 24° and 35° circles in crystals of all orientations; an arc touches its
circle at the sun elevation that lets light pass symmetrically. Limits in degrees hold for n = 1.31 and were found by
following light through truncated bipyramids.
"""

from __future__ import annotations

from skyoptics.crystals.arc_feature import ANGLE_X, DERIVED, Crystals, Feature

ASPECT = 0.3
"""Of the prism part of typical crystals."""


def _plate_arc(name: str, sequences: tuple[tuple[int, ...], ...], where: str, exists: str, told: str) -> Feature:
    side, _, degrees = name.partition("plate_arc_")
    return Feature(
        name,
        f"{side.replace('_', ' ')}{degrees}° plate arc",
        "curve",
        (Crystals("plate", sequences, "truncated bipyramid", ASPECT),),
        where,
        exists,
        told,
        (ANGLE_X, DERIVED),
    )


def _column_arc(degrees: int, sequence: tuple[int, int], where: str, exists: str, told: str) -> Feature:
    return Feature(
        f"column_arc_{degrees}",
        f"{degrees}° column arc",
        "fold",
        (Crystals("column", (sequence, sequence[::-1]), "truncated bipyramid", ASPECT),),
        where,
        exists,
        told,
        (DERIVED,),
    )


PYRAMID_ARCS: tuple[Feature, ...] = (
    _plate_arc(
        "plate_arc_18",
        ((13, 25), (25, 13)),
        "beside the sun, steep, touching the 18° halo at h = 31.1°",
        "from about h = 6° to 84°",
        "one on either side, nearer to the sun than the parhelia",
    ),
    _plate_arc(
        "upper_plate_arc_9",
        ((13, 6), (6, 13)),
        "straight above the sun, short, touching the 9° halo at h = 9.52°",
        "up to about h = 53°",
        "a bright spot on top of the 9° halo",
    ),
    _plate_arc(
        "lower_plate_arc_9",
        ((3, 26), (26, 3)),
        "straight below the sun, short, touching the 9° halo at h = 18.5°",
        "up to about h = 74°",
        "a bright spot at the foot of the 9° halo",
    ),
    _plate_arc(
        "upper_plate_arc_20",
        ((13, 16),),
        "above the sun, outside the 20° halo, which it would touch with the sun 10° below the horizon",
        "up to about h = 19°",
        "V-shaped and steep, and never on its halo while the sun is up",
    ),
    _plate_arc(
        "lower_plate_arc_20",
        ((23, 26),),
        "below the sun, touching the 20° halo at h = 9.95°",
        "up to about h = 62°",
        "below the horizon until h = 21°",
    ),
    _plate_arc(
        "upper_plate_arc_23",
        ((1, 23),),
        "above the sun, touching the 23° halo at h = 47.6°; round the zenith at a high sun",
        "from about h = 21° to 73°",
        "above a high sun only, like a circumzenithal arc at half the distance",
    ),
    _plate_arc(
        "lower_plate_arc_23",
        ((13, 2), (23, 1)),
        "below the sun, touching the 23° halo at h = 70.4°",
        "from about h = 48° up",
        "hangs below a high sun, half as far as the circumhorizontal arc",
    ),
    _plate_arc(
        "upper_plate_arc_24",
        ((13, 5), (5, 13)),
        "above and beside the sun, touching the 24° halo on both sides at h = 10.3°",
        "up to about h = 49°",
        "half-way between the top of the halo and the height of the sun, rising outwards",
    ),
    _plate_arc(
        "lower_plate_arc_24",
        ((3, 25), (25, 3)),
        "below and beside the sun, touching the 24° halo on both sides at h = 21.2°",
        "at every sun elevation below 90°",
        "half-way between the foot of the halo and the height of the sun, falling outwards",
    ),
    _plate_arc(
        "upper_plate_arc_35",
        ((13, 15),),
        "above and beside the sun, outside the 35° halo, which it would touch with the sun 12.6° below the horizon",
        "up to about h = 12°",
        "far above the 24° arcs",
    ),
    _plate_arc(
        "lower_plate_arc_35",
        ((23, 25),),
        "below and beside the sun, touching the 35° halo on both sides at h = 12.6°",
        "up to about h = 61°",
        "below the horizon until h = 27°",
    ),
    _column_arc(
        9,
        (13, 6),
        "touches the 9° halo on both sides, level with a low sun",
        "at every sun elevation",
        "bright at the sides of the 9° halo, where plate arcs are above and below",
    ),
    _column_arc(
        18,
        (13, 25),
        "touches the 18° halo nearly above and below a low sun",
        "fades out towards h = 77°",
        "bright at the top and foot of the 18° halo",
    ),
    _column_arc(
        20,
        (13, 16),
        "touches the 20° halo on both sides, level with a low sun",
        "at every sun elevation",
        "bright at the sides of the 20° halo",
    ),
    _column_arc(
        23,
        (1, 23),
        "touches the 23° halo on both sides, level with a low sun",
        "fades out towards h = 68°",
        "bright at the sides of the 23° halo",
    ),
    _column_arc(
        24,
        (3, 15),
        "touches the 24° halo at four places, 30° beside its top and foot at a low sun",
        "at every sun elevation",
        "wider than the 24° halo, which is evenly bright all round",
    ),
    _column_arc(
        35,
        (13, 15),
        "touches the 35° halo at four places, 45° beside its top and foot at a low sun",
        "at every sun elevation",
        "wider than the 35° halo, which is evenly bright all round",
    ),
)
"""In the order of the table."""
