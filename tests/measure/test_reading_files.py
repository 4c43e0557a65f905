"""A reading on disk: by its schema, deterministic, and back again."""

import json
from dataclasses import replace
from importlib import resources

import jsonschema
import pytest

from digitize.errors import UnreadableFile
from measure.quantity import missing
from measure.reading_files import document, load_document, quantity_of, to_json
from tests.measure import made


@pytest.fixture(scope="module")
def schema():
    text = resources.files("measure").joinpath("schema/reading.schema.json").read_text()
    content = json.loads(text)
    jsonschema.Draft202012Validator.check_schema(content)
    return jsonschema.Draft202012Validator(content)


@pytest.mark.parametrize("leads", [made.lbbb_leads(), made.rbbb_leads(), made.normal_leads()])
def test_reading_follows_the_schema(schema, leads):
    schema.validate(document(made.reading(leads)))


def test_missing_interval_is_null_with_its_reason(schema):
    reading = made.reading(pr_ms=missing("ms", "no P wave found"))
    content = document(reading)
    schema.validate(content)
    assert content["intervals"]["pr_ms"] == {
        "value": None,
        "se": None,
        "unit": "ms",
        "leads": [],
        "beats": 0,
        "reason": "no P wave found",
    }


def test_schema_refuses_a_missing_value_without_a_reason(schema):
    content = document(made.reading())
    content["intervals"]["qrs_ms"]["value"] = None
    assert not schema.is_valid(content)


def test_saved_and_loaded_is_the_same(tmp_path):
    reading = made.reading()
    path = tmp_path / "page.reading.json"
    path.write_bytes(to_json(reading))
    content = load_document(path)
    assert content == json.loads(json.dumps(document(reading)))
    assert quantity_of(content["intervals"]["qrs_ms"]) == reading.intervals["qrs_ms"]
    assert content["intervals"]["qrs_ms"]["value"] == 150.0
    assert content["beat"]["start_ms"] == -240.0  # the beat starts 240 ms before its QRS onset
    assert content["beats"][3] == {"time_s": 3.0, "kind": "usual", "averaged": True}
    assert content["source"]["sha256"] == reading.tracing.source.sha256


def test_same_reading_gives_the_same_bytes():
    assert to_json(made.reading()) == to_json(made.reading())


@pytest.mark.parametrize("text", ["", "{", "[]", '{"format": "another"}', "\N{SNOWMAN}"])
def test_other_files_are_refused_in_one_line(tmp_path, text):
    path = tmp_path / "page.reading.json"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(UnreadableFile) as caught:
        load_document(path)
    assert str(caught.value).startswith("page.reading.json: it ")
    assert "\n" not in str(caught.value)


def test_settled_values_are_plain_and_finite(tmp_path):
    reading = made.reading()
    beat = replace(reading.beat, mv=reading.beat.mv * float("nan"))
    content = document(replace(reading, beat=beat))
    assert set(content["beat"]["mv"]["V1"]) == {None}
