"""The printed page: one of A4 (ISO 216), its text read by another library."""

import io
from dataclasses import replace

import pypdf
import pytest
from sample_plans import Place, plan

from skyoptics.planning import sheet_pdf
from skyoptics.planning.cautions import for_feature


def read(content):
    return pypdf.PdfReader(io.BytesIO(content))


@pytest.mark.parametrize(("days", "meetings"), [(31, 0), (3, 2)])
def test_one_page_with_all_rows(days, meetings):
    pages = read(sheet_pdf.write(plan(days, meetings, notes=for_feature("primary")))).pages
    assert len(pages) == 1
    assert float(pages[0].mediabox.width) == pytest.approx(210 / 25.4 * 72, abs=0.5)
    assert float(pages[0].mediabox.height) == pytest.approx(297 / 25.4 * 72, abs=0.5)
    text = pages[0].extract_text()
    for day in range(1, (meetings or days) + 1):
        assert f"2027-05-{day:02d}" in text
    assert "Europe/Zurich" in text
    assert "UTC+02:00" in text
    assert "47.2N 8.9E" in text
    assert "When thunder roars, go indoors" in text
    assert ("nearest to the subject" in text) == bool(meetings)


def test_long_lists_say_what_is_left_out():
    one = plan(31)
    pages = read(sheet_pdf.write(replace(one, windows=one.windows * 2))).pages
    assert len(pages) == 1
    assert "31 more not shown" in pages[0].extract_text()


def test_same_bytes_again_and_no_clock():
    content = sheet_pdf.write(plan(2))
    assert content == sheet_pdf.write(plan(2))
    assert read(content).metadata.title.startswith("Primary rainbow")


def test_names_in_any_script_and_with_signs():
    text = read(sheet_pdf.write(plan(1, place=Place(1.0, 2.0, 0.0, "Mühle $5^2$ 水車")))).pages[0].extract_text()
    assert "Mühle $5^2$" in text
