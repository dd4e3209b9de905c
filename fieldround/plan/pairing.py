"""Which photos of a walk belong together: twos and threes by time, place and common scene.

In: the photos, and what any two of them share. Out: groups with a sentence on why, and the photos
left over with the reason.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime

import numpy as np

from fieldround.plan.links import Link, Sharing, link, quick_mates, seconds_apart
from fieldround.rounds.model import Photo

# Neighbours in time, in the order of the names, and in place, whose pictures are compared.
_IN_TIME, _IN_NAME, _IN_PLACE = 3, 2, 4
# A three is preferred to a two and a single, two twos to a three and a single.
_A_THREE = 2.9
_LARGEST = 3

Links = Mapping[tuple[int, int], Link]
Division = list[tuple[int, ...]]


@dataclass(frozen=True)
class Group:
    """Photos proposed as one pair (with a third view perhaps), and why."""

    photos: tuple[str, ...]
    why: str


def in_order(photos: Iterable[Photo]) -> list[Photo]:
    """Photos in the order of the walk: by time where there is one, else by name."""

    def when(photo: Photo) -> tuple[bool, datetime, str]:
        at = photo.taken_at
        if at is None:
            return True, datetime.max.replace(tzinfo=UTC), photo.name
        return False, at.replace(tzinfo=UTC) if at.utcoffset() is None else at, photo.name

    return sorted(photos, key=when)


def group_photos(
    photos: Sequence[Photo],
    sharing: Sharing,
    told: Callable[[int, int], None] = lambda done, of: None,
) -> tuple[tuple[Group, ...], dict[str, str]]:
    """The best division of a walk into twos and threes.

    photos  : in the order of the walk, see `in_order`
    sharing : what photos i and j share; asked only for likely mates
    told    : called with comparisons made and comparisons in all
    returns : groups in the order of the walk, and photo -> why it is in none
    """
    candidates = _candidates(photos)
    links: dict[tuple[int, int], Link] = {}
    for done, (i, j) in enumerate(candidates):
        told(done, len(candidates))
        links[i, j] = link(photos, i, j, sharing)
    told(len(candidates), len(candidates))
    division: Division = []
    for part in _parts(len(photos), links):
        by_name = sorted(part, key=lambda i: photos[i].name)
        ways = [_in_sequence(part, links), _in_sequence(by_name, links), _greedy(part, links)]
        division += max(ways, key=lambda way: sum(_worth(links, group) for group in way))
    grouped = {i for group in division for i in group}
    alone = [i for i in range(len(photos)) if i not in grouped]
    unseen = quick_mates(photos, alone, links)
    groups = [(group, _why(photos, group, links)) for group in division]
    groups += [((i, j), why) for i, j, why in unseen]
    grouped |= {i for pair in unseen for i in pair[:2]}
    found = [
        Group(tuple(photos[i].name for i in sorted(group)), why) for group, why in sorted(groups)
    ]
    return tuple(found), {
        photos[i].name: _why_alone(photos, links, i)
        for i in range(len(photos))
        if i not in grouped
    }


def _candidates(photos: Sequence[Photo]) -> list[tuple[int, int]]:
    """Index pairs worth comparing, in the order of the walk."""
    count = len(photos)
    wanted = {
        (i, j) for i in range(count) for j in range(i + 1, min(i + _IN_TIME + 1, count))
    }
    by_name = sorted(range(count), key=lambda i: photos[i].name)
    for step in range(1, _IN_NAME + 1):
        for a, b in zip(by_name, by_name[step:], strict=False):
            wanted.add((min(a, b), max(a, b)))
    placed = [i for i in range(count) if photos[i].fix is not None]
    if len(placed) > 1:
        from scipy.spatial import cKDTree

        from fieldround.geometry.earth import ecef_from_geodetic

        fixes = [fix for photo in photos if (fix := photo.fix) is not None]
        at = np.array([[fix.longitude_deg, fix.latitude_deg, 0.0] for fix in fixes])
        ecef = ecef_from_geodetic(at)
        _, near = cKDTree(ecef).query(ecef, k=min(_IN_PLACE + 1, len(placed)))
        for one, others in zip(placed, near, strict=True):
            wanted |= {(min(one, placed[k]), max(one, placed[k])) for k in others}
    return sorted((i, j) for i, j in wanted if i != j)


def _parts(count: int, links: Links) -> list[list[int]]:
    """Photos that hang together by links, two or more, each part in the order of the walk."""
    home = list(range(count))

    def root(i: int) -> int:
        while home[i] != i:
            home[i] = home[home[i]]
            i = home[i]
        return i

    for (i, j), one in links.items():
        if one.score > 0.0:
            home[root(i)] = root(j)
    parts: dict[int, list[int]] = {}
    for i in range(count):
        parts.setdefault(root(i), []).append(i)
    return [part for part in parts.values() if len(part) > 1]


def _in_sequence(order: Sequence[int], links: Links) -> Division:
    """The best cut of a sequence into neighbouring groups (dynamic programming)."""
    best = [0.0] * (len(order) + 1)
    size = [1] * (len(order) + 1)
    for end in range(1, len(order) + 1):
        best[end] = best[end - 1]
        for length in range(2, min(_LARGEST, end) + 1):
            gain = _worth(links, order[end - length : end])
            if gain > 0.0 and best[end - length] + gain > best[end]:
                best[end], size[end] = best[end - length] + gain, length
    groups: Division = []
    end = len(order)
    while end > 0:
        if size[end] > 1:
            groups.append(tuple(order[end - size[end] : end]))
        end -= size[end]
    return groups


def _greedy(part: Sequence[int], links: Links) -> Division:
    """The strongest links first, then singles that go with both of a two."""
    inside = set(part)
    ranked = sorted(
        (pair for pair, one in links.items() if one.score > 0.0 and inside.issuperset(pair)),
        key=lambda pair: (-links[pair].score, pair),
    )
    groups: Division = []
    taken: set[int] = set()
    for i, j in ranked:
        if i not in taken and j not in taken:
            groups.append((i, j))
            taken |= {i, j}
    for single in (i for i in part if i not in taken):
        fits = [k for k, group in enumerate(groups) if len(group) == 2 and
                _worth(links, (*group, single)) > _worth(links, group)]  # fmt: skip
        if fits:
            best = max(fits, key=lambda k: _worth(links, (*groups[k], single)))
            groups[best] = (*groups[best], single)
    return groups


def _worth(links: Links, group: Sequence[int]) -> float:
    """Value of photos as one group, 0 when two of them do not go together."""
    inside = []
    for k, i in enumerate(group):
        for j in group[k + 1 :]:
            one = links.get((min(i, j), max(i, j)))
            if one is None or one.score <= 0.0:
                return 0.0
            inside.append(one.score)
    return (2.0 if len(group) == 2 else _A_THREE) * float(np.mean(inside))


def _why(photos: Sequence[Photo], group: Sequence[int], links: Links) -> str:
    order = sorted(group)
    told = [
        (photos[i].name, photos[j].name, links[i, j].why)
        for i, j in itertools.pairwise(order)
    ]
    if len(told) == 1:
        return told[0][2]
    return "; ".join(f"{a} and {b}: {why}" for a, b, why in told)


def _why_alone(photos: Sequence[Photo], links: Links, at: int) -> str:
    mates = [(i if j == at else j, one) for (i, j), one in links.items() if at in (i, j)]
    if not mates:
        return "it is the only photo"
    if any(one.score > 0.0 for _, one in mates):
        return "the photos that show the same scene go better together without it"
    mates.sort(key=lambda mate: seconds_apart(photos[at], photos[mate[0]]))
    return "; ".join(f"with {photos[i].name}: {one.why}" for i, one in mates[:2])
