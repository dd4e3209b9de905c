"""One place for an object that several pairs see.

In: the object's spots in all its pairs. Out: the combined spot about the first pair's origin, and
a sentence when the pairs disagree.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fieldround.geometry.earth import enu_from_geodetic, geodetic_from_enu
from fieldround.place.headings import Headings
from fieldround.place.spots import LocatedPair, Spot, shared_covariance

# Pairs that disagree beyond this probability have the ellipse enlarged.
_DOUBT = 0.01


def merge_spots(
    name: str, pairs: Sequence[LocatedPair], headings: Headings
) -> tuple[Spot, str | None]:
    """The object's spot from all pairs, about the origin of the first.

    Weights are those of the spots' own covariances; the covariance of the result counts what the
    spots share, so that two pairs placed by one phone do not pass for two phones.
    """
    spots = [pair.objects[name] for pair in pairs]
    if len(spots) == 1:
        return spots[0], None
    first = pairs[0].origin
    places = np.array([spots[0].east_north_m] + [
        enu_from_geodetic(
            geodetic_from_enu(np.array([[*spot.east_north_m, 0.0]]), pair.origin), first
        )[0, :2]
        for pair, spot in zip(pairs[1:], spots[1:], strict=True)
    ])  # fmt: skip
    inverses = np.array([np.linalg.inv(spot.cov_m2) for spot in spots])
    whole = np.linalg.inv(inverses.sum(axis=0))
    weights = whole @ inverses
    at = np.einsum("kij,kj->i", weights, places)
    cov = np.zeros((2, 2))
    for i, (pair_i, spot_i) in enumerate(zip(pairs, spots, strict=True)):
        cov += weights[i] @ spot_i.cov_m2 @ weights[i].T
        for j in range(i):
            shared = shared_covariance(pair_i, spot_i, pairs[j], spots[j], headings)
            part = weights[i] @ shared @ weights[j].T
            cov += part + part.T
    off = places - at
    square = float(np.einsum("ki,kij,kj->", off, inverses, off))
    freedom = 2 * (len(spots) - 1)
    up = spots[0].up_m

    from scipy.special import chdtri

    slope = np.zeros(2)
    if square <= chdtri(freedom, _DOUBT):
        return Spot(at, cov, up, slope), None
    apart = float(np.linalg.norm(places[:, None] - places[None, :], axis=-1).max())
    names = ", ".join(pair.pair for pair in pairs)
    note = (
        f"object {name}: the places that pairs {names} give are up to {apart:.2g} m apart, more "
        "than their sds allow; the ellipse was enlarged"
    )
    return Spot(at, cov * square / freedom, up, slope), note
