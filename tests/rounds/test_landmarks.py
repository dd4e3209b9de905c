"""landmarks.csv, with invented coordinates."""

from __future__ import annotations

from pathlib import Path

import pytest
from pyproj import Transformer

from fieldround.rounds.errors import Fault
from fieldround.rounds.landmarks import UNSTATED_SD_M, read_landmarks
from fieldround.rounds.load import load_round
from fieldround.rounds.model import Landmark, Settings
from tests.rounds.folders import faults_of, write_round


def read(tmp_path: Path, text: str, crs: str | None = None) -> tuple[tuple[Landmark, ...], list]:  # type: ignore[type-arg]
    path = tmp_path / "landmarks.csv"
    path.write_text(text, encoding="utf-8")
    faults: list[Fault] = []
    return read_landmarks(path, Settings(crs=crs), faults)[0], faults


def test_degrees_and_eastings(tmp_path: Path) -> None:
    east, north = Transformer.from_crs(4326, 25833, always_xy=True).transform(13.0, 52.0)
    text = "landmark,longitude,latitude,easting,northing,height_m,sd_m,note\n"
    text += f"spire,13.01,52.02,,,95,0.3,the ball\nmark,,,{east:.4f},{north:.4f},,,\n"
    (spire, mark), faults = read(tmp_path, text, "EPSG:25833")
    assert faults == []
    assert spire == Landmark("spire", 13.01, 52.02, 95.0, 0.3, "the ball", 2)
    assert (mark.longitude_deg, mark.latitude_deg) == pytest.approx((13.0, 52.0), abs=1e-8)
    assert (mark.sd_m, mark.height_m) == (UNSTATED_SD_M, None)


@pytest.mark.parametrize(
    ("line", "crs", "said"),
    [
        ("spire,,,,", None, "write easting and northing, or longitude and latitude"),
        ("spire,13,,,", None, "write easting and northing, or longitude and latitude"),
        ("spire,,,400000,5700000", None, "write crs under [round]"),
        ("spire,213,52,,", None, "at most 180"),
        ("spire,,,x,5700000", "EPSG:25833", "write a number"),
        (",13,52,,", None, "a name for the landmark"),
        ("spire,13,52,,\nspire,13,52,,", None, "row 2 has this landmark already"),
    ],
)
def test_what_is_wrong_is_a_fault(tmp_path: Path, line: str, crs: str | None, said: str) -> None:
    _, faults = read(tmp_path, "landmark,longitude,latitude,easting,northing\n" + line + "\n", crs)
    assert len(faults) == 1
    assert said in faults[0].remedy


def test_a_marked_landmark_must_be_listed(tmp_path: Path) -> None:
    marks = "object,photo,mark,x_px,y_px,sd_px\nspire,a.jpg,landmark,10,20,\n"
    listed = "landmark,longitude,latitude\nspire,13,52\n"
    round_ = load_round(write_round(tmp_path / "a", marks_csv=marks, landmarks_csv=listed,
                                    objects_csv="object\nT1\n"))  # fmt: skip
    assert [one.landmark for one in round_.landmarks] == ["spire"]
    assert [one.object for one in round_.objects] == ["T1"]
    (fault,) = faults_of(write_round(tmp_path / "b", marks_csv=marks,
                                     landmarks_csv=listed.replace("spire", "spine")))  # fmt: skip
    assert (fault.file, fault.row, fault.column) == ("marks.csv", 2, "object")
    assert "did you mean 'spine'" in fault.remedy
