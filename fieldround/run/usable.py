"""What of a round can be used once some photos turned out to be unreadable.

In: a `Round` with lost photos. Out: the round whose pairs do without a later view that was lost.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from fieldround.rounds.model import Pair, Round
from fieldround.solve.results import PairResult


def with_lost(round_: Round, lost: Mapping[str, str]) -> Round:
    """The round without some photos; lost : name -> sentence."""
    if not lost:
        return round_
    return replace(
        round_,
        photos={name: photo for name, photo in round_.photos.items() if name not in lost},
        lost_photos={**round_.lost_photos, **lost},
    )


def with_views_left(round_: Round) -> Round:
    """Drop lost photos from pairs that keep their stations A and B.

    The tape lies between A and B, so a pair that lost one of these stays as it is and the solver
    refuses it with the photo's own sentence.
    """
    return replace(round_, pairs=tuple(_views_left(round_, pair) for pair in round_.pairs))


def _views_left(round_: Round, pair: Pair) -> Pair:
    if any(name not in round_.photos for name in pair.photos[:2]):
        return pair
    return replace(pair, photos=tuple(name for name in pair.photos if name in round_.photos))


def with_views_told(
    before: Round, after: Round, rows: tuple[PairResult, ...]
) -> tuple[PairResult, ...]:
    """Rows of the pairs, each with a sentence for every view it had to do without."""
    named = {pair.pair: pair.photos for pair in before.pairs}
    told = []
    for row in rows:
        gone = [name for name in named.get(row.pair, ()) if name not in row.photos]
        why = [
            f"{after.lost_photos.get(name, f'photo {name} was not read')}; the pair goes on "
            "without it"
            for name in gone
        ]
        told.append(replace(row, reasons=(*row.reasons, *why)))
    return tuple(told)


def with_troubles(
    rows: tuple[PairResult, ...], troubles: Mapping[str, str]
) -> tuple[PairResult, ...]:
    """Rows of the pairs with a sentence more; troubles : pair -> sentence."""
    return tuple(
        replace(row, reasons=(*row.reasons, troubles[row.pair])) if row.pair in troubles else row
        for row in rows
    )
