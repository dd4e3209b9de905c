"""GNSS baselines against geodesics.

First the package geographiclib itself is held against published lines: C. F. F. Karney, "Test set
for geodesics" (2010, doi 10.5281/zenodo.32156), as quoted in GeographicLib's geodtest.c. Then our
chords and azimuths, over lengths a pair can have, are held against it.
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldround.place.baselines import gnss_baselines
from fieldround.rounds.model import Pair
from tests.place.invented import PLACES, a_photo, a_round

geodesic = pytest.importorskip("geographiclib.geodesic")

# lat1, lon1, azimuth1, lat2, lon2, azimuth2, length (m)
PUBLISHED = [
    (35.60777, -139.44815, 111.098748429560326,
     -11.17491, -69.95921, 129.289270889708762, 8935244.5604818305),
    (55.52454, 106.05087, 22.020059880982801,
     77.03196, 197.18234, 109.112041110671519, 4105086.1713924406),
    (-21.97856, 142.59065, -32.44456876433189,
     41.84138, 98.56635, -41.84359951440466, 8394328.894657671),
]  # fmt: skip


@pytest.mark.parametrize("line", PUBLISHED)
def test_the_reference_gives_the_published_lines(line: tuple[float, ...]) -> None:
    lat1, lon1, azimuth1, lat2, lon2, azimuth2, length = line
    found = geodesic.Geodesic.WGS84.Inverse(lat1, lon1, lat2, lon2)
    assert found["s12"] == pytest.approx(length, abs=1e-8)
    assert (found["azi1"] - azimuth1) == pytest.approx(0.0, abs=1e-12)
    assert (found["azi2"] - azimuth2) == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("place", PLACES)
@pytest.mark.parametrize("length", [2.0, 40.0, 800.0])
@pytest.mark.parametrize("azimuth", [0.0, 77.0, 181.0, 300.0])
def test_a_baseline_is_the_geodesic(place: str, length: float, azimuth: float) -> None:
    lon, lat = PLACES[place]
    line = geodesic.Geodesic.WGS84.Direct(lat, lon, azimuth, length)
    photos = [
        a_photo("a.jpg", lon, lat, altitude_m=0.0, stated_m=0.01),
        a_photo("b.jpg", line["lon2"], line["lat2"], altitude_m=0.0, stated_m=0.01),
    ]
    baseline = gnss_baselines(a_round(photos, [Pair("P1", ("a.jpg", "b.jpg"))]))["P1"]
    # A chord of 800 m is 0.5 micrometres shorter than its arc; the bias taken out is variance
    # across over twice the length.
    across = baseline.length_sd_m**2 + 2 * 0.02**2
    assert baseline.length_m == pytest.approx(np.sqrt(length**2 - across), abs=2e-6)
    turned = (baseline.azimuth_deg - azimuth + 180.0) % 360.0 - 180.0
    assert turned == pytest.approx(0.0, abs=1e-6)
