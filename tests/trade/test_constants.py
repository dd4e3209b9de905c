from __future__ import annotations

import pytest

from fieldround.rounds.errors import SheetsError
from fieldround.trade.constants import load_constants
from tests.trade.made import changed


def test_every_constant_has_a_source():
    for constant in load_constants().of("lists", "forestry", "utility", "municipal", "tanks"):
        assert len(constant.source) > 8, constant.key


def test_the_rounds_file_takes_the_place_of_ours(tmp_path):
    constants = changed(
        tmp_path,
        "[forestry]\nclass_width_cm = 4\n"
        "[forestry.form_factor]\nvalue = 0.45\nsource = 'yield table 12'\n"
        "[utility]\ntop_classes = { big = 90, small = 40 }\n"
        "[forestry.volume_by_species]\noak = 'd_m'\n",
    )
    assert constants.number("forestry.class_width_cm") == 4
    assert constants["forestry.class_width_cm"].source == "set by the user"
    assert constants["forestry.class_width_cm"].unit == "cm"
    assert constants["forestry.form_factor"].source == "yield table 12"
    assert constants["utility.top_classes"].value == {"big": 90, "small": 40}
    assert constants.under("forestry.volume_by_species")["oak"].value == "d_m"
    assert constants.number("tanks.level_step_pct") == 10.0


@pytest.mark.parametrize(
    "text, words",
    [
        ("[forestry]\nclass_widht_cm = 4", "class_widht_cm.*not known"),
        ("[forestry]\nclass_width_cm = 'wide'", "'wide'.*number"),
        ("[forestry]\nclass_width_cm = 0", "more than zero"),
        ("[forestry]\nform_factor = -1", "zero or more"),
        ("[forestry]\nclass_rule = 'up'", "nearest"),
        ("[forestry]\nvolume = 3", "text"),
        ("[municipal]\nseries = 1", "list"),
        ("[utility]\ntop_classes = 3", "table"),
        ("forestry = [", "not TOML"),
        ("[municipal]\nseries = [9]", "must be of 1, 2, 3"),
        ("[municipal]\ntube_series_1 = ['wide']", "numbers"),
        ("[utility]\ntop_classes = { a = 'x' }", "number"),
        ("[lists]\nverdicts = ['good']", "'accept', 'remeasure'"),
        ("[lists]\nverdicts = 'accept'", "list"),
        ("[tanks]\nlevel_step_pct = 0", "more than zero"),
        ("[tanks]\nshell_thickness_mm = nan", "number"),
    ],
)
def test_faults_are_said_with_key_and_remedy(tmp_path, text, words):
    with pytest.raises(SheetsError, match=words):
        changed(tmp_path, text)


def test_all_faults_are_said_at_once(tmp_path):
    with pytest.raises(SheetsError) as told:
        changed(tmp_path, "[forestry]\nx = 1\ny = 2\nclass_width_cm = 'z'\n")
    assert len(told.value.faults) == 3
