"""The report's drawings as SVG: readable in black and white, text that can be searched.

In: numbers. Out: SVG elements as safe markup (every word in them is escaped).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping, Sequence

import numpy as np
from markupsafe import Markup, escape

from fieldround.deliver.pages import number
from fieldround.solve.results import BUDGET_SOURCES

# Fills that can be told apart in black and white: side of the tile, its turn, its drawing.
_FILLS = (
    (4, 0, '<rect width="4" height="4" class="dark"/>'),
    (5, 45, '<path d="M0 2.5h5" class="stroke"/>'),
    (4, 0, ""),
    (5, 0, '<circle cx="2.5" cy="2.5" r="1.2" class="dot"/>'),
    (4, 0, '<path d="M2 0v4" class="stroke"/>'),
    (3, -45, '<path d="M0 1.5h3" class="stroke"/>'),
    (5, 0, '<path d="M0 2.5h5M2.5 0v5" class="stroke"/>'),
    (5, 45, '<path d="M0 2.5h5M2.5 0v5" class="stroke"/>'),
    (4, 0, '<path d="M0 2h4" class="stroke"/>'),
    (
        6,
        0,
        '<rect width="6" height="6" class="dark"/><circle cx="3" cy="3" r="1.6" class="light"/>',
    ),
    (9, 45, '<path d="M0 4.5h9" class="stroke"/>'),
    (4, 0, '<rect width="4" height="4" class="grey"/>'),
)
_PATTERNS = {source: f"#b{i % len(_FILLS)}" for i, source in enumerate(BUDGET_SOURCES)}
_ROW_LEFT = 96.0
_RIGHT = 330.0
SIGNS = {
    "accept": '<circle r="3.4" class="v-accept"/>',
    "remeasure": '<path d="M0-4.8L4.6 3.4H-4.6Z" class="v-remeasure"/>',
    "no result": '<path d="M-3.4-3.4h6.8v6.8h-6.8ZM-3.4-3.4l6.8 6.8M-3.4 3.4l6.8-6.8"'
    ' class="v-no-result"/>',
}


def sign(verdict: str) -> Markup:
    """The verdict's sign as a small drawing beside a word."""
    return Markup(
        f'<svg class="sign" viewBox="-6 -6 12 12" aria-hidden="true">{SIGNS[verdict]}</svg>'
    )


def patterns() -> Markup:
    """The fills of the budget bars, to stand once in the page."""
    tiles = []
    for i, (side, turn, drawing) in enumerate(_FILLS[: len(BUDGET_SOURCES)]):
        tiles.append(
            f'<pattern id="b{i}" width="{side}" height="{side}" patternUnits="userSpaceOnUse" '
            f'patternTransform="rotate({turn})"><rect width="{side}" height="{side}" '
            f'class="light"/>{drawing}</pattern>'
        )
    return Markup(
        f'<svg class="patterns" width="0" height="0" aria-hidden="true"><defs>{"".join(tiles)}'
        "</defs></svg>"
    )


def nice_step(span: float, most: int) -> float:
    """A step of 1, 2 or 5 times a power of ten that cuts `span` into at most `most` parts."""
    if not span > 0.0:
        return 1.0
    ten = 10.0 ** math.floor(math.log10(span / most))
    return next((k * ten for k in (1, 2, 5, 10) if span / (k * ten) <= most + 1e-9), 10 * ten)


def _ticks(low: float, high: float, most: int) -> list[float]:
    step = nice_step(high - low, most)
    return [float(t) for t in np.arange(math.ceil(low / step - 1e-9), high / step + 1e-9) * step]


def digits_of(step: float) -> int:
    """Decimals that a step of a scale needs."""
    return max(0, -math.floor(math.log10(step) + 1e-9))


def readings_scale(
    readings: Sequence[tuple[str, float, float]],
    diameter_m: float,
    low_m: float | None,
    high_m: float | None,
) -> Markup:
    """The views' own readings (view, diameter, sd) above the diameter and its interval."""
    ends = [v for _, d, sd in readings for v in (d - 2.0 * sd, d + 2.0 * sd)]
    ends += [v for v in (low_m, high_m, diameter_m) if v is not None]
    low, high = min(ends), max(ends)
    room = (high - low) * 0.06 or abs(diameter_m) * 0.01 or 0.001
    low, high = low - room, high + room
    left, right = 58.0, 320.0

    def x(value: float) -> float:
        return left + (value - low) / (high - low) * (right - left)

    rows: list[tuple[str, float, float | None, float | None]] = [
        (f"view {view}", d, d - 2.0 * sd, d + 2.0 * sd) for view, d, sd in readings
    ]
    rows.append(("diameter", diameter_m, low_m, high_m))
    parts = []
    for i, (name, middle, start, end) in enumerate(rows):
        y, last = 12 + 17 * i, i == len(rows) - 1
        kind = "result" if last else "reading"
        parts.append(word(left - 6, y + 3.5, name, "", "end"))
        parts.append(_whisker(x, y, middle, start, end, (left, right), kind))
        parts.append(
            f'<rect x="{x(middle) - 3:.1f}" y="{y - 3}" width="6" height="6" class="{kind}"/>'
            if last
            else f'<circle cx="{x(middle):.1f}" cy="{y}" r="3" class="{kind}"/>'
        )
    base = 12 + 17 * len(rows) - 4
    ticks = _ticks(low, high, 5)
    digits = max(3, digits_of(ticks[1] - ticks[0])) if len(ticks) > 1 else 3
    for tick in ticks:
        parts.append(
            f'<path d="M{x(tick):.1f} {base}v4" class="axis"/>'
            f'<text x="{x(tick):.1f}" y="{base + 14}" text-anchor="middle" class="small">'
            f"{tick:.{digits}f}</text>"
        )
    parts.append(f'<path d="M{left} {base}H{right}" class="axis"/>')
    return svg(340, base + 18, parts, "readings", "Readings and diameter on one scale, metres")


def _whisker(
    x: Callable[[float], float],
    y: float,
    middle: float,
    start: float | None,
    end: float | None,
    edges: tuple[float, float],
    kind: str,
) -> str:
    """A line from end to end with caps; an end that is open runs to the edge as an arrow."""
    if start is None and end is None:
        start = end = middle
    caps = ""
    ends = []
    for value, edge, back in ((start, edges[0], 5), (end, edges[1], -5)):
        at = edge if value is None else x(value)
        ends.append(at)
        caps += (
            f"M{at + back:.1f} {y - 4}L{at:.1f} {y}l{back} 4"
            if value is None
            else f"M{at:.1f} {y - 4}v8"
        )
    return f'<path d="M{ends[0]:.1f} {y}H{ends[1]:.1f}{caps}" class="bar {kind}"/>'


def budget_bar(budget: Mapping[str, float]) -> Markup:
    """The variance by source as one bar of patterns, the shares in words below it."""
    whole = sum(budget.values())
    if not whole > 0.0:
        return Markup("")
    parts, x, width = [], 0.0, 340.0
    shares = [(source, variance / whole) for source, variance in budget.items() if variance > 0.0]
    for source, share in shares:
        fill = _PATTERNS.get(source, "#b0")
        parts.append(
            f'<rect x="{x:.1f}" y="0" width="{share * width:.1f}" height="14" '
            f'style="fill:url({fill})" class="part"/>'
        )
        x += share * width
    key, column = [], 0
    for source, share in sorted(shares, key=lambda s: -s[1]):
        if share < 0.005:
            continue
        kx, ky = (column % 3) * 114, 22 + 14 * (column // 3)
        fill = _PATTERNS.get(source, "#b0")
        key.append(
            f'<rect x="{kx}" y="{ky}" width="9" height="9" style="fill:url({fill})" class="part"/>'
            f'<text x="{kx + 13}" y="{ky + 8}" class="small">{escape(source)} '
            f"{100 * share:.0f} %</text>"
        )
        column += 1
    high = 22 + 14 * ((column + 2) // 3)
    return svg(340, high, parts + key, "budget", "Share of each source in the variance")


def histogram(
    values: Iterable[float],
    title: str,
    unit: str,
    limits: Sequence[float] = (),
    most: int = 16,
) -> Markup:
    """Counts of values in equal classes; limits are drawn as dashed lines."""
    data = np.array([v for v in values if math.isfinite(v)])
    if not len(data):
        return Markup("")
    # A few far values would squeeze all others into one class: they go into the last one.
    top = float(np.quantile(data, 0.98)) if len(data) > 50 else float(data.max())
    low, high = float(data.min()), max([top, *limits])
    low = min([low, *limits]) if limits else low
    step = nice_step((high - low) or abs(high) * 0.1 or 1.0, most)
    first = math.floor(low / step + 1e-9)
    classes = max(1, math.ceil(high / step - 1e-9) - first)
    index = np.clip(np.floor(data / step + 1e-9).astype(int) - first, 0, classes - 1)
    counts = np.bincount(index, minlength=classes)
    left, right, top_y, base = 30.0, 330.0, 22.0, 128.0
    wide = (right - left) / classes
    peak = int(counts.max())
    parts = [f'<text x="0" y="11" class="title">{escape(title)}</text>']
    for tick in _ticks(0, peak, 4):
        if tick != int(tick):
            continue
        y = base - tick / peak * (base - top_y)
        parts.append(f'<path d="M{left} {y:.1f}H{right}" class="faint"/>')
        parts.append(word(left - 4, y + 3, f"{tick:.0f}", "small", "end"))
    for i, n in enumerate(counts):
        high_px = n / peak * (base - top_y)
        parts.append(
            f'<rect x="{left + i * wide + 0.5:.1f}" y="{base - high_px:.1f}" '
            f'width="{max(wide - 1, 0.5):.1f}" height="{high_px:.1f}" class="count"/>'
        )

    def x(value: float) -> float:
        return left + (value / step - first) * wide

    every = max(1, math.ceil(classes / 8))
    for i in range(0, classes + 1, every):
        more = "≥ " if i + every > classes and float(data.max()) > (first + classes) * step else ""
        parts.append(
            f'<text x="{left + i * wide:.1f}" y="{base + 12}" text-anchor="middle" class="small">'
            f"{more if i == classes else ''}{number((first + i) * step, digits_of(step))}</text>"
        )
    for limit in limits:
        parts.append(f'<path d="M{x(limit):.1f} {top_y - 4}V{base}" class="limit"/>')
    parts.append(
        f'<path d="M{left} {base}H{right}" class="axis"/>'
        f'<text x="{right}" y="{base + 25}" text-anchor="end" class="small">{escape(unit)}, '
        f"n = {len(data)}</text>"
    )
    return svg(340, 158, parts, "plot", title)


def dots(rows: Sequence[tuple[str, float]], title: str, unit: str) -> Markup:
    """One dot a row (name, value) on a common scale from zero, for a few dozen rows."""
    rows = [(name, value) for name, value in rows if math.isfinite(value)]
    if not rows:
        return Markup("")
    high = 1.05 * max(value for _, value in rows) or 1.0
    parts, base = _row_frame([name for name, _ in rows], 0.0, high, title, unit)
    for i, (_, value) in enumerate(rows):
        x = _ROW_LEFT + value / high * (_RIGHT - _ROW_LEFT)
        parts.append(f'<circle cx="{x:.1f}" cy="{30 + 13 * i}" r="2.6" class="reading"/>')
    return svg(340, base + 28, parts, "plot", title)


def differences(rows: Sequence[tuple[str, float, float]], title: str, unit: str) -> Markup:
    """One row (name, difference, its half interval) each, about a line at zero."""
    rows = [row for row in rows if math.isfinite(row[1]) and math.isfinite(row[2])]
    if not rows:
        return Markup("")
    reach = 1.05 * max(abs(value) + half for _, value, half in rows) or 1.0
    parts, base = _row_frame([row[0] for row in rows], -reach, reach, title, unit)

    def x(value: float) -> float:
        return _ROW_LEFT + (value + reach) / (2.0 * reach) * (_RIGHT - _ROW_LEFT)

    parts.append(f'<path d="M{x(0):.1f} 20V{base}" class="axis"/>')
    for i, (_, value, half) in enumerate(rows):
        y = 30 + 13 * i
        parts.append(
            f'<path d="M{x(value - half):.1f} {y}H{x(value + half):.1f}" class="bar reading"/>'
            f'<circle cx="{x(value):.1f}" cy="{y}" r="2.6" class="reading"/>'
        )
    return svg(340, base + 28, parts, "plot", title)


def _row_frame(
    names: Sequence[str], low: float, high: float, title: str, unit: str
) -> tuple[list[str], int]:
    """Title, row names, grid and scale of a plot with one row a name; and where its base is."""
    parts = [word(0, 11, title, "title")]
    base = 26 + 13 * len(names)
    ticks = _ticks(low, high, 5)
    digits = digits_of(ticks[1] - ticks[0]) if len(ticks) > 1 else 1
    for tick in ticks:
        x = _ROW_LEFT + (tick - low) / (high - low) * (_RIGHT - _ROW_LEFT)
        parts.append(f'<path d="M{x:.1f} 20V{base}" class="faint"/>')
        parts.append(word(x, base + 12, number(tick, digits), "small", "middle"))
    for i, name in enumerate(names):
        y = 30 + 13 * i
        shown = name if len(name) <= 16 else name[:15] + "…"
        parts.append(word(_ROW_LEFT - 6, y + 3, shown, "small", "end"))
        parts.append(f'<path d="M{_ROW_LEFT} {y}H{_RIGHT}" class="faint"/>')
    parts.append(f'<path d="M{_ROW_LEFT} {base}H{_RIGHT}" class="axis"/>')
    parts.append(word(_RIGHT, base + 24, unit, "small", "end"))
    return parts, base


def scatter(
    points: Sequence[tuple[str, float, float]],
    title: str,
    x_unit: str,
    y_unit: str,
    limit: float | None,
) -> Markup:
    """Points (verdict, x, y) with the verdict's sign, scales from zero, perhaps a dashed limit."""
    points = [p for p in points if math.isfinite(p[1]) and math.isfinite(p[2])]
    if not points:
        return Markup("")
    ys = np.array([y for _, _, y in points])
    x_high = 1.06 * max(x for _, x, _ in points) or 1.0
    # Far values sit on the upper edge, so that the others keep their room.
    y_high = 1.1 * (float(ys.max()) if limit is None else max(limit, float(np.quantile(ys, 0.95))))
    y_high = y_high or 1.0
    left, top, base = 30.0, 22.0, 128.0
    parts = [word(0, 11, title, "title")]

    def x_px(x: float) -> float:
        return left + x / x_high * (_RIGHT - left)

    def y_px(y: float) -> float:
        return base - min(y / y_high, 1.0) * (base - top)

    for tick in (ticks := _ticks(0.0, y_high, 4)):
        digits = digits_of(ticks[1] - ticks[0]) if len(ticks) > 1 else 1
        parts.append(f'<path d="M{left} {y_px(tick):.1f}H{_RIGHT}" class="faint"/>')
        parts.append(word(left - 4, y_px(tick) + 3, number(tick, digits), "small", "end"))
    for tick in (ticks := _ticks(0.0, x_high, 6)):
        digits = digits_of(ticks[1] - ticks[0]) if len(ticks) > 1 else 1
        parts.append(word(x_px(tick), base + 12, number(tick, digits), "small", "middle"))
    if limit is not None:
        parts.append(f'<path d="M{left} {y_px(limit):.1f}H{_RIGHT}" class="limit"/>')
    for verdict, x, y in points:
        parts.append(
            f'<g transform="translate({x_px(x):.1f} {y_px(y):.1f}) scale(.75)">{SIGNS[verdict]}</g>'
        )
    parts.append(f'<path d="M{left} {base}H{_RIGHT}" class="axis"/>')
    words = f"{y_unit} over {x_unit}, n = {len(points)}"
    parts.append(word(_RIGHT, base + 25, words, "small", "end"))
    return svg(340, 158, parts, "plot", title)


def word(x: float, y: float, words: str, kind: str, anchor: str = "start") -> str:
    """A word of a drawing, escaped."""
    return (
        f'<text x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}" class="{kind}">'
        f"{escape(words)}</text>"
    )


def svg(width: float, height: float, parts: Sequence[str], kind: str, title: str) -> Markup:
    """A whole drawing: its size, parts, class, and what it shows for those who cannot see it."""
    return Markup(
        f'<svg class="{kind}" viewBox="0 0 {width:.0f} {height:.0f}" role="img" '
        f'aria-label="{escape(title)}">{"".join(parts)}</svg>'
    )
