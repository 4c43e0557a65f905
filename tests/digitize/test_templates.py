"""The table of arrangements: every lead once, in the order of the trade."""

import pytest

from digitize.templates import CABRERA, TEMPLATES
from digitize.tracing import LEADS

WHOLE = [t for t in TEMPLATES if t.rows * t.columns == 12]


@pytest.mark.parametrize("template", WHOLE, ids=lambda t: f"{t.name} {t.leads[0][0]}")
def test_twelve_panels_hold_the_twelve_leads_once(template):
    names = [lead.lstrip("-") for row in template.leads for lead in row]
    # V7 to V9 are V4 to V6 moved to the back (common practice).
    names = [{"V7": "V4", "V8": "V5", "V9": "V6"}.get(name, name) for name in names]
    assert sorted(names) == sorted(LEADS)


@pytest.mark.parametrize("template", TEMPLATES, ids=lambda t: f"{t.name} {t.leads[0][0]}")
def test_name_and_length_follow_from_the_rows(template):
    assert template.name == f"{template.rows}x{template.columns}"
    assert all(len(row) == template.columns for row in template.leads)
    # A page shows 10 s, give or take (common practice).
    assert 9.5 <= template.panel_s * template.columns <= 10.5
    assert template.prior <= 0


def test_usual_page_reads_down_its_columns():
    # Common practice: limb leads in two columns, chest leads in two.
    usual = next(t for t in TEMPLATES if t.name == "3x4")
    assert usual.leads == (
        ("I", "aVR", "V1", "V4"),
        ("II", "aVL", "V2", "V5"),
        ("III", "aVF", "V3", "V6"),
    )


def test_cabrera_order_goes_round_the_frontal_plane_in_even_steps():
    # Hexaxial directions (Einthoven, Goldberger); -aVR is aVR turned over: 30 degrees.
    direction_deg = {"I": 0, "II": 60, "III": 120, "aVF": 90, "aVL": -30, "-aVR": 30}
    angles = [direction_deg[lead] for lead in CABRERA]
    assert angles == list(range(-30, 121, 30))


def test_most_common_comes_first():
    assert TEMPLATES[0].prior == max(t.prior for t in TEMPLATES)
