import copy
from datetime import datetime, timedelta, timezone
from itertools import product

import pytest

from skyoptics.errors import DomainError
from skyoptics.rendering import alt_text, caption
from skyoptics.words.table import languages, raw, say

DROPS = {"kind": "drops", "radius_um": 500.0, "spread": 0.0, "flattened": False}
PLATES = {
    "kind": "crystals",
    "habit": "plates",
    "aspect": 0.3,
    "diameter_um": 100.0,
    "orientation": "plate",
    "tilt_law": "gaussian",
    "tilt_deg": 1.0,
}
REPORT = {
    "title": "A double bow",
    "licence": "CC BY 4.0",
    "author": "A. B.",
    "shows": {
        "light": {"body": "sun", "elevation_deg": 14.0, "azimuth_deg": 252.0, "where": "behind", "place": None},
        "seen": ["primary_bow", "secondary_bow", "alexander_band"],
        "angles_deg": {"primary_bow": 41.94, "secondary_bow": 51.26},
        "only": None,
        "particles": [DROPS],
        "background": "overcast",
        "unlike": [{"key": "rays"}],
    },
}
LIBERTIES = [
    {"key": "covered", "radius": 0.5},
    {"key": "left_out"},
    {"key": "wavelengths", "wavelengths_nm": [450.0, 550.0, 650.5]},
    {"key": "point"},
    {"key": "air"},
    {"key": "dim"},
    {"key": "polariser", "angle": 90.0},
    {"key": "orders", "orders": [2, 3]},
    {"key": "rays"},
    {"key": "one_size"},
    {"key": "toned_down", "share": 1.25},
    {"key": "gamut", "share": 12.5},
]


def changed(**shows):
    """Return the report with other facts."""
    report = copy.deepcopy(REPORT)
    report["shows"] |= shows
    return report


def test_caption_in_english():
    assert caption.write(REPORT) == (
        "Primary bow (41.9° from the antisolar point), secondary bow (51.3° from the antisolar point) and Alexander's dark "
        "band, with a closed cloud cover behind. The sun stands 14.0° high, azimuth 252° (W). Computed for water drops of "
        "0.5 mm radius, all of one size. Other than in nature, fringes of wave optics are left out."
    )


def test_caption_in_german_has_decimal_commas():
    text = caption.write(REPORT, "de")
    assert text.startswith("Hauptregenbogen (41,9° vom Sonnengegenpunkt), Nebenregenbogen (51,3°")
    assert "0,5 mm" in text
    assert "14,0° hoch" in text


@pytest.mark.parametrize("lang", languages())
def test_page_tells_everything(lang):
    page = caption.page(REPORT, lang)
    for part in ("A double bow", "CC BY 4.0", "A. B.", caption.write(REPORT, lang), alt_text.write(REPORT, lang)):
        assert part in page
    assert page.endswith("\n")
    assert caption.rights({}, lang) == ""


@pytest.mark.parametrize("lang", languages())
def test_alt_text_begins_with_what_is_seen_and_stays_short(lang):
    first = say("feature.primary_bow", lang)
    assert alt_text.write(REPORT, lang).lower().startswith(first.lower())
    names = [f"{side}_plate_arc_{angle}" for angle in (9, 20, 23, 24, 35) for side in ("upper", "lower")]
    text = alt_text.write(changed(seen=names, particles=[PLATES] * 30), lang)
    assert len(text) <= 300
    assert text.endswith(".")
    assert say("body.sun", lang).lower() in text.lower()


@pytest.mark.parametrize("lang", languages())
@pytest.mark.parametrize("liberty", LIBERTIES, ids=lambda liberty: liberty["key"])
def test_every_liberty_is_told(lang, liberty):
    words = raw(f"unlike.{liberty['key']}", lang)
    longest = max((part.rpartition("}")[2] for part in words.split("{")), key=len).strip()
    assert longest in caption.write(changed(unlike=[liberty]), lang)
    assert longest not in caption.write(changed(unlike=[]), lang)


def test_place_time_and_particles():
    light = REPORT["shows"]["light"] | {
        "elevation_deg": -0.4,
        "place": {"latitude_deg": -33.9, "longitude_deg": 18.42, "time": "2027-05-12T19:40+02:00"},
    }
    text = caption.write(changed(light=light, particles=[PLATES, DROPS | {"spread": 0.1}]), "es")
    assert "0,4° bajo el horizonte" in text
    assert "33,90° S, 18,42° E (2027-05-12 19:40+02:00)" in text
    assert "placas hexagonales de hielo, 0,1 mm de ancho, longitud ÷ diámetro 0,3, eje principal vertical" in text
    assert "inclinación típica 1°" in text
    assert "dispersión del 10 %" in text


def test_nothing_seen_and_one_arc_alone():
    assert caption.write(changed(seen=[])).startswith("No bow or halo stands out, with a closed cloud cover behind.")
    text = alt_text.write(changed(only="kern", seen=["kern"]), "de")
    assert text.startswith("Das Licht einer Erscheinung allein: Kern-Bogen.")


@pytest.mark.parametrize("lang", languages())
def test_every_crystal_has_words(lang):
    habits = ("plates", "columns", "prisms", "bipyramid", "truncated-bipyramid", "pyramid", "trigonal")
    laws = [("gaussian", 1.0), ("gaussian", 0.0), ("cone", 2.0), ("table", None)]
    for habit, orientation in product(habits, ("random", "plate", "column", "parry", "lowitz", "axis")):
        crystal = PLATES | {"habit": habit, "orientation": orientation}
        told = {
            caption.write(changed(particles=[crystal | {"tilt_law": law, "tilt_deg": tilt}]), lang)
            for law, tilt in laws
        }
        assert len(told) == 4
        for text in told:
            assert say(f"crystals.{habit}", lang) in text
            assert say(f"orientation.{orientation}", lang) in text


def test_today():
    zone = timezone(timedelta(hours=2))
    start, best, end = (datetime(2027, 5, 12, hour, 5, tzinfo=zone) for hour in (18, 20, 21))
    assert caption.today("primary_bow", start, best, end, 3.2, 299.0) == (
        "To see this today: primary bow from 18:05 to 21:05, best at 20:05, when the sun stands 3° high, azimuth 299° (NW)."
    )
    assert caption.today("primary_bow", start, best, end, 3.2, 299.0, lang="de").startswith(
        "Heute zu sehen: Hauptregen"
    )
    assert caption.today("circumzenithal", None, None, None, lang="fr").startswith(
        "Pas visible aujourd’hui : arc circum"
    )


def test_bad_input():
    with pytest.raises(DomainError, match="there are en"):
        caption.write(REPORT, "pt")
    with pytest.raises(DomainError, match="there are en"):
        alt_text.write(REPORT, "pt")
    with pytest.raises(DomainError, match="render the scene anew"):
        alt_text.write({"title": "old"})
