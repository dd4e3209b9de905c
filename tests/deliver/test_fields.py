from __future__ import annotations

from pathlib import Path

import pytest

from fieldround.deliver.fields import (
    BY_NAME,
    COORDINATE_FIELDS,
    OBJECT_FIELDS,
    TABLES,
    page,
    passed_through,
)

PAGE = Path(__file__).parents[2] / "docs" / "fields.md"
# The order that the users of the layer were promised.
ORDER = (
    "object kind label pair views diameter_m diameter_sd_m diameter_lo_m diameter_hi_m "
    "reading_a_m reading_b_m agreement girth_m ref_height_m ground_diameter_m taper_mm_per_m "
    "height_m height_sd_m lean_deg lean_sd_deg lean_to_deg range_m baseline_m baseline_sd_m "
    "baseline_from orientation_from heading_from position_sd_m verdict reasons photo_a photo_b "
    "taken_at"
)
PROMISED = ORDER.split()
REMAKE = "run: python -m fieldround.deliver.fields > docs/fields.md"


def test_the_page_of_fields_is_that_of_the_program():
    assert PAGE.read_text("utf-8") == page(), REMAKE


def test_objects_carry_the_promised_fields_in_order():
    assert [f.name for f in OBJECT_FIELDS][: len(PROMISED)] == PROMISED


def test_layers_and_tables_are_the_promised_ones():
    assert [t.name for t in TABLES if t.geometry] == [
        "objects",
        "sections",
        "stations",
        "sightlines",
        "ellipses",
    ]
    assert [t.name for t in TABLES if not t.geometry] == [
        "readings",
        "budget",
        "pairs",
        "checks",
        "round",
    ]


@pytest.mark.parametrize("table", TABLES, ids=lambda t: t.name)
def test_every_field_is_documented_once(table):
    names = [f.name.casefold() for f in table.fields]
    assert len(names) == len(set(names))
    for field in table.fields:
        assert field.alias
        assert field.description
        assert field.type in ("TEXT", "INTEGER", "REAL", "DATETIME")
        # A unit in the name and a unit in the description may not contradict each other.
        for end, unit in {"_m": "m", "_deg": "degree", "_pct": "%", "_px": "px"}.items():
            if field.name.endswith(end) and not field.name.endswith("_per_m"):
                assert field.unit == unit


def test_columns_of_the_sheets_give_way_to_ours():
    taken = [f.name for f in BY_NAME["objects"].fields + COORDINATE_FIELDS]
    fields = passed_through(
        ["note", "VERDICT", "verdict_given", "fid", "Note", "easting", "", "  ", "a\nb"], taken
    )
    assert [f.name for f in fields.values()] == [
        "note",
        "VERDICT_given",
        "verdict_given_given",
        "fid_given",
        "Note_given",
        "easting_given",
        "column",
        "column_given",
        "a b",
    ]
    assert fields["VERDICT"].alias == "VERDICT"
