"""What is written can be read back, says the same as the schema, and never the same thing twice."""

import csv
import io
import json
import math
from dataclasses import replace

import numpy as np
import pytest

from digitize import CAUTION
from digitize.errors import UnreadableFile
from digitize.geometry import page_map_of, to_geometry
from digitize.tracing import LEADS, Check, Known, PageSource
from digitize.tracing_files import (
    SCHEMA,
    output_stem,
    read_tracing,
    to_csv,
    to_json,
    tracing_files,
)
from tests.digitize.made_tracing import SOURCE, grid, layout_of, panel, tracing


def rows_of(text):
    return list(csv.DictReader(io.StringIO(text)))


def with_everything():
    """A tracing that uses every field, with gaps."""
    made = tracing()
    layout, strokes = layout_of(made)
    gap = made.panels[0].mv.copy()
    gap[10:20] = np.nan
    panels = (panel("I", gap, notes=("hidden by a stamp",)), *made.panels[1:])
    return replace(
        made,
        panels=panels,
        geometry=to_geometry(grid(), layout, strokes),
        checks=(Check("coverage", None, "words", math.nan, 0.9, ("I", "II")),),
        corrections=({"lead": "I", "who": "A. Reader", "when": "2024-01-02T03:04:05Z"},),
        options={"speed_mm_s": None, "lead_order": ("I", "II")},
        gain_mm_mv=Known(np.float64(10.0), "found", float("nan")),
    )


# ---- CSV -------------------------------------------------------------------------------------


def test_csv_has_time_and_the_twelve_leads_in_order():
    assert to_csv(tracing()).splitlines()[0] == ("time_s,I,II,III,aVR,aVL,aVF,V1,V2,V3,V4,V5,V6")


def test_each_lead_stands_at_its_printed_time_and_is_blank_elsewhere():
    rows = rows_of(to_csv(tracing()))
    assert len(rows) == 5000
    assert (rows[0]["time_s"], rows[-1]["time_s"]) == ("0.000", "9.998")
    filled = {
        name: [k for k, row in enumerate(rows) if row[name]] for name in ("I", "aVR", "V1", "V6")
    }
    for column, name in enumerate(filled):
        assert (filled[name][0], filled[name][-1]) == (1250 * column, 1250 * column + 1249)


def test_a_lead_printed_twice_takes_the_strip():
    strip = panel("II", np.full(5000, 2.0), strip=True)
    rows = rows_of(to_csv(tracing((panel("II", np.full(1250, 1.0)), strip))))
    assert {row["II"] for row in rows} == {"2.0000"}


def test_a_strip_that_could_not_be_read_does_not_hide_the_panel():
    strip = panel("II", np.full(5000, np.nan), strip=True)
    rows = rows_of(to_csv(tracing((panel("II", np.full(1250, 1.0)), strip))))
    assert [row["II"] for row in rows[1249:1251]] == ["1.0000", ""]


def test_further_leads_get_columns_of_their_own():
    rows = rows_of(to_csv(tracing((panel("V4R", np.ones(3)), panel("V3R", np.zeros(3))))))
    assert list(rows[0])[-2:] == ["V3R", "V4R"]
    assert set(LEADS) < set(rows[0])
    assert (rows[0]["V3R"], rows[0]["V4R"], rows[0]["I"]) == ("0.0000", "1.0000", "")


def test_two_stretches_of_one_lead_share_its_column():
    text = to_csv(tracing((panel("V1", np.ones(2)), panel("V1", np.full(2, 3.0), start_s=0.01))))
    assert [row["V1"] for row in rows_of(text)] == ["1.0000"] * 2 + [""] * 3 + ["3.0000"] * 2


def test_zero_has_no_sign():
    assert rows_of(to_csv(tracing((panel("I", np.array([-1e-9])),))))[0]["I"] == "0.0000"


# ---- JSON ------------------------------------------------------------------------------------


@pytest.mark.parametrize("make", [tracing, with_everything, lambda: tracing(())])
def test_json_agrees_with_its_schema(make):
    jsonschema = pytest.importorskip("jsonschema", reason="the extra test is not installed")
    schema = json.loads(SCHEMA.read_text("utf-8"))
    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.validate(json.loads(to_json(make())), schema)


def test_schema_refuses_a_wrong_document():
    jsonschema = pytest.importorskip("jsonschema", reason="the extra test is not installed")
    document = json.loads(to_json(tracing()))
    document["speed_mm_s"]["source"] = "guessed"
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.validate(document, json.loads(SCHEMA.read_text("utf-8")))


def test_json_says_that_it_is_no_diagnosis():
    assert json.loads(to_json(tracing()))["caution"] == CAUTION
    assert "no diagnosis" in CAUTION
    assert "qualified clinician" in CAUTION


def test_missing_samples_are_null():
    document = json.loads(to_json(with_everything()))
    assert document["panels"][0]["mv"][9:21].count(None) == 10
    assert document["panels"][0]["sigma_mv"][10] is None
    assert document["gain_mm_mv"] == {"value": 10.0, "source": "found", "se": None}


def test_same_tracing_same_bytes():
    assert tracing_files(with_everything(), "a") == tracing_files(with_everything(), "a")


# ---- reading back ----------------------------------------------------------------------------


def written(folder, made, stem="chart"):
    for name, content in tracing_files(made, stem).items():
        (folder / name).write_bytes(content)
    return folder / f"{stem}.csv", folder / f"{stem}.json"


def test_reading_back_gives_the_same_tracing(tmp_path):
    made = with_everything()
    for path in written(tmp_path, made):
        back = read_tracing(path)
        assert back.source == made.source
        assert (back.speed_mm_s, back.layout, back.timing) == (
            made.speed_mm_s,
            made.layout,
            made.timing,
        )
        for one, other in zip(back.panels, made.panels, strict=True):
            # half of the last decimal: 0.05 microvolt
            np.testing.assert_allclose(one.mv, other.mv, atol=0.5001e-4, equal_nan=True)
            np.testing.assert_allclose(one.sigma_mv, other.sigma_mv, atol=0.5001e-4, equal_nan=True)
            assert (one.lead, one.box_mm, one.notes) == (other.lead, other.box_mm, other.notes)
        assert back.checks[0].leads == ("I", "II")
        assert back.corrections == made.corrections


def test_writing_what_was_read_gives_the_same_bytes(tmp_path):
    files = tracing_files(with_everything(), "chart")
    _, path = written(tmp_path, with_everything())
    assert tracing_files(read_tracing(path), "chart") == files


def test_stored_geometry_maps_as_the_grid_did():
    layout, strokes = layout_of(tracing())
    geometry = json.loads(json.dumps(to_geometry(grid(8.0), layout, strokes)))
    x_px, y_px = page_map_of(geometry).to_px(np.array([10.0]), np.array([25.0]))
    assert (x_px[0], y_px[0]) == pytest.approx((80.0, 200.0))


def test_csv_changed_by_hand_is_not_silently_replaced_by_the_json(tmp_path):
    path, _ = written(tmp_path, tracing())
    path.write_text(path.read_text().replace("0.002,", "0.003,"))
    with pytest.raises(UnreadableFile, match=r"chart\.csv: it was changed"):
        read_tracing(path)


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("{", "damaged"),
        ("[]", "damaged"),
        ('{"format": "other", "format_version": 1}', "not a tracing"),
        ('{"format": "millivellum tracing", "format_version": 2}', "later version"),
        ('{"format": "millivellum tracing", "format_version": 1}', "damaged"),
        ("\u00e9", "cannot be read"),
    ],
)
def test_damaged_json_is_refused_in_words(tmp_path, content, said):
    path = tmp_path / "chart.json"
    path.write_text(content, "utf-8")
    with pytest.raises(UnreadableFile, match=said):
        read_tracing(path)


def test_csv_alone_is_refused_in_words(tmp_path):
    path, other = written(tmp_path, tracing())
    other.unlink()
    with pytest.raises(UnreadableFile, match=r"chart\.json is missing"):
        read_tracing(path)


def test_names_of_further_pages_say_which():
    assert output_stem(SOURCE) == "chart"
    assert output_stem(replace(SOURCE, page=3)) == "chart.p3"
    assert output_stem(PageSource("a.b.tiff", "", 1, 1, 1, None)) == "a.b"
