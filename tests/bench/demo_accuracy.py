"""How near does a run come to the truth of the demo round?

Run:  python tests/bench/demo_accuracy.py [--folder demo_site]
The round is copied to a scratch folder and run there, first without kept ties, then with them.
Prints one line an object, then coverage, errors and seconds. Truth: demo_site/truth.csv.
"""

from __future__ import annotations

import argparse
import csv
import math
import shutil
import sys
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))


@dataclass(frozen=True)
class Compared:
    """One object's result beside its truth; None where there is no figure."""

    object: str
    kind: str
    verdict: str
    true_m: float
    found_m: float | None
    sd_m: float | None
    inside: bool
    reason: str


def compared(results: Path, truth: Path) -> list[Compared]:
    """Rows of results.csv beside truth.csv, in the order of the results."""
    with truth.open(encoding="utf-8") as file:
        true = {row["object"]: float(row["diameter_m"]) for row in csv.DictReader(file)}
    out = []
    with results.open(encoding="utf-8-sig") as file:
        for row in csv.DictReader(file):

            def number(name: str, row: dict[str, str] = row) -> float | None:
                return float(row[name]) if row[name] else None

            low, high = number("diameter_lo_m"), number("diameter_hi_m")
            size = true[row["object"]]
            out.append(
                Compared(
                    row["object"],
                    row["kind"],
                    row["verdict"],
                    size,
                    number("diameter_m"),
                    number("diameter_sd_m"),
                    (low is None or low <= size) and (high is None or size <= high),
                    row["reasons"],
                )
            )
    return out


def rms_error(rows: list[Compared]) -> float:
    """Root mean square of the relative errors of the accepted objects."""
    errors = [r.found_m / r.true_m - 1.0 for r in rows if r.verdict == "accept" and r.found_m]
    return math.sqrt(sum(e * e for e in errors) / len(errors))


def main() -> None:
    """Run, compare, print."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--folder", type=Path, default=ROOT / "demo_site")
    options = parser.parse_args()
    from fieldround.cli.main import main as fieldround

    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch) / "round"
        shutil.copytree(options.folder, folder, ignore=shutil.ignore_patterns("out", "*.py"))
        seconds = []
        for _ in range(2):
            started = time.perf_counter()
            try:
                fieldround(["run", str(folder), "--quiet"], standalone_mode=True)
            except SystemExit as ended:
                if ended.code:
                    raise
            seconds.append(time.perf_counter() - started)
        rows = compared(folder / "out" / "results.csv", options.folder / "truth.csv")
    print(
        f"{'object':8}{'kind':9}{'verdict':11}{'true mm':>9}{'found mm':>10}{'error':>8}{'sds':>7}"
    )
    for r in rows:
        if r.found_m is None or not r.sd_m:
            print(f"{r.object:8}{r.kind:9}{r.verdict:11}{1000 * r.true_m:9.1f}  {r.reason[:60]}")
            continue
        error, sds = r.found_m / r.true_m - 1.0, (r.found_m - r.true_m) / r.sd_m
        print(
            f"{r.object:8}{r.kind:9}{r.verdict:11}{1000 * r.true_m:9.1f}{1000 * r.found_m:10.1f}"
            f"{100 * error:+7.2f}%{sds:+7.2f}{'' if r.inside else '  outside its interval'}"
        )
    accepted = [r for r in rows if r.verdict == "accept"]
    print(
        f"accepted {len(accepted)} of {len(rows)}; inside their 95 % interval "
        f"{sum(r.inside for r in accepted)}; root mean square error {100 * rms_error(rows):.2f} %"
    )
    print(f"seconds: first run {seconds[0]:.1f}, with kept ties {seconds[1]:.1f}")


if __name__ == "__main__":
    main()
