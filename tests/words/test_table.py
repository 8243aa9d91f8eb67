import unicodedata
from string import Formatter

import pytest

from skyoptics.camera.overlay import POINTS
from skyoptics.crystals import arcs
from skyoptics.errors import DomainError
from skyoptics.figures.lettering import FONT, font_file, missing_glyphs
from skyoptics.words import table
from skyoptics.words.table import keys, languages, listed, number, raw, say, sentence

LETTERS = {"de": "äöüÄÖÜß", "es": "áéíóúüñ¿¡", "fr": "àâçéèêëîïôùûœ’"}


def fields(text):
    """Return the names of the braces of a text, sorted."""
    return sorted({name for _, name, _, _ in Formatter().parse(text) if name})


def test_every_key_has_all_languages_and_the_same_braces():
    for key in keys():
        assert set(table._table()[key]) == set(languages()), key
        texts = [raw(key, lang) for lang in languages()]
        assert all(text.strip() == text and text for text in texts), key
        assert all(unicodedata.is_normalized("NFC", text) for text in texts), key
        assert len({tuple(fields(text)) for text in texts}) == 1, key


def test_every_halo_and_compass_point_has_a_name():
    for name in arcs.names():
        assert say(f"feature.{name}") == arcs.feature(name).title
    assert len({say(f"feature.{name}", "de") for name in arcs.names()}) == len(arcs.names())
    for lang in languages():
        assert len({say(f"compass.{point}", lang) for point in POINTS}) == 8
        # no two features may be mistaken for each other
        named = [raw(key, lang) for key in keys() if key.startswith("feature.")]
        assert len(set(named)) == len(named)


def test_terms_of_the_trade():
    # German: Arbeitskreis Meteore, list of halo phenomena (from memory); French, Spanish: WMO International Cloud Atlas (2017)
    # in those languages (from memory)
    assert say("feature.circumzenithal", "de") == "Zirkumzenitalbogen"
    assert say("feature.parhelia", "de") == "Nebensonnen"
    assert say("feature.circumzenithal", "fr") == "arc circumzénithal"
    assert say("feature.parhelia", "fr") == "parhélies"
    assert say("feature.parhelia", "es") == "parhelios"
    assert [say(f"compass.{point}", "de") for point in ("E", "NE")] == ["O", "NO"]
    assert [say(f"compass.{point}", "es") for point in ("W", "SW")] == ["O", "SO"]


@pytest.mark.parametrize("lang", languages())
def test_the_font_has_every_letter(lang):
    used = "".join(raw(key, lang) for key in keys()) + "0123456789−\u202f" + LETTERS.get(lang, "")
    assert missing_glyphs(used) == ""
    assert missing_glyphs(used, "bold") == ""


def test_the_font_comes_with_its_licence():
    folder = font_file().parent
    assert "DejaVu" in FONT
    assert "Bitstream Vera" in (folder / "LICENSE_DEJAVU").read_text(encoding="utf-8", errors="replace")


def test_numbers_are_written_as_the_language_does():
    assert number(1234.5, "en", ",.1f") == "1,234.5"
    assert number(1234.5, "de", ",.1f") == "1.234,5"
    assert number(1234.5, "fr", ",.1f") == "1\u202f234,5"
    assert number(-0.04, "de", ".1f") == "0,0"
    assert number(-2.5, "es") == "−2,5"
    assert say("mark.angle", "fr", angle=42.04) == "42,0°"
    assert say("mark.angle", "en", angle=42.04) == "42.0°"


def test_lists():
    assert listed([], "de") == ""
    assert listed(["a"], "de") == "a"
    assert listed(["a", "b", "c"], "de") == "a, b und c"
    assert listed(["oro", "iris"], "es") == "oro e iris"  # Real Academia Española, Ortografía (2010): e before i-
    assert listed(["agua", "hielo"], "es") == "agua y hielo"
    assert sentence(" abc") == "Abc."
    assert sentence("Abc?") == "Abc?"


def test_unknown_language_lists_them():
    with pytest.raises(DomainError, match=r"'it'; there are en \(English\), de \(Deutsch\), es \(español\), fr"):
        say("axis.azimuth", "it")
    with pytest.raises(DomainError):
        number(1.0, "xx")


def test_unknown_key_or_missing_value():
    with pytest.raises(KeyError):
        say("feature.no_such_arc")
    with pytest.raises(KeyError):
        say("mark.angle")
