"""Invented records for the lists."""

from __future__ import annotations

from fieldround.trade.constants import Constants, load_constants
from fieldround.trade.listing import Listing
from fieldround.trade.measured import Measured


def measured(name: str, kind: str, diameter_m: float | None, sd_m: float = 0.0, **more) -> Measured:
    return Measured(
        object=name,
        kind=kind,
        label=more.pop("label", ""),
        verdict=more.pop("verdict", "accept"),
        diameter_m=diameter_m,
        diameter_sd_m=sd_m,
        **more,
    )


def changed(tmp_path, text: str) -> Constants:
    """The constants with a lists.toml of the round over them."""
    (tmp_path / "lists.toml").write_text(text, encoding="utf-8")
    return load_constants(tmp_path)


def column(listing: Listing, name: str) -> list:
    at = [c.name for c in listing.columns].index(name)
    return [row[at] for row in listing.rows]


def row(listing: Listing, key: str) -> dict:
    names = [c.name for c in listing.columns]
    return next(dict(zip(names, r, strict=True)) for r in listing.rows if r[0] == key)
