"""Times of the results: from the photos' clocks alone, in UTC where the offset is known.

In: times as photos give them. Out: ISO 8601 text. Nothing here looks at the clock of the machine.
"""

from __future__ import annotations

from datetime import UTC, datetime

from fieldround.solve.results import RoundResult


def in_utc(taken: datetime | str | None) -> str | None:
    """A time with its UTC offset as `2031-05-04T10:02:03.000Z`; None where no offset is known."""
    moment = _moment(taken)
    if moment is None or moment.tzinfo is None:
        return None
    moment = moment.astimezone(UTC)
    return moment.strftime("%Y-%m-%dT%H:%M:%S.") + f"{moment.microsecond // 1000:03d}Z"


def local_time(taken: datetime | str | None) -> str | None:
    """A time as the camera's clock showed it, ISO 8601, with its offset if one is known."""
    moment = _moment(taken)
    if moment is not None:
        return moment.isoformat()
    return str(taken) if taken else None


def time_span(result: RoundResult) -> tuple[str | None, str | None]:
    """First and last photo time in UTC (times without an offset only if no photo has one)."""
    times = [p.taken_at for p in result.round.photos.values() if p.taken_at is not None]
    aware = sorted(text for t in times if (text := in_utc(t)) is not None)
    if not aware:
        # Without an offset the clock's own time is all there is; it is used as if it were UTC.
        aware = sorted(str(in_utc(t.replace(tzinfo=UTC))) for t in times)
    return (aware[0], aware[-1]) if aware else (None, None)


def local_dates(result: RoundResult) -> str:
    """The day or days of the round as the cameras' clocks showed them; '' if no photo has one."""
    days = sorted({p.taken_at.date() for p in result.round.photos.values() if p.taken_at})
    if not days:
        return ""
    return str(days[0]) if days[0] == days[-1] else f"{days[0]} to {days[-1]}"


def _moment(taken: datetime | str | None) -> datetime | None:
    if taken is None or isinstance(taken, datetime):
        return taken
    try:
        return datetime.fromisoformat(taken)
    except ValueError:
        return None
