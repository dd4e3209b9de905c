"""GPX and NMEA logs. The positions are invented; the sentences follow the standards."""

from __future__ import annotations

import random
from datetime import UTC, date, datetime
from functools import reduce
from pathlib import Path

import numpy as np
import pytest

from fieldround.rounds.track_files import read_gpx, read_nmea
from fieldround.rounds.track_settings import TrackSettings
from fieldround.rounds.tracks import Track

GPX = """<?xml version="1.0" encoding="UTF-8"?>
<gpx version="1.1" creator="invented" xmlns="http://www.topografix.com/GPX/1/1"
     xmlns:own="urn:invented">
 <metadata><time>2026-05-14T09:00:00Z</time></metadata>
 <wpt lat="52.1" lon="13.1"><name>not a track point</name></wpt>
 <trk><name>walk</name>
  <trkseg>
   <trkpt lat="52.0001" lon="13.0001"><ele>41.5</ele><time>2026-05-14T09:10:00Z</time>
    <hdop>2.0</hdop><extensions><own:speed>1.2</own:speed></extensions></trkpt>
   <trkpt lat="52.0000" lon="13.0000"><ele>41.0</ele><time>2026-05-14T11:09:58.500+02:00</time>
    <hdop>0.8</hdop></trkpt>
  </trkseg>
  <trkseg>
   <trkpt lat="52.0002" lon="13.0002"><time>2026-05-14T09:10:02Z</time></trkpt>
   <trkpt lat="52.0003" lon="13.0003"/>
  </trkseg>
 </trk>
</gpx>
"""


def written(tmp_path: Path, text: str, name: str = "walk.gpx") -> Path:
    path = tmp_path / name
    path.write_bytes(text.encode("utf-8"))
    return path


def utc(*parts: int) -> float:
    return datetime(*parts, tzinfo=UTC).timestamp()


def sentence(body: str) -> str:
    """A sentence with its checksum: the exclusive or of its characters (NMEA 0183)."""
    return f"${body}*{reduce(lambda a, c: a ^ ord(c), body, 0):02X}\r\n"


def gga(clock: str, quality: int = 4, lon: str = "01300.0000", hdop: str = "0.8") -> str:
    return sentence(f"GNGGA,{clock},5200.0000,N,{lon},E,{quality},14,{hdop},41.0,M,44.5,M,1.0,0001")


def gst(clock: str, lat: str = "0.012", lon: str = "0.016", up: str = "0.025") -> str:
    return sentence(f"GNGST,{clock},0.02,0.02,0.01,30.0,{lat},{lon},{up}")


def rmc(clock: str, day: str = "140526") -> str:
    return sentence(f"GNRMC,{clock},A,5200.0000,N,01300.0000,E,0.1,0.0,{day},,,A")


def nmea(tmp_path: Path, text: str, settings: TrackSettings | None = None) -> Track:
    track, reason = read_nmea(written(tmp_path, text, "pole.nmea"), settings or TrackSettings())
    assert reason is None
    assert track is not None
    return track


# GPX ------------------------------------------------------------------------------------------


def test_track_points_of_a_gpx_file_in_order_of_time(tmp_path: Path) -> None:
    track, reason = read_gpx(written(tmp_path, GPX))
    assert reason is None
    assert track is not None
    start = utc(2026, 5, 14, 9, 10)
    assert track.seconds.tolist() == [start - 1.5, start, start + 2.0]
    assert track.geodetic[0].tolist() == [13.0, 52.0, 41.0]
    assert np.isnan(track.geodetic[2, 2])
    assert track.sd_m.tolist() == [3.0, 6.0, 5.0]
    assert (track.name, track.altitude_is, track.stated) == ("tracks/walk.gpx", "sea level", False)
    assert track.notes == ("tracks/walk.gpx: 1 points without time or place were left out",)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "cannot be read as GPX"),
        ("not xml at all", "cannot be read as GPX"),
        (GPX[:700], "cannot be read as GPX"),
        ("<gpx version='1.1'><trk/></gpx>", "no track point with a time"),
        (GPX.replace("lat=", "latt="), "cannot be read as GPX"),
    ],
)
def test_a_gpx_file_that_is_no_track_is_told(tmp_path: Path, text: str, said: str) -> None:
    track, reason = read_gpx(written(tmp_path, text))
    assert track is None
    assert reason is not None
    assert reason.startswith("tracks/walk.gpx")
    assert said in reason


def test_a_broken_gpx_file_never_raises(tmp_path: Path) -> None:
    rng = random.Random(1)
    for _ in range(150):
        text = list(GPX)
        for _ in range(rng.randint(1, 12)):
            text[rng.randrange(len(text))] = chr(rng.randrange(1, 0x500))
        track, reason = read_gpx(written(tmp_path, "".join(text)))
        assert (track is None) == (reason is not None)


# NMEA -----------------------------------------------------------------------------------------


def test_gga_takes_the_sds_of_its_gst(tmp_path: Path) -> None:
    track = nmea(
        tmp_path,
        rmc("091000.00") + gga("091000.00") + gst("091000.00") + rmc("091001.00")
        + gga("091001.00"),
    )  # fmt: skip
    assert track.seconds.tolist() == [utc(2026, 5, 14, 9, 10), utc(2026, 5, 14, 9, 10, 1)]
    assert track.sd_m[0] == pytest.approx(np.sqrt(0.5 * (0.012**2 + 0.016**2)))
    assert track.height_sd_m[0] == 0.025
    assert track.sd_m[1] == 0.03
    assert np.isnan(track.height_sd_m[1])
    assert track.geodetic[0].tolist() == [13.0, 52.0, 41.0]
    assert track.stated


@pytest.mark.parametrize(
    ("quality", "hdop", "sd"), [(4, "0.8", 0.03), (5, "0.8", 0.4), (2, "1.5", 1.0),
                                (1, "0.8", 3.0), (1, "2.5", 7.5), (1, "", 5.0)],
)  # fmt: skip
def test_sds_without_gst_follow_the_quality(
    tmp_path: Path, quality: int, hdop: str, sd: float
) -> None:
    track = nmea(tmp_path, rmc("091000.00") + gga("091000.00", quality, hdop=hdop))
    assert track.sd_m.tolist() == [sd]
    assert not track.stated


def test_positions_without_fix_or_by_dead_reckoning_are_left_out(tmp_path: Path) -> None:
    text = rmc("091000.00") + "".join(gga(f"09100{q}.00", q) for q in (0, 6, 7, 8, 1))
    assert nmea(tmp_path, text).seconds.tolist() == [utc(2026, 5, 14, 9, 10, 1)]


def test_broken_sentences_are_counted_and_left_out(tmp_path: Path) -> None:
    wrong = gga("091001.00").replace("5200.0000", "5300.0000")
    track = nmea(tmp_path, rmc("091000.00") + gga("091000.00") + wrong + "$GNGGA,,,\r\nnoise\r\n")
    assert len(track.seconds) == 1
    assert track.notes == ("tracks/pole.nmea: 2 broken sentences were left out",)


def test_the_day_changes_at_midnight(tmp_path: Path) -> None:
    by_rmc = rmc("235959.00") + gga("235959.00") + gga("000000.00") + rmc("000000.00", "150526")
    by_rmc += gga("000001.00")
    wanted = [utc(2026, 5, 14, 23, 59, 59), utc(2026, 5, 15), utc(2026, 5, 15, 0, 0, 1)]
    assert nmea(tmp_path, by_rmc).seconds.tolist() == wanted
    # The date may be said rarely: then the clock itself tells.
    once = rmc("235959.00") + gga("235959.00") + gga("000000.00") + gga("000001.00")
    assert nmea(tmp_path, once).seconds.tolist() == wanted


def test_a_date_from_zda_or_from_the_settings(tmp_path: Path) -> None:
    zda = sentence("GNZDA,091000.00,14,05,2026,00,00")
    assert nmea(tmp_path, zda + gga("091000.00")).seconds.tolist() == [utc(2026, 5, 14, 9, 10)]
    given = TrackSettings(date=date(2026, 5, 14))
    assert nmea(tmp_path, gga("091000.00"), given).seconds.tolist() == [utc(2026, 5, 14, 9, 10)]
    track, reason = read_nmea(written(tmp_path, gga("091000.00"), "a.nmea"), TrackSettings())
    assert track is None
    assert reason is not None
    assert "write date under [tracks]" in reason


def test_a_sentence_from_a_receiver_manual(tmp_path: Path) -> None:
    """GGA and GST examples of receiver manuals, from memory; their checksums are theirs."""
    text = (
        "$GPZDA,172809.00,12,07,1996,00,00*6C\n"
        "$GPGGA,172809.00,4717.11399,N,00833.91590,E,1,08,1.01,499.6,M,48.0,M,,*5F\n"
        "$GPGST,172809.00,0.006,0.023,0.020,273.6,0.023,0.020,0.031*6A\n"
    )
    body = [line[1:].split("*")[0] for line in text.splitlines()]
    track = nmea(tmp_path, "".join(sentence(one) for one in body))
    assert track.geodetic[0, 0] == pytest.approx(8 + 33.91590 / 60)
    assert track.geodetic[0, 1] == pytest.approx(47 + 17.11399 / 60)
    assert track.height_sd_m[0] == 0.031


def test_a_broken_nmea_log_never_raises(tmp_path: Path) -> None:
    rng = random.Random(2)
    good = rmc("091000.00") + "".join(gga(f"0910{s:02d}.00") + gst(f"0910{s:02d}.00")
                                      for s in range(10))  # fmt: skip
    for _ in range(150):
        text = list(good)
        for _ in range(rng.randint(1, 40)):
            text[rng.randrange(len(text))] = chr(rng.randrange(1, 0x200))
        track, reason = read_nmea(written(tmp_path, "".join(text), "a.nmea"), TrackSettings())
        assert (track is None) == (reason is not None)
    # Fields altered under a right checksum: what a faulty receiver writes.
    for _ in range(150):
        bodies = [list(line.split("*")[0][1:]) for line in good.splitlines()]
        for body in bodies:
            if rng.random() < 0.5:
                body[rng.randrange(6, len(body))] = rng.choice("0123456789,.-NSEWAMx")
        text = "".join(sentence("".join(body)) for body in bodies)
        track, reason = read_nmea(written(tmp_path, text, "a.nmea"), TrackSettings())
        assert (track is None) == (reason is not None)
