"""The table of named halo features.

Limits in degrees hold for n = 1.31; the code computes them for the index at hand. "From the faces" means: worked out here
from the face sequence, and checked by following rays.
"""

from __future__ import annotations

from skyoptics.crystals.arc_feature import ANGLE_X, DERIVED, PILLAR_TILT, Crystals, Feature
from skyoptics.crystals.arc_pyramids import PYRAMID_ARCS

TAPE = "Tape, Atmospheric Halos (AGU 1994), from memory"
GREENLER = "Greenler, Rainbows, Halos, and Glories (Cambridge 1980), from memory"
BRAVAIS = "Bravais, Mémoire sur les halos, J. École Polytechnique 18, cahier 31 (1847)"
HASTINGS = "Hastings, A general theory of halos, Mon. Weather Rev. 48, 322 (1920), from memory"
WEGENER = "Wegener, Theorie der Haupthalos (1925), from memory"
TRICKER = "Tricker, Introduction to Meteorological Optics (Mills & Boon 1970), from memory"
ANTHELIC = "Greenler & Tränkle, Anthelic arcs from airborne ice crystals, Nature 311, 339 (1984), from memory"
LILJEQUIST = "Liljequist, Halo-phenomena and ice-crystals, Norw.-Brit.-Swed. Antarctic Exped. 2(2) (1956), from memory"
MULTIPLE = (
    "Tränkle & Greenler, Multiple-scattering effects in halo phenomena, J. Opt. Soc. Am. A 4, 591 (1987), from memory"
)

PLATE, THICK, COLUMN, THIN = 0.3, 1.0, 2.0, 0.2


def _circle(degrees: int, sequence: tuple[int, ...], faces: str, told: str, pyramid: bool = True) -> Feature:
    return Feature(
        f"halo_{degrees}",
        f"{degrees}° halo",
        "circle",
        (Crystals("random", (sequence, sequence[::-1]), "truncated bipyramid" if pyramid else "prism"),),
        f"circle about the sun at least deviation of the wedge between {faces}, red inside",
        "at every sun elevation",
        told,
        (ANGLE_X, DERIVED) if pyramid else (BRAVAIS, TAPE, DERIVED),
    )


def _plate(*sequences: tuple[int, ...], aspect: float = PLATE) -> Crystals:
    return Crystals("plate", sequences, aspect=aspect)


def _column(*sequences: tuple[int, ...], aspect: float = COLUMN) -> Crystals:
    return Crystals("column", sequences, aspect=aspect)


def _parry(*sequences: tuple[int, ...], aspect: float = COLUMN) -> Crystals:
    return Crystals("parry", sequences, aspect=aspect)


def _lowitz(*sequences: tuple[int, ...]) -> Crystals:
    return Crystals("lowitz", sequences, aspect=PLATE)


_SIDE_MIRROR = ((3,), (1, 3, 2), (3, 4, 5))
_SUB_MIRROR = ((1,), (1, 2, 1), (3, 2, 6))
_HELIAC = (
    *((4,), (5,), (1, 4, 2), (1, 5, 2), (3, 4, 5), (3, 5, 7), (4, 5, 6), (4, 7, 4), (4, 8, 6), (5, 7, 3)),
    *((1, 4, 5, 6, 2), (1, 6, 5, 4, 2), (1, 5, 7, 3, 2), (4, 6, 7, 8, 4), (4, 8, 7, 6, 4), (4, 6, 7, 8, 3, 4, 6)),
)
_KERN = (
    (1, 3, 5),
    (1, 3, 5, 2, 7, 1, 3),
    (1, 3, 2, 5, 7, 1, 3),
    (1, 3, 4, 5, 2, 6, 7, 1, 3),
    (1, 3, 4, 2, 5, 6, 7, 1, 3),
)
_TRICKER = (
    *((3, 1, 5, 7, 4), (3, 5, 1, 7, 4), (3, 5, 7, 1, 4), (3, 1, 6, 4, 8), (3, 6, 1, 4, 8), (3, 6, 4, 1, 8)),
    *((1, 3, 2, 5, 1), (1, 3, 2, 4, 1), (1, 3, 4, 2, 1), (1, 3, 5, 2, 7, 3, 1)),
)
_SUBHELIC = ((1, 3, 5, 2), (1, 3, 4, 2), (3, 5, 7, 4), (3, 4, 5, 8))

TABLE: tuple[Feature, ...] = (
    _circle(9, (3, 26), "a prism face and the opposite pyramid face (28.0°)", "smallest circle; needs pyramid faces"),
    _circle(
        18, (13, 25), "pyramid faces of both ends, 120° apart (52.4°)", "inside the 20° halo, of the same crystals"
    ),
    _circle(20, (13, 16), "opposite pyramid faces of one end (56.0°)", "between 18° and 22°, needs pyramid faces"),
    _circle(
        22,
        (3, 5),
        "prism faces 120° apart (60°)",
        "the common halo; radius a stretched hand, no pyramid faces needed",
        False,
    ),
    _circle(23, (1, 23), "a basal and a pyramid face of the other end (62.0°)", "one degree outside the 22° halo"),
    _circle(24, (3, 15), "a prism and a pyramid face 120° apart (63.8°)", "two degrees outside the 22° halo"),
    _circle(35, (13, 15), "pyramid faces of one end, 120° apart (80.2°)", "half-way between the 22° and 46° halos"),
    _circle(
        46,
        (1, 3),
        "a prism and a basal face (90°)",
        "evenly bright all round, unlike supralateral and infralateral arcs, which touch it and are brighter",
        False,
    ),
    Feature(
        "parhelia",
        "parhelia (sundogs)",
        "spot",
        (_plate((3, 5)),),
        "at the sun's elevation, outside the 22° halo; azimuth 2 asin(n'/2) − 60° from the sun, n' = √(n² − sin²h)/cos h",
        "while n' ≤ 2, h ≤ 60.8°",
        "red towards the sun, with a white tail outwards along the parhelic circle; moves away from the 22° halo as the sun climbs",
        (BRAVAIS, TAPE, DERIVED),
    ),
    Feature(
        "parhelic_circle",
        "parhelic circle",
        "curve",
        (_plate(*_SIDE_MIRROR), _column((1,), (3, 1, 6)), _parry((1,), (3, 1, 6))),
        "all round the horizon at the sun's elevation",
        "at every sun elevation below 90°",
        "white and level, through the sun",
        (BRAVAIS, TAPE, DERIVED),
    ),
    Feature(
        "parhelia_120",
        "120° parhelia",
        "spot",
        (_plate((1, 3, 4, 2), (1, 3, 5, 2)),),
        "on the parhelic circle, 120° of azimuth from the sun",
        "at every sun elevation above 0 and below 90°",
        "white spots at exactly 120° azimuth",
        (BRAVAIS, TAPE, DERIVED),
    ),
    Feature(
        "liljequist_parhelia",
        "Liljequist parhelia",
        "diffuse",
        (_plate((3, 4, 5, 7), (3, 5, 6, 7), aspect=THICK),),
        "a stretch of the parhelic circle from 120° + that of the parhelia outwards, brightest near 152° at a low sun",
        "where the parhelia exist and the stretch ends below 180°",
        "a broad brightening between the 120° parhelion and the anthelic point",
        (LILJEQUIST, DERIVED),
    ),
    Feature(
        "circumzenithal",
        "circumzenithal arc",
        "curve",
        (_plate((1, 3)), _parry((3, 1), aspect=COLUMN)),
        "about the zenith at elevation e, sin e = √(n² − cos²h), on the sun's side",
        "0 ≤ h ≤ 32.2°, cos h ≥ √(n² − 1)",
        "centred on the zenith, red outside and below; touches the supralateral arc, which bends round the sun",
        (BRAVAIS, TAPE, DERIVED),
    ),
    Feature(
        "circumhorizontal",
        "circumhorizontal arc",
        "curve",
        (_plate((3, 2)), _parry((1, 6), aspect=COLUMN)),
        "level at elevation e, cos e = √(n² − sin²h), on the sun's side",
        "h ≥ 57.8°",
        "straight and level, red above; the infralateral arc it touches is bent",
        (BRAVAIS, TAPE, DERIVED),
    ),
    Feature(
        "kern",
        "Kern arc",
        "curve",
        (_plate(*_KERN, aspect=THICK),),
        "on the circle of the circumzenithal arc, right round it, so on the far side of the zenith too",
        "0 ≤ h ≤ 32.2°",
        "faint continuation of the circumzenithal arc away from the sun",
        (TAPE, DERIVED),
    ),
    Feature(
        "upper_tangent",
        "upper tangent arc",
        "fold",
        (_column((3, 5)),),
        "touches the 22° halo above the sun; a V at a low sun, wings when it is higher",
        "below h = 29.25°, where it joins the lower one into the circumscribed halo",
        "brightest where it touches the 22° halo; the Parry arc stands above it",
        (BRAVAIS, TAPE, DERIVED),
        part="rising",
    ),
    Feature(
        "lower_tangent",
        "lower tangent arc",
        "fold",
        (_column((3, 5)),),
        "touches the 22° halo below the sun; below the horizon while the sun is lower than 22°",
        "below h = 29.25°",
        "hangs from the 22° halo, point up",
        (BRAVAIS, TAPE, DERIVED),
        part="sinking",
    ),
    Feature(
        "circumscribed",
        "circumscribed halo",
        "fold",
        (_column((3, 5)),),
        "closed round the 22° halo, touching it above and below the sun",
        "from h = 29.25° up",
        "wider than the 22° halo at its sides, nearly round only at a high sun",
        (BRAVAIS, TAPE, DERIVED),
    ),
    Feature(
        "supralateral",
        "supralateral arc",
        "fold",
        (_column((3, 1)),),
        "over and beside the sun, near the 46° halo; touches the circumzenithal arc",
        "0 ≤ h ≤ 32.2°",
        "rainbow-bright and wider than the 46° halo except where it touches it",
        (TAPE, GREENLER, DERIVED),
    ),
    Feature(
        "infralateral",
        "infralateral arc",
        "fold",
        (_column((1, 3)),),
        "beside and below the sun near the 46° halo; one arc below the sun from h = 57.8° up",
        "at every sun elevation",
        "convex towards the sun at a low sun, unlike the 46° halo",
        (TAPE, GREENLER, DERIVED),
    ),
    Feature(
        "upper_suncave_parry",
        "upper suncave Parry arc",
        "curve",
        (_parry((3, 7)),),
        "above the upper tangent arc, hollow side to the sun",
        "0 ≤ h ≤ 76.5° in the sun's vertical",
        "a cap over the tangent arc's V",
        (HASTINGS, TAPE, DERIVED),
    ),
    Feature(
        "upper_sunvex_parry",
        "upper sunvex Parry arc",
        "curve",
        (_parry((4, 8)),),
        "above the sun, bulging towards it",
        "h ≤ 16.5° in the sun's vertical",
        "a V above the upper tangent arc at a low sun",
        (HASTINGS, TAPE, DERIVED),
    ),
    Feature(
        "lower_suncave_parry",
        "lower suncave Parry arc",
        "curve",
        (_parry((4, 6)),),
        "below and beside the sun, hollow side to it",
        "from about h = 25° up, one piece from about h = 44° up",
        "a bowl under the sun, outside the circumscribed halo",
        (TAPE, DERIVED),
    ),
    Feature(
        "lower_sunvex_parry",
        "lower sunvex Parry arc",
        "curve",
        (_parry((5, 7)),),
        "below the sun, bulging towards it; below the horizon at a low sun",
        "up to about h = 59°",
        "a peak under the sun, below the lower tangent arc's point",
        (TAPE, DERIVED),
    ),
    Feature(
        "upper_lowitz",
        "upper Lowitz arc",
        "fold",
        (_lowitz((3, 5)),),
        "from the parhelia up and in towards the 22° halo",
        "up to about h = 76°",
        "leaves the parhelion upwards",
        (TAPE, DERIVED),
    ),
    Feature(
        "middle_lowitz",
        "middle Lowitz arc",
        "fold",
        (_lowitz((4, 8)),),
        "through the parhelia, closing round the sun below them",
        "up to about h = 59°",
        "made by the faces on both sides of the spin axis; passes the parhelion steeply, both up and down",
        (TAPE, DERIVED),
    ),
    Feature(
        "lower_lowitz",
        "lower Lowitz arc",
        "fold",
        (_lowitz((4, 6)),),
        "from the parhelia down and in towards the 22° halo",
        "at every sun elevation",
        "leaves the parhelion downwards",
        (TAPE, DERIVED),
    ),
    Feature(
        "heliac",
        "heliac arc",
        "curve",
        (_parry(*_HELIAC),),
        "a loop through the sun: mirror image of it in faces inclined by 60°",
        "at every sun elevation below 90°",
        "white, crosses itself at the sun",
        (TAPE, GREENLER, DERIVED),
    ),
    Feature(
        "subhelic",
        "subhelic arc",
        "curve",
        (_column(*_SUBHELIC), _parry(*_SUBHELIC)),
        "the sun turned by ±120° about every level axis: rises from below the sun to h' = 60° − h opposite it",
        "at every sun elevation",
        "white, crosses the parhelic circle steeply",
        (TAPE, DERIVED),
    ),
    Feature(
        "wegener",
        "Wegener arc",
        "fold",
        (_column((3, 1, 5)),),
        "from the top of the upper tangent arc round to the anthelic point, where both sides cross; a lower one alike",
        "at every sun elevation",
        "mirror image of the tangent arc in the end faces; touches the tangent arc",
        (WEGENER, TAPE, ANTHELIC, DERIVED),
    ),
    Feature(
        "hastings",
        "Hastings arc",
        "curve",
        (_parry((3, 1, 7), (4, 1, 8)),),
        "from the top of the upper Parry arc round to the anthelic region",
        "0 ≤ h ≤ 76.5°",
        "to the Parry arc what Wegener's is to the tangent arc; outside Wegener's",
        (HASTINGS, TAPE, ANTHELIC, DERIVED),
    ),
    Feature(
        "lower_hastings",
        "lower Hastings arc",
        "curve",
        (_parry((5, 1, 7), (4, 1, 6)),),
        "from the lower Parry arcs round to the side opposite the sun, mostly below the horizon at a low sun",
        "at every sun elevation",
        "mirror image of the lower Parry arcs in the end faces",
        (DERIVED,),
    ),
    Feature(
        "tricker",
        "Tricker arc",
        "curve",
        (_column(*_TRICKER), _parry(*_TRICKER)),
        "mirror image of the subhelic arc in the end faces: the antisolar point turned by ±60° about every level axis",
        "at every sun elevation; through the anthelic point for h < 30°",
        "a narrow cross at the anthelic point, steeper than Wegener's",
        (TRICKER, ANTHELIC, DERIVED),
    ),
    Feature(
        "greenler_diffuse",
        "Greenler's diffuse arcs",
        "diffuse",
        (
            _column(
                (3, 1, 5, 7),
                (3, 5, 1, 7),
                (3, 1, 5, 6, 7, 3),
                (3, 5, 6, 7, 1, 3),
                (3, 1, 4, 5),
                (3, 1, 6, 3),
                (1, 3, 2, 1),
            ),
        ),
        "within 60° of the anthelic point, where the spin of the columns blurs two crossing bands",
        "at every sun elevation",
        "broad soft bands, unlike the narrow arcs of Wegener and Tricker",
        (ANTHELIC, DERIVED),
        part="anthelic",
    ),
    Feature(
        "subsun",
        "subsun",
        "spot",
        (_plate(*_SUB_MIRROR), _parry((3,), (1, 6, 2))),
        "as far below the horizon as the sun is above",
        "h > 0",
        "white, the mirror image of the sun in level faces",
        (TAPE, GREENLER, DERIVED),
    ),
    Feature(
        "sun_pillar",
        "sun pillar",
        "diffuse",
        (_plate(*_SUB_MIRROR, aspect=THIN), _parry((3,), (1, 6, 2))),
        "where level faces tilted by up to 7° (tilt spread 2°) mirror the sun: a column over and under a low sun",
        "at every sun elevation; above the horizon while h < 14°",
        "vertical and uncoloured; the subsun drawn out",
        (TAPE, DERIVED),
        tilt=PILLAR_TILT,
    ),
    Feature(
        "subparhelia",
        "subparhelia",
        "spot",
        (_plate((3, 2, 5)),),
        "below the parhelia, at the subsun's elevation",
        "while the parhelia exist, h > 0",
        "coloured, beside the subsun",
        (TAPE, DERIVED),
    ),
    Feature(
        "subparhelic_circle",
        "subparhelic circle",
        "curve",
        (
            _plate((1, 3, 2, 1), (1, 2, 3, 1), (3, 2, 4, 5), (3, 4, 2, 5), (3, 5, 2, 7), (3, 2, 6, 3)),
            _parry((3, 6, 1, 3), (3, 1, 6, 3)),
        ),
        "all round below the horizon at the subsun's elevation",
        "0 < h < 90°",
        "white and level, through the subsun",
        (TAPE, DERIVED),
    ),
    Feature(
        "subparhelia_120",
        "120° subparhelia",
        "spot",
        (_plate((1, 3, 2, 4, 1), (1, 3, 4, 2, 1), (1, 2, 3, 4, 1)),),
        "on the subparhelic circle, 120° of azimuth from the sun",
        "0 < h < 90°",
        "white spots below the 120° parhelia",
        (DERIVED,),
    ),
    Feature(
        "subcircumzenithal",
        "subcircumzenithal arc",
        "curve",
        (_plate((1, 2, 3)),),
        "about the nadir, mirror image of the circumzenithal arc below the horizon",
        "0 ≤ h ≤ 32.2°",
        "coloured arc about the nadir on the sun's side",
        (DERIVED,),
    ),
    Feature(
        "subcircumhorizontal",
        "subcircumhorizontal arc",
        "curve",
        (_plate((3, 2, 1)),),
        "level, as far below the horizon as the circumhorizontal arc is above",
        "h ≥ 57.8°",
        "coloured and level, far below the horizon",
        (DERIVED,),
    ),
    Feature(
        "parry_supralateral",
        "Parry supralateral arc",
        "curve",
        (_parry((4, 1), (7, 1)),),
        "near the supralateral arc",
        "up to about h = 32°",
        "a narrow coloured arc: of the light of supralateral arcs, what one spin makes",
        (DERIVED,),
    ),
    Feature(
        "parry_infralateral",
        "Parry infralateral arc",
        "curve",
        (_parry((1, 7), (1, 4)),),
        "near the infralateral arc",
        "up to about h = 63°",
        "a narrow coloured arc: of the light of infralateral arcs, what one spin makes",
        (DERIVED,),
    ),
    Feature(
        "parhelia_44",
        "44° parhelia",
        "spot",
        (_plate((3, 5)),),
        "at the sun's elevation, twice as far in azimuth as the parhelia",
        "while the parhelia exist",
        "second scattering only: parhelia of the parhelia, in a deep cloud of plates",
        (MULTIPLE, GREENLER, DERIVED),
        scatterings=2,
    ),
    *PYRAMID_ARCS,
)
