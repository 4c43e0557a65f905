"""Contact sheets: every page once, those to look at first, a way from each to the next."""

import re

from digitize.archive.catalogue import Catalogue, PageRow, opened
from digitize.archive.contact import ON_A_SHEET, contact_sheets


def store(tmp_path, pages):
    with opened(tmp_path / "catalogue.sqlite") as catalogue:
        for number in range(pages):
            stem = f"pages/aa/{number}"
            status = "look" if number % 7 == 3 else "good"
            row = PageRow(
                1, status, "<look>" if status == "look" else "", stem, 12, "3x4", 25.0, "found",
                10.0, "found",
            )  # fmt: skip
            catalogue.add_page(f"{number:064}", "o", row)
        catalogue.add_page("f" * 64, "o", PageRow(0, "failed", "no grid"))
        return dict(sheets_of(catalogue))


def sheets_of(catalogue: Catalogue):
    return contact_sheets(catalogue.rows(), catalogue.counts())


def test_pages_are_spread_over_sheets_that_lead_to_each_other(tmp_path):
    sheets = store(tmp_path, 2 * ON_A_SHEET + 50)
    assert list(sheets) == ["contact_sheet.html", "contact_sheet.2.html", "contact_sheet.3.html"]
    shown = [int(n) for sheet in sheets.values() for n in re.findall(rb"aa/(\d+)\.thumb", sheet)]
    assert sorted(shown) == list(range(2 * ON_A_SHEET + 50))
    assert [sheet.count(b"<figure") for sheet in sheets.values()] == [ON_A_SHEET, ON_A_SHEET, 51]
    looked_at = [number % 7 == 3 for number in shown]
    assert looked_at == sorted(looked_at, reverse=True)
    for number, sheet in enumerate(sheets.values(), start=1):
        assert f"Contact sheet {number} of 3" in sheet.decode()
        assert set(re.findall(r'href="(contact[^"]+)"', sheet.decode())) < set(sheets)


def test_one_sheet_says_what_to_do_and_escapes_what_it_shows(tmp_path):
    (sheet,) = store(tmp_path, 4).values()
    assert b"measure overread pages/aa/3.json" in sheet
    assert b"<look>" not in sheet
    assert b"clinician" in sheet
    assert b"Sheet 2" not in sheet


def test_an_empty_store_has_a_sheet(tmp_path):
    with opened(tmp_path / "catalogue.sqlite") as catalogue:
        assert len(dict(sheets_of(catalogue))) == 1
