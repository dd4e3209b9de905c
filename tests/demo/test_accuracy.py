"""The demo round run as a user runs it, against its truth."""

import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from fieldround.cli.main import main
from tests.bench.demo_accuracy import compared, rms_error

DEMO = Path(__file__).resolve().parents[2] / "demo_site"


@pytest.fixture(scope="module")
def rows(tmp_path_factory):
    folder = tmp_path_factory.mktemp("demo") / "round"
    shutil.copytree(DEMO, folder, ignore=shutil.ignore_patterns("out", "*.py", "__pycache__"))
    outcome = CliRunner().invoke(main, ["run", str(folder), "--quiet"])
    assert outcome.exit_code == 0, outcome.output
    return compared(folder / "out" / "results.csv", DEMO / "truth.csv")


def test_accepted_diameters_lie_in_their_intervals(rows):
    accepted = [r for r in rows if r.verdict == "accept"]
    assert len(accepted) >= 12
    outside = [r for r in accepted if not r.inside]
    assert len(outside) <= len(accepted) // 16, outside


def test_accepted_diameters_are_good_to_one_and_a_half_percent(rows):
    assert rms_error(rows) <= 0.015


def test_no_accepted_diameter_is_grossly_wrong(rows):
    for r in rows:
        if r.verdict == "accept":
            error = abs(r.found_m - r.true_m)
            assert not (error > 5 * r.sd_m and error > 0.03 * r.true_m), r


def test_the_pair_taken_in_a_hurry_is_not_accepted(rows):
    bad = next(r for r in rows if r.object == "K4")
    assert bad.verdict != "accept"
    assert bad.reason
