"""Declination against the test values published with the World Magnetic Model 2025.

NOAA NCEI and British Geological Survey, WMM2025_TestValues.txt and table 6 of the model's
technical report (A. Chulliat et al., 2025), as quoted in an open test suite; stated to 0.01 degree.
"""

from __future__ import annotations

from datetime import datetime, timedelta

import pytest

from fieldround.place.declination import decimal_year, declination

# decimal year, km, latitude, longitude, declination
PUBLISHED = [
    (2025.0, 0.0, 80.0, 0.0, 1.28),
    (2025.0, 0.0, 0.0, 120.0, -0.16),
    (2025.0, 0.0, -80.0, 240.0, 68.78),
    (2025.0, 100.0, 80.0, 0.0, 0.85),
    (2025.0, 100.0, 0.0, 120.0, -0.15),
    (2025.0, 100.0, -80.0, 240.0, 68.21),
    (2027.5, 0.0, 80.0, 0.0, 2.59),
    (2027.5, 0.0, 0.0, 120.0, -0.24),
    (2027.5, 0.0, -80.0, 240.0, 68.49),
    (2027.5, 100.0, 80.0, 0.0, 2.16),
    (2027.5, 100.0, 0.0, 120.0, -0.23),
    (2027.5, 100.0, -80.0, 240.0, 67.93),
    (2025.0, 18.0, 0.0, 21.0, 1.29),
    (2025.5, 6.0, -36.0, -137.0, 20.28),
]


def at(year: float) -> datetime:
    whole = int(year)
    start = datetime(whole, 1, 1)
    return start + (year - whole) * (datetime(whole + 1, 1, 1) - start)


@pytest.mark.parametrize("row", PUBLISHED)
def test_published_declinations(row: tuple[float, ...]) -> None:
    year, height_km, lat, lon, wanted = row
    found = declination(lon, lat, 1000.0 * height_km, at(year))
    assert found.degrees == pytest.approx(wanted, abs=0.0051)
    assert found.notes == ()
    assert found.model == "WMM2025"


def test_decimal_years() -> None:
    assert decimal_year(datetime(2026, 1, 1)) == 2026.0
    assert decimal_year(datetime(2028, 1, 1) + timedelta(days=183)) == 2028.5


def test_a_date_outside_the_model_is_said_and_less_sure() -> None:
    inside = declination(13.0, 52.0, 40.0, datetime(2029, 6, 1))
    outside = declination(13.0, 52.0, 40.0, datetime(2032, 6, 1))
    assert inside.notes == ()
    (note,) = outside.notes
    assert "2032.4" in note
    assert "2025 to 2030" in note
    assert outside.sd_deg > 2.0 * inside.sd_deg
    before = declination(13.0, 52.0, 40.0, datetime(2004, 6, 1))
    assert "2010 to 2015" in before.notes[0]


def test_no_compass_points_near_the_magnetic_pole() -> None:
    found = declination(139.0, 86.0, 0.0, datetime(2026, 6, 1))
    assert found.degrees is None
    assert "does not point" in found.notes[0]
