"""Photos placed by time: interpolation, clocks, arms, whole folders. All walks are invented."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import numpy as np
import pytest

from fieldround.geometry.earth import enu_from_geodetic, geodetic_from_enu
from fieldround.rounds.load import load_round
from fieldround.rounds.model import Fix, Photo
from fieldround.rounds.track_settings import TrackSettings
from fieldround.rounds.tracks import Path2D, Track, fix_on_path, make_track, place_on_tracks
from tests.place.invented import a_photo
from tests.rounds.folders import faults_of, write_round

ORIGIN = np.array([180.0, -17.8, 0.0])
START = datetime(2026, 5, 14, 9, 0, tzinfo=UTC)


def track(
    seconds: Sequence[float] | np.ndarray, xy: np.ndarray, sd: float = 0.02, name: str = "t.nmea"
) -> Track:
    xyz = np.column_stack([xy, np.zeros(len(xy))])
    geodetic = geodetic_from_enu(xyz, ORIGIN)
    geodetic[:, 2] = 40.0 + 0.1 * np.arange(len(xy))
    made = make_track(
        f"tracks/{name}", START.timestamp() + np.asarray(seconds, dtype=float), geodetic,
        np.full(len(xy), sd), np.full(len(xy), 2 * sd), "ellipsoid",
    )  # fmt: skip
    assert made is not None
    return made


def at(seconds: float, name: str = "a.jpg", **given: object) -> Photo:
    photo = a_photo(name, seconds=None)
    return replace(photo, taken_at=START + timedelta(seconds=seconds), **given)  # type: ignore[arg-type]


def placed(
    photos: Sequence[Photo], tracks: Sequence[Track], settings: TrackSettings | None = None
) -> tuple[list[Fix | None], list[str]]:
    named = {photo.name: photo for photo in photos}
    found, notes = place_on_tracks(named, tracks, {}, settings or TrackSettings(clock_offset_s=0.0))
    return [found[photo.name].fix for photo in photos], notes


def where(fix: Fix | None) -> np.ndarray:
    assert fix is not None
    lon = fix.longitude_deg if fix.longitude_deg > 0 else fix.longitude_deg + 360.0
    return enu_from_geodetic(np.array([[lon, fix.latitude_deg, 0.0]]), ORIGIN)[0, :2]


STRAIGHT = np.array([[0.0, 0.0], [10.0, 0.0], [20.0, 0.0], [30.0, 0.0]])


def test_between_two_epochs_on_both_sides_of_longitude_180() -> None:
    line = track([0, 10, 20, 30], STRAIGHT - [15.0, 0.0])
    (fix,), _ = placed([at(14.0)], [line])
    assert where(fix) == pytest.approx([-1.0, 0.0], abs=1e-6)
    assert fix is not None
    assert fix.altitude_m == pytest.approx(40.14)
    assert (fix.source, fix.altitude_is) == ("tracks/t.nmea", "ellipsoid")


def test_the_sd_grows_with_the_gap_the_bend_and_the_clock() -> None:
    def sd(xy: np.ndarray, step: float, when: float, clock: float = 0.0) -> float:
        line = track(step * np.arange(len(xy)), xy)
        (fix,), _ = placed([at(when)], [line], TrackSettings(clock_offset_s=clock))
        assert fix is not None
        assert fix.horizontal_sd_m is not None
        return fix.horizontal_sd_m

    standing = np.zeros((4, 2))
    assert sd(standing, 1.0, 1.5) == pytest.approx(0.02, abs=0.005)
    assert sd(standing, 20.0, 30.0) > 1.0
    corner = np.array([[0.0, 0.0], [1.2, 0.0], [1.2, 1.2], [1.2, 2.4]])
    walking = np.array([[0.0, 0.0], [1.2, 0.0], [2.4, 0.0], [3.6, 0.0]])
    when = np.array([START.timestamp() + 1.5])
    _, bent, _ = Path2D(track(range(4), corner)).at(when)
    _, straight, _ = Path2D(track(range(4), walking)).at(when)
    assert bent[0] > 10.0 * straight[0]
    # A given clock is good to half a second: 0.6 m at walking pace.
    assert sd(walking, 1.0, 1.5) == pytest.approx(0.6, rel=0.2)


def test_interpolation_sds_cover_a_walk_that_is_known() -> None:
    """A smooth walk kept every 4 s, asked in between: 19 of 20 within 2 sds of each axis."""
    when = np.arange(0.0, 400.0, 0.5)
    walk = np.column_stack([30 * np.sin(when / 23.0), 20 * np.sin(when / 11.0)])
    line = track(when[::8], walk[::8], sd=0.01)
    photos = [at(float(t), f"{k}.jpg") for k, t in enumerate(when[8:-16:7])]
    path = Path2D(line)
    misses = []
    for photo, true in zip(photos, walk[8:-16:7], strict=True):
        # Without the clock's share: the times are exact.
        fix = fix_on_path(path, (photo.taken_at or START).timestamp(), 0.0)
        assert fix is not None
        assert fix.horizontal_sd_m is not None
        misses.append(np.abs(where(fix) - true) / fix.horizontal_sd_m)
    assert np.mean(np.array(misses) < 2.0) > 0.95
    assert np.mean(np.array(misses) > 0.2) > 0.1


def test_gaps_and_ends_are_not_bridged() -> None:
    line = track([0, 10, 100, 110], STRAIGHT)
    fixes, notes = placed([at(50.0), at(-5.0, "b.jpg"), at(10.0, "c.jpg")], [line])
    assert fixes[0] is None
    assert fixes[1] is None
    assert where(fixes[2]) == pytest.approx([10.0, 0.0], abs=1e-6)
    assert any("no track covers its time: a.jpg, b.jpg" in note for note in notes)


def test_of_two_tracks_the_surer_wins_and_replaces_the_exif() -> None:
    rough, fine = track([0, 10], STRAIGHT[:2], 4.0), track([0, 10], STRAIGHT[:2], 0.02, "f.csv")
    photo = at(5.0, fix=Fix(0.0, 0.0, horizontal_sd_m=0.001))
    (fix,), notes = placed([photo], [rough, fine])
    assert fix is not None
    assert fix.source == "tracks/f.csv"
    assert "1 photo was placed by tracks/f.csv" in notes


def test_a_sheet_of_photo_positions_goes_before_the_tracks() -> None:
    line = track([0, 10], STRAIGHT[:2])
    point = Fix(13.0, 52.0, 40.0, 0.01, 0.02, source="tracks/points.csv")
    settings = TrackSettings(arm_m=(0.1, 0.2, -0.3), arm_sd_m=0.05)
    found, _ = place_on_tracks({"a.jpg": at(5.0)}, [line], {"a.jpg": point}, settings)
    fix = found["a.jpg"].fix
    assert fix is not None
    assert fix.longitude_deg == 13.0
    assert fix.altitude_m == pytest.approx(39.7)
    assert fix.arm_m == (0.1, 0.2)
    assert fix.horizontal_sd_m == pytest.approx(np.hypot(0.01, 0.05))


# Clocks ---------------------------------------------------------------------------------------


def walked(
    offset_s: float, zone: timezone | None, sd: float = 3.0, photos: int = 14, seed: int = 1
) -> tuple[list[Photo], Track, np.ndarray]:
    """A walk with stops at which photos are taken by a clock that is `offset_s` behind."""
    rng = np.random.default_rng(seed)
    xy, times, stops = [np.zeros(2)], [0.0], []
    for _ in range(photos):
        aim = rng.uniform(0.0, 2.0 * np.pi)
        for _ in range(int(rng.integers(25, 60))):
            xy.append(xy[-1] + 1.3 * np.array([np.sin(aim), np.cos(aim)]))
            times.append(times[-1] + 1.0)
        stops.append((times[-1] + 6.0, xy[-1]))
        for _ in range(12):
            xy.append(xy[-1])
            times.append(times[-1] + 1.0)
    found = []
    common = rng.normal(0.0, sd * 0.8, 2)
    for k, (when, spot) in enumerate(stops):
        lon, lat, _ = geodetic_from_enu(
            np.array([[*(spot + common + rng.normal(0.0, sd * 0.6, 2)), 0.0]]), ORIGIN
        )[0]
        taken = START + timedelta(seconds=when - offset_s)
        local = taken.astimezone(zone) if zone is not None else taken.replace(tzinfo=None)
        found.append(replace(at(0.0, f"{k}.jpg", fix=Fix(lon, lat, 40.0, sd)), taken_at=local))
    return found, track(times, np.array(xy)), np.array([spot for _, spot in stops])


@pytest.mark.parametrize("offset_s", [0.0, 37.0, -140.0])
def test_the_clock_is_found_from_photos_with_a_fix_of_their_own(offset_s: float) -> None:
    photos, line, spots = walked(offset_s, UTC)
    fixes, notes = placed(photos, [line], TrackSettings())
    assert np.abs(np.array([where(f) for f in fixes]) - spots).max() < 1.5
    told = next(note for note in notes if note.startswith("the clock of"))
    found = float(told.split(": ")[1].split(" s ")[0])
    sd = float(told.split("(sd ")[1].split(" s)")[0])
    assert abs(found - offset_s) < 3.0 * sd
    assert sd < 10.0


def test_a_clock_in_local_time_without_its_zone_is_found() -> None:
    photos, line, spots = walked(-7200.0 + 11.0, None)
    fixes, _ = placed(photos, [line], TrackSettings())
    assert np.abs(np.array([where(f) for f in fixes]) - spots).max() < 1.5


def test_a_zone_in_the_exif_is_no_offset() -> None:
    photos, line, spots = walked(0.0, timezone(timedelta(hours=5, minutes=45)))
    fixes, _ = placed(photos, [line], TrackSettings())
    assert np.abs(np.array([where(f) for f in fixes]) - spots).max() < 1.5


def test_found_clocks_are_as_sure_as_they_say() -> None:
    ratios = []
    for seed in range(12):
        photos, line, _ = walked(20.0, UTC, seed=seed)
        _, notes = placed(photos, [line], TrackSettings())
        told = next(note for note in notes if note.startswith("the clock of"))
        found = float(told.split(": ")[1].split(" s ")[0])
        ratios.append((found - 20.0) / float(told.split("(sd ")[1].split(" s)")[0]))
    assert np.sqrt(np.mean(np.square(ratios))) < 1.5


def test_local_time_that_nothing_explains_places_nothing_and_says_what_to_write() -> None:
    photos, line, _ = walked(0.0, None)
    bare = [replace(photo, fix=None) for photo in photos]
    fixes, notes = placed(bare, [line], TrackSettings())
    assert all(fix is None for fix in fixes)
    assert any("write clock_offset_s under [tracks]" in note for note in notes)
    fixes, _ = placed(bare, [line], TrackSettings(clock_offset_s=0.0))
    assert all(fix is not None for fix in fixes)


def test_a_clock_with_zone_but_without_fixes_is_believed_and_said() -> None:
    photos, line, spots = walked(0.0, UTC)
    bare = [replace(photo, fix=None) for photo in photos]
    fixes, notes = placed(bare, [line], TrackSettings())
    assert np.abs(np.array([where(f) for f in fixes]) - spots).max() < 1.5
    assert any("was believed" in note for note in notes)


def test_fixes_of_another_town_find_no_clock() -> None:
    photos, line, _ = walked(0.0, UTC)
    elsewhere = [
        replace(p, fix=replace(p.fix, latitude_deg=-18.5)) if p.fix else p for p in photos
    ]
    _, notes = placed(elsewhere, [line], TrackSettings())
    assert any("could not be compared with the track" in note for note in notes)


def test_a_photo_without_time_keeps_its_own_fix() -> None:
    line = track([0, 10], STRAIGHT[:2])
    photo = a_photo("a.jpg", 13.0, 52.0, seconds=None)
    (fix,), notes = placed([photo], [line])
    assert fix == photo.fix
    assert any("the photo has no time" in note for note in notes)


# A round's folder -----------------------------------------------------------------------------


def test_a_round_with_a_track_of_photo_positions(tmp_path: Path) -> None:
    write_round(tmp_path, round_toml="[tracks]\narm_m = [0.0, 0.1, -0.2]\n")
    (tmp_path / "tracks").mkdir()
    (tmp_path / "tracks" / "points.csv").write_text("photo,lon,lat,h,sd\na.jpg,13,52,80,0.01\n")
    (tmp_path / "tracks" / "broken.gpx").write_text("<gpx")
    (tmp_path / "tracks" / "readme.pdf").write_text("x")
    found = load_round(tmp_path)
    fix = found.photos["a.jpg"].fix
    assert fix is not None
    assert (fix.longitude_deg, fix.altitude_m, fix.arm_m) == (13.0, 79.8, (0.0, 0.1))
    assert any("broken.gpx cannot be read as GPX" in note for note in found.notes)
    assert any("readme.pdf was not read" in note for note in found.notes)


def test_faults_of_track_sheets_and_settings_stop_the_round(tmp_path: Path) -> None:
    write_round(
        tmp_path,
        round_toml='[tracks]\ncrs = "EPSG:99"\narm_m = [1, 2]\nutc_offset = "5"\ndate = "May"\n',
    )
    (tmp_path / "tracks").mkdir()
    (tmp_path / "tracks" / "points.csv").write_text("photo,lon,lat\nz.jpg,13,52\n")
    found = [(fault.file, fault.column) for fault in faults_of(tmp_path)]
    assert found == [
        ("round.toml", "crs"), ("round.toml", "arm_m"), ("round.toml", "utc_offset"),
        ("round.toml", "date"), ("points.csv", "photo"),
    ]  # fmt: skip
