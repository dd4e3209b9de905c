"""round.toml: every setting, its default, and every fault with its line."""

from __future__ import annotations

import pickle
from pathlib import Path

import pytest

from fieldround.rounds.errors import Fault
from fieldround.rounds.model import Settings
from fieldround.rounds.settings import default_settings, read_settings


def read(folder: Path, content: str | bytes) -> tuple[Settings, list[Fault]]:
    raw = content.encode("utf-8") if isinstance(content, str) else content
    folder.joinpath("round.toml").write_bytes(raw)
    faults: list[Fault] = []
    return read_settings(folder / "round.toml", faults), faults


def test_a_missing_file_means_the_defaults(tmp_path: Path) -> None:
    faults: list[Fault] = []
    assert read_settings(tmp_path / "round.toml", faults) == Settings() == default_settings()
    assert faults == []


@pytest.mark.parametrize("mark", ["", "\ufeff"])
@pytest.mark.parametrize("ending", ["\n", "\r\n"])
def test_every_setting(tmp_path: Path, mark: str, ending: str) -> None:
    lines = """[round]
title = "Harbour masts"
crew = "two of us"
place = "Inner basin"
crs = 25832
kind = "Mast"
[marks]
sd_px = 1
[tape]
sd_m = 0.01
[tolerance]
diameter_pct = 5
agreement = 2.5
[roundness]
trunk = 1.5
pole = 0
[ties]
most = 300
""".splitlines()
    settings, faults = read(tmp_path, mark + ending.join(lines))
    assert faults == []
    assert settings == Settings(
        title="Harbour masts",
        crew="two of us",
        place="Inner basin",
        crs="EPSG:25832",
        kind="mast",
        mark_sd_px=1.0,
        tape_sd_m=0.01,
        tolerance_pct=5.0,
        agreement_limit=2.5,
        roundness_pct={"trunk": 1.5, "pole": 0.0},
        found_ties_max=300,
    )
    assert pickle.loads(pickle.dumps(settings)) == settings


def test_roundness_of_other_kinds_leaves_the_default_of_trunks(tmp_path: Path) -> None:
    settings, _ = read(tmp_path, "[roundness]\ntank = 0.2\n")
    assert settings.roundness_pct == {**Settings().roundness_pct, "tank": 0.2}


@pytest.mark.parametrize(
    ("content", "row", "key", "value", "word"),
    [
        ("", None, None, None, None),
        ('[round]\ntitel = "x"\n', 2, "titel", "x", "did you mean 'title'"),
        ("[tape]\n\nsd_px = 1\n", 3, "sd_px", "1", "belongs under [marks]"),
        ("round.titel = 1\n", 1, "titel", "1", "did you mean 'title'"),
        ('title = "x"\n', 1, "title", "x", "belongs under [round]"),
        ("colour = 1\n", 1, "colour", "1", "round.title"),
        ("[round]\n[tollerance]\nagreement = 3\n", 2, "tollerance", None, "'tolerance'"),
        ("[[round]]\n", 1, "round", None, "once"),
        ("[round]\ntitle = 3\n", 2, "title", "3", "double quotes"),
        ('[round]\nkind = "tree"\n', 2, "kind", "tree", "trunk"),
        ('[round]\ncrs = "EPSG:1"\n', 2, "crs", "EPSG:1", "EPSG:32633"),
        ("[round]\ncrs = 4326\n", 2, "crs", "4326", "projected"),
        ("[marks]\nsd_px = 0\n", 2, "sd_px", "0", "above 0"),
        ("[marks]\nsd_px = nan\n", 2, "sd_px", "nan", "finite"),
        ("[marks]\nsd_px = true\n", 2, "sd_px", "True", "number"),
        ('[tape]\nsd_m = "5 mm"\n', 2, "sd_m", "5 mm", "without its unit"),
        ("[tape]\nsd_m = -0.005\n", 2, "sd_m", "-0.005", "above 0"),
        ("[tolerance]\ndiameter_pct = 300\n", 2, "diameter_pct", "300", "percentage"),
        ("[tolerance]\nagreement = inf\n", 2, "agreement", "inf", "finite"),
        ("[roundness]\ntrunks = 1\n", 2, "trunks", "1", "did you mean 'trunk'"),
        ("[roundness]\ntrunk = -1\n", 2, "trunk", "-1", "above 0"),
        ("[ties]\nmost = 10.5\n", 2, "most", "10.5", "whole number"),
        ('[round]\ntitle = "x\n', 2, None, 'title = "x', "not TOML"),
        ("[round]\ntitle = Harbour\n", 2, None, "title = Harbour", "not TOML"),
        ("[round]\nagreement: 3\n", 2, None, "agreement: 3", "key = value"),
        (b'[round]\nplace = "K\xf6ln"\n', 2, None, 'place = "K\u00f6ln"', "UTF-8"),
    ],
)
def test_faults(
    tmp_path: Path, content: str | bytes, row: int | None, key: str | None, value: str | None,
    word: str | None,
) -> None:  # fmt: skip
    _, faults = read(tmp_path, content)
    if word is None:
        assert faults == []
        return
    assert [(fault.file, fault.row, fault.column, fault.value) for fault in faults] == [
        ("round.toml", row, key, value)
    ]
    assert word in faults[0].remedy


def test_every_wrong_key_is_told_at_once(tmp_path: Path) -> None:
    _, faults = read(tmp_path, "[marks]\nsd_px = 0\n[tape]\nsd = 1\n[ties]\nmost = -1\n")
    assert [fault.row for fault in faults] == [2, 4, 6]
