"""CSV files of survey receivers. All positions are invented."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import numpy as np
import pytest
from pyproj import Transformer

from fieldround.rounds.errors import Fault
from fieldround.rounds.photos import PhotoFolder
from fieldround.rounds.track_settings import TrackSettings
from fieldround.rounds.track_sheets import PointSheet, read_positions, seconds_of

START = datetime(2026, 5, 14, 9, 10, tzinfo=UTC).timestamp()


def read(
    tmp_path: Path, text: str, settings: TrackSettings | None = None,
    folder: PhotoFolder | None = None,
) -> tuple[PointSheet, list[Fault]]:  # fmt: skip
    path = tmp_path / "pole.csv"
    path.write_text(text, encoding="utf-8")
    faults: list[Fault] = []
    return read_positions(path, settings or TrackSettings(), folder, faults), faults


def test_epochs_in_degrees(tmp_path: Path) -> None:
    sheet, faults = read(
        tmp_path,
        "Time,Latitude,Longitude,Ellipsoidal height,sd,vrms,satellites\n"
        "2026-05-14T09:10:01Z,52.0001,13.0,80.5,0.012,0.02,14\n"
        "2026-05-14T09:10:00Z,52.0,13.0,80.4,,,13\n",
    )
    assert faults == []
    track = sheet.track
    assert track is not None
    assert track.seconds.tolist() == [START, START + 1.0]
    assert track.geodetic[1].tolist() == [13.0, 52.0001, 80.5]
    assert track.sd_m.tolist() == [5.0, 0.012]
    assert track.height_sd_m[1] == 0.02
    assert (track.altitude_is, track.name) == ("ellipsoid", "tracks/pole.csv")


def test_epochs_in_any_crs_with_named_columns(tmp_path: Path) -> None:
    east, north = Transformer.from_crs(4326, 25833, always_xy=True).transform(13.0, 52.0)
    settings = TrackSettings(
        crs="EPSG:25833", utc_offset_min=120.0, time_column="Epoche", east_column="Rechts",
        north_column="Hoch", height_column="NHN elevation", sd_column="Lage",
    )  # fmt: skip
    text = "Epoche;Rechts;Hoch;NHN elevation;Lage\n"
    text += f"14.05.2026 11:10:00,25;{east:.3f};{north:.3f};41,2;0,011\n".replace(
        f"{east:.3f}", f"{east:.3f}".replace(".", ",")
    )
    sheet, faults = read(tmp_path, text, settings)
    assert faults == []
    assert sheet.track is not None
    assert sheet.track.seconds.tolist() == [START + 0.25]
    assert sheet.track.geodetic[0, :2] == pytest.approx([13.0, 52.0], abs=1e-8)
    assert sheet.track.geodetic[0, 2] == 41.2
    assert sheet.track.altitude_is == "sea level"
    assert sheet.track.sd_m.tolist() == [0.011]


def test_one_position_a_photo(tmp_path: Path) -> None:
    (tmp_path / "photos").mkdir()
    for name in ("a.jpg", "b.JPG"):
        (tmp_path / "photos" / name).write_bytes(b"x")
    folder = PhotoFolder(tmp_path / "photos")
    sheet, faults = read(
        tmp_path,
        "photo,lon,lat,h,sd\na.jpg,13.0,52.0,80.0,0.015\nb.jpg,13.0001,52.0,,\n"
        ",13.2,52.0,,\nc.jpg,13.2,52.0,,\n",
        folder=folder,
    )
    assert set(sheet.points) == {"a.jpg", "b.JPG"}
    assert sheet.points["a.jpg"].horizontal_sd_m == 0.015
    assert sheet.points["a.jpg"].source == "tracks/pole.csv"
    assert sheet.points["b.JPG"].altitude_m is None
    (fault,) = faults
    assert (fault.file, fault.row, fault.value) == ("pole.csv", 5, "c.jpg")


@pytest.mark.parametrize(
    ("text", "settings", "said"),
    [
        ("time,lat\n2026-05-14T09:10:00Z,52\n", {}, "no column holds the easting"),
        ("east,north\n1,2\n", {}, "needs a column of times, or one of photo names"),
        ("time,east,north\n2026-05-14T09:10:00Z,400000,5700000\n", {}, "these are not degrees"),
        ("time,lon,lat\n2026-05-14T09:10:00Z,13,95\n", {}, "is no place on earth"),
        ("time,lon,lat\n2026-05-14,13,52\n", {}, "a time is missing"),
        ("time,lon,lat\n5/14/26 9:10,13,52\n", {}, "write date and time such as"),
        ("time,lon,lat\n2026-05-14T09:10:00Z,x,52\n", {}, "write a number"),
        ("time,lon,lat,sd\n2026-05-14T09:10:00Z,13,52,-1\n", {}, "above 0"),
        ("time,lon,lat\n2026-05-14T09:10:00Z,13,52\n", {"sd_column": "Sigma"},
         "sd_column in round.toml names"),
        ("", {}, "the file is empty"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_a_fault_with_its_remedy(
    tmp_path: Path, text: str, settings: dict[str, str], said: str
) -> None:
    _, faults = read(tmp_path, text, TrackSettings(**settings))  # type: ignore[arg-type]
    assert len(faults) == 1
    assert faults[0].file == "pole.csv"
    assert said in faults[0].remedy


def test_a_date_column_beside_the_time(tmp_path: Path) -> None:
    sheet, faults = read(tmp_path, "date,time,lon,lat\n2026/05/14,09:10:00.5,13,52\n")
    assert faults == []
    assert sheet.track is not None
    assert sheet.track.seconds.tolist() == [START + 0.5]


@pytest.mark.parametrize(
    "written",
    [
        "2026-05-14T09:10:00Z", "2026-05-14 09:10:00", "2026/05/14 09:10:00.000000000",
        "2026-05-14T11:10:00+02:00", "14.05.2026 09:10:00", "2026-05-14 09:10:00 UTC",
        f"{START:.0f}", f"{START:.1f}", "20260514T091000Z",
    ],
)  # fmt: skip
def test_times_as_receivers_write_them(written: str) -> None:
    assert seconds_of(written) == START


def test_a_time_without_offset_is_in_the_stated_zone() -> None:
    zone = timezone(timedelta(hours=2))
    assert seconds_of("2026-05-14 11:10:00", zone) == START
    assert seconds_of("2026-05-14T09:10:00Z", zone) == START


def test_a_blank_time_leaves_its_line_out(tmp_path: Path) -> None:
    sheet, faults = read(tmp_path, "time,lon,lat\n,13,52\n2026-05-14T09:10:00Z,13,52\n")
    assert faults == []
    assert sheet.track is not None
    assert len(sheet.track.seconds) == 1
    nothing, _ = read(tmp_path, "time,lon,lat\n,13,52\n")
    assert nothing.notes == ("tracks/pole.csv holds no position",)


def test_arrays_of_a_track_belong_together(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    order = rng.permutation(20)
    lines = [f"{START + k:.0f},{13 + 1e-5 * k:.6f},52,{k}" for k in order]
    sheet, _ = read(tmp_path, "time,lon,lat,h\n" + "\n".join(lines) + "\n" + lines[0] + "\n")
    assert sheet.track is not None
    assert sheet.track.geodetic[:, 2].tolist() == list(range(20))
