"""Objects that may be one thing entered twice: same kind, within each other's ellipses.

In: the round's objects and where they were placed. Out: `NearDuplicate`s, nearest first. Nothing
is merged: only a person on the spot can tell.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from fieldround.geometry.earth import ecef_from_geodetic, enu_axes
from fieldround.place.ellipses import CHI_SQUARE_95
from fieldround.place.frames import NearDuplicate, PlacedPoint
from fieldround.rounds.model import RoundObject

# As many are written out in the notes; the list has all.
_NAMED = 10


def near_duplicates(
    things: Sequence[RoundObject], places: Mapping[str, PlacedPoint]
) -> tuple[NearDuplicate, ...]:
    """Pairs of objects of one kind whose distance their sds can explain (95 %).

    Two objects that one pair of photos shows are two: whoever marked them saw both.
    """
    placed = [thing for thing in things if thing.object in places]
    if len(placed) < 2:
        return ()
    points = [places[thing.object] for thing in placed]
    lon = np.array([point.longitude_deg for point in points])
    lat = np.array([point.latitude_deg for point in points])
    ecef = ecef_from_geodetic(np.stack([lon, lat, np.zeros(len(lon))], axis=-1))
    reach = np.array([point.ellipse.semi_major_m for point in points])

    from scipy.spatial import cKDTree

    # The joint ellipse of two positions lies within the sum of both circles.
    near = cKDTree(ecef).query_pairs(2.0 * float(reach.max()), output_type="ndarray")
    found = []
    for i, j in near:
        a, b = placed[i], placed[j]
        if a.kind != b.kind or set(a.pairs) & set(b.pairs):
            continue
        off = (enu_axes(lon[i], lat[i]) @ (ecef[j] - ecef[i]))[:2]
        cov = points[i].cov_m2 + points[j].cov_m2
        if float(off @ np.linalg.solve(cov, off)) <= CHI_SQUARE_95:
            found.append(NearDuplicate(a.object, b.object, a.kind, float(np.hypot(*off))))
    return tuple(sorted(found, key=lambda twin: (twin.apart_m, twin.first, twin.second)))


def twin_notes(twins: Sequence[NearDuplicate]) -> list[str]:
    """Sentences for the report."""
    notes = [
        f"{twin.kind}s {twin.first} and {twin.second} are {twin.apart_m:.1f} m apart, within their "
        "ellipses: if they are one object, give them one name"
        for twin in twins[:_NAMED]
    ]
    if len(twins) > _NAMED:
        notes.append(f"{len(twins) - _NAMED} more pairs of objects are as near to each other")
    return notes
