"""The section "Lists" of the report.

In: the lists by trade, the constants they used. Out: HTML that stands inside the report's page.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from markupsafe import Markup

from fieldround.deliver import figures
from fieldround.deliver.pages import environment, number
from fieldround.trade.constants import Constant
from fieldround.trade.listing import Column
from fieldround.trade.measured import Measured

if TYPE_CHECKING:
    from fieldround.trade.lists import Trade

# Longer lists are cut on paper; the CSV has all rows.
ROWS_MAX = 600
# More columns than these are set smaller, and then in columns of one width.
_WIDE, _WIDEST = 9, 15
# Columns whose words may be long.
_BREAKABLE = ("object", "label", "pole_a", "pole_b", "in_words", "next", "figure")


def section_html(
    trades: Sequence[Trade], constants: Sequence[Constant], items: Sequence[Measured]
) -> Markup:
    """The section, with a height-diameter plot where there are stems with heights."""
    template = environment("fieldround.trade").get_template("lists.html.j2")
    stems = [
        (item.verdict, 100.0 * item.diameter_m, item.height_m)
        for item in items
        if item.kind == "trunk" and item.diameter_m is not None and item.height_m is not None
    ]
    plot = figures.scatter(stems, "Height over diameter of the stems", "cm", "m", None)
    return Markup(
        template.render(
            trades=trades,
            constants=constants,
            plot=plot,
            shown=shown,
            rows_max=ROWS_MAX,
            wide=_WIDE,
            widest=_WIDEST,
            breakable=_BREAKABLE,
        )
    )


def shown(value: Any, column: Column) -> str:
    """A value on paper: rounded, a dash where it is not known."""
    if value is None:
        return "–"
    if isinstance(value, float):
        return number(value, 3 if column.digits is None else column.digits)
    return str(value)
