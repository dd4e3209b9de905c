"""The place in report.html that other parts of the program fill.

In: the page and a section's HTML. Out: the page with the section at its place, once.
"""

from __future__ import annotations

from fieldround.rounds.errors import RoundError

START, END = "<!-- lists: start -->", "<!-- lists: end -->"


def insert_section(page: str, html: str) -> str:
    """The page with the section between its marks; what stood there before is replaced.

    raises : RoundError when the page has no such place (it was made by an older version)
    """
    before, found, rest = page.partition(START)
    inside, end, after = rest.partition(END)
    if not (found and end):
        raise RoundError(
            "report.html has no place for the lists: run `fieldround run` on the folder again"
        )
    del inside
    return f'{before}{START}\n<section id="lists" class="page">\n{html}\n</section>\n{END}{after}'
