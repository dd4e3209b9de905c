"""docs/sheets.md names everything that the readers know."""

from __future__ import annotations

from pathlib import Path

import pytest

from fieldround.rounds import cards, check_sheet, landmarks, marks, objects, pairs, settings
from fieldround.rounds.exif_cards import DISTORTION_SD, FOCAL_SD, GUESS_ANGLE_DEG, GUESS_SD
from fieldround.rounds.model import KINDS, MARK_NAMES, Settings

PAGE = Path(__file__).resolve().parents[2] / "docs" / "sheets.md"


def chapter(title: str) -> str:
    """The text of one chapter of the page."""
    return PAGE.read_text(encoding="utf-8").split(f"\n## {title}\n")[1].split("\n## ")[0]


@pytest.mark.parametrize(
    ("title", "words"),
    [
        ("pairs.csv", pairs.COLUMNS),
        ("objects.csv", (*objects.COLUMNS, *KINDS)),
        ("marks.csv", (*marks.COLUMNS, *MARK_NAMES)),
        ("checks.csv", check_sheet.COLUMNS),
        ("landmarks.csv", landmarks.COLUMNS),
        ("cameras.toml", cards.KEYS),
        ("round.toml", [key for keys in settings.SECTIONS.values() for key in keys]),
        ("round.toml", [f"[{section}]" for section in settings.SECTIONS]),
    ],
)
def test_every_word_is_explained(title: str, words: list[str]) -> None:
    text = chapter(title)
    assert [word for word in words if f"`{word}`" not in text] == []


@pytest.mark.parametrize(
    ("title", "columns", "required"),
    [
        ("pairs.csv", pairs.COLUMNS, pairs.REQUIRED),
        ("objects.csv", objects.COLUMNS, objects.REQUIRED),
        ("marks.csv", marks.COLUMNS, marks.REQUIRED),
        ("checks.csv", check_sheet.COLUMNS, check_sheet.REQUIRED),
        ("landmarks.csv", landmarks.COLUMNS, landmarks.REQUIRED),
    ],
)
def test_needed_columns_are_marked(
    title: str, columns: tuple[str, ...], required: tuple[str, ...]
) -> None:
    rows = [line for line in chapter(title).splitlines() if line.startswith("| `")]
    for column in columns:
        row = next(line for line in rows if f"`{column}`" in line.split("|")[1])
        assert ("*needed*" in row) == (column in required), column


def test_stated_defaults_are_those_of_the_program() -> None:
    default = Settings()
    text = chapter("round.toml")
    for value in (
        default.mark_sd_px,
        default.tape_sd_m,
        default.tolerance_pct,
        default.agreement_limit,
        default.found_ties_max,
    ):
        assert f"| {value:g} |" in text
    assert f'`"{default.kind}"`' in text
    assert default.roundness_pct == {"trunk": 1.0}
    assert "`trunk = 1`" in text
    assert f"{objects.KNOWN_SD:.1%}".replace("%", " %") in chapter("objects.csv")
    assert f"{objects.KNOWN_SD_LEAST_M * 1000:g} mm at least" in chapter("objects.csv")
    assert f"at most {pairs.LONGEST_TAPE_M:g}" in chapter("pairs.csv")
    text = chapter("cameras.toml")
    assert f"within {cards.FOCAL_MATCH:.0%}".replace("%", " %") in text
    assert f"sd; {cards.FOCAL_SD:.0%} of it".replace("%", " %") in text
    assert f"core sd {FOCAL_SD:.0%}".replace("%", " %") in text
    assert f"{GUESS_ANGLE_DEG:g} degrees" in text
    assert f"sd {GUESS_SD:.0%}".replace("%", " %") in text
    assert f"`[{', '.join(f'{sd:g}' for sd in DISTORTION_SD)}]`" in text
