"""Tracks with everything that the GPX 1.1 schema allows at a point.

GPX 1.1 Schema Documentation (Topografix, 9 August 2004), wptType: the elements and their order,
from memory of the schema; latitudes -90 to 90, longitudes -180 up to but not including 180, times
in UTC (ISO 8601, fractions allowed), elevation in metres.
"""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from xml.etree import ElementTree

import pytest

from fieldround.rounds.track_files import read_gpx

POINT = """<trkpt lat="{lat}" lon="{lon}">
<ele>4.46</ele><time>{time}</time><magvar>3.5</magvar><geoidheight>44.1</geoidheight>
<name>n</name><cmt>c</cmt><desc>d</desc><src>s</src><link href="urn:x"><text>t</text></link>
<sym>y</sym><type>t</type><fix>dgps</fix><sat>9</sat><hdop>1.5</hdop><vdop>2.0</vdop>
<pdop>2.5</pdop><ageofdgpsdata>1.0</ageofdgpsdata><dgpsid>12</dgpsid>
<extensions><x:own xmlns:x="urn:x">1</x:own></extensions></trkpt>"""
ORDER = ["ele", "time", "magvar", "geoidheight", "name", "cmt", "desc", "src", "link", "sym",
         "type", "fix", "sat", "hdop", "vdop", "pdop", "ageofdgpsdata", "dgpsid",
         "extensions"]  # fmt: skip


def document(points: list[str], namespace: str = "http://www.topografix.com/GPX/1/1") -> str:
    return (
        f'<?xml version="1.0"?><gpx xmlns="{namespace}" version="1.1" creator="invented">'
        "<metadata><bounds minlat='-90' minlon='-180' maxlat='90' maxlon='179'/></metadata>"
        "<wpt lat='1' lon='2'/><rte><rtept lat='1' lon='2'><time>2026-05-14T08:00:00Z</time>"
        f"</rtept></rte><trk><number>1</number><trkseg>{''.join(points)}</trkseg></trk></gpx>"
    )


def test_our_example_has_every_element_of_the_schema_in_its_order() -> None:
    root = ElementTree.fromstring(POINT.format(lat=1, lon=2, time="2026-05-14T09:10:00Z"))
    assert [child.tag for child in root] == ORDER


def test_every_element_is_taken_or_passed_over(tmp_path: Path) -> None:
    corners = [(-90.0, -180.0), (90.0, 179.999999), (0.0, 1e-6), (52.0, 13.0)]
    times = ["09:10:00Z", "09:10:01.25Z", "11:10:02+02:00", "09:10:03.123456Z"]
    points = [
        POINT.format(lat=lat, lon=lon, time=f"2026-05-14T{time}")
        for (lat, lon), time in zip(corners, times, strict=True)
    ]
    path = tmp_path / "walk.gpx"
    path.write_text(document(points), encoding="utf-8")
    track, reason = read_gpx(path)
    assert reason is None
    assert track is not None
    start = datetime(2026, 5, 14, 9, 10, tzinfo=UTC).timestamp()
    assert track.seconds - start == pytest.approx([0.0, 1.25, 2.0, 3.123456], abs=1e-5)
    assert [tuple(row) for row in track.geodetic[:, [1, 0]]] == corners
    assert track.geodetic[:, 2].tolist() == [4.46] * 4
    assert track.sd_m.tolist() == [4.5] * 4


def test_gpx_1_0_is_read_as_well(tmp_path: Path) -> None:
    old = document([POINT.format(lat=52, lon=13, time="2026-05-14T09:10:00Z")],
                   "http://www.topografix.com/GPX/1/0")  # fmt: skip
    path = tmp_path / "walk.gpx"
    path.write_text(old.replace('version="1.1"', 'version="1.0"'), encoding="utf-8")
    track, _ = read_gpx(path)
    assert track is not None
    assert len(track.seconds) == 1
