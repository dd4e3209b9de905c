"""The round from above as a drawing for the report.

In: positions in metres. Out: SVG as safe markup.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from markupsafe import Markup

from fieldround.deliver.figures import SIGNS, digits_of, nice_step, svg, word
from fieldround.deliver.pages import number


def map_sketch(
    objects: Sequence[tuple[str, str, float, float]],
    stations: Sequence[tuple[float, float]],
    sightlines: Sequence[tuple[float, float, float, float]],
) -> Markup:
    """The round seen from above, north up.

    objects : (name, verdict, east m, north m); stations : (east, north);
    sightlines : (east, north, east, north)
    """
    spots = np.array([o[2:] for o in objects] + list(stations), float).reshape(-1, 2)
    if not len(spots):
        return Markup("")
    low, high = spots.min(axis=0), spots.max(axis=0)
    span = float(max(*(high - low), 2.0))
    wide, tall_most, edge = 680.0, 620.0, 34.0
    scale = min((wide - 2 * edge) / span, (tall_most - 2 * edge) / max(high[1] - low[1], 1e-9))
    tall = max(220.0, min(tall_most, (high[1] - low[1]) * scale + 2 * edge))
    middle = (low + high) / 2.0

    def at(east: float, north: float) -> tuple[float, float]:
        return wide / 2 + (east - middle[0]) * scale, tall / 2 - (north - middle[1]) * scale

    parts = [f'<rect width="{wide:.0f}" height="{tall:.0f}" class="frame"/>']
    for x0, y0, x1, y1 in sightlines:
        (ax, ay), (bx, by) = at(x0, y0), at(x1, y1)
        parts.append(f'<path d="M{ax:.1f} {ay:.1f}L{bx:.1f} {by:.1f}" class="sight"/>')
    for east, north in stations:
        x, y = at(east, north)
        parts.append(f'<path d="M{x:.1f} {y - 3.6:.1f}l3.4 6h-6.8Z" class="station"/>')
    boxes: list[tuple[float, float, float, float]] = []
    names: list[str] = []
    for name, verdict, east, north in objects:
        x, y = at(east, north)
        parts.append(f'<g transform="translate({x:.1f} {y:.1f})">{SIGNS[verdict]}</g>')
        box = (x + 6, y - 6, x + 8 + 5.6 * len(name), y + 5)
        free = all(box[0] > b[2] or box[2] < b[0] or box[1] > b[3] or box[3] < b[1] for b in boxes)
        if free and len(names) < 120 and box[2] < wide:
            boxes.append(box)
            names.append(word(x + 6, y + 3.5, name, "name"))
    length = nice_step(span, 5)
    x, y = edge, tall - 14
    parts += names
    parts.append(
        f'<path d="M{x} {y - 4}v4h{length * scale:.1f}v-4" class="axis"/>'
        f'<path d="M{wide - 26} {34}l-5 12h10ZM{wide - 26} 46v12" class="north"/>'
    )
    parts.append(word(x + length * scale + 5, y, f"{number(length, digits_of(length))} m", "small"))
    parts.append(word(wide - 26, 28, "N", "small", "middle"))
    return svg(wide, tall, parts, "sketch", "Sketch of the round from above, north up")
