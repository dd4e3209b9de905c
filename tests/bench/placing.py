"""How often true positions lie inside their 95 % ellipses, by grade of the fixes and by place.

Run: python tests/bench/placing.py [rounds a grade]. The rounds are invented, see
tests/place/invented.py; half of the RTK rounds have no compass.
"""

from __future__ import annotations

import sys
from collections import Counter
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from fieldround.geometry.earth import enu_from_geodetic
from fieldround.place.baselines import gnss_baselines
from fieldround.place.ellipses import CHI_SQUARE_95
from fieldround.place.placing import place_round
from tests.place.invented import GRADES, PLACES, simulated_round


def covered(grade: str, rounds: int, seed: int = 2026) -> tuple[Counter[str], Counter[str]]:
    """Objects inside their ellipse and objects in all, by place, over simulated rounds."""
    rng = np.random.default_rng(seed)
    inside: Counter[str] = Counter()
    whole: Counter[str] = Counter()
    places = list(PLACES.items())
    for k in range(rounds):
        name, at = places[k % len(places)]
        compass = grade != "RTK" or (k // len(places)) % 2 == 0
        made = simulated_round(rng, at, GRADES[grade], 1 + k % 3, compass)
        placed = place_round(made.round, made.frames, gnss_baselines(made.round))
        assert placed is not None
        for thing, (lon, lat) in made.truth.items():
            point = placed.objects[thing]
            origin = np.array([point.longitude_deg, point.latitude_deg, 0.0])
            off = enu_from_geodetic(np.array([[lon, lat, 0.0]]), origin)[0, :2]
            square = float(off @ np.linalg.solve(point.cov_m2, off))
            inside[name] += int(square <= CHI_SQUARE_95)
            whole[name] += 1
    return inside, whole


def main() -> None:
    """Print the coverage of every grade and place."""
    rounds = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    for grade in GRADES:
        inside, whole = covered(grade, rounds)
        share = 100.0 * sum(inside.values()) / sum(whole.values())
        print(f"{grade}: {share:.1f} % of {sum(whole.values())} objects in {rounds} rounds")
        for name in PLACES:
            print(f"  {name:14s} {100.0 * inside[name] / whole[name]:5.1f} % of {whole[name]}")


if __name__ == "__main__":
    main()
