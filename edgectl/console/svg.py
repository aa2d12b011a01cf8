"""A little SVG: elements, scales and ticks. Colours and fonts live in the page's style sheet."""

from __future__ import annotations

import html
import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Final

Point = tuple[float, float]

_TIME_STEPS_S: Final = (60, 120, 300, 600, 900, 1800, 3600, 7200, 10800, 21600, 43200, 86400)


def escaped(text: object) -> str:
    """Text that is safe in an element and in an attribute; no control characters."""
    words = str(text)
    # XML has no place for these (XML 1.0, section 2.2), whatever a server sent us.
    return html.escape("".join(c if c.isprintable() else " " for c in words), quote=True)


@dataclass(frozen=True, slots=True)
class Scale:
    """From a value to a place on the drawing.

    Parameters
    ----------
    low, high : float
        Values at the two ends; both above zero when `logarithmic`.
    start, end : float
        Their places [px].
    """

    low: float
    high: float
    start: float
    end: float
    logarithmic: bool = False

    def __call__(self, value: float) -> float:
        """The place; values beyond the ends are drawn at the ends."""
        low, high, value = self.low, self.high, min(max(value, self.low), self.high)
        if self.logarithmic:
            low, high, value = math.log(low), math.log(high), math.log(value)
        share = (value - low) / (high - low) if high > low else 0.5
        return self.start + share * (self.end - self.start)

    def ticks(self, most: int = 5) -> list[float]:
        """Round values inside the scale."""
        if self.logarithmic and len(found := log_ticks(self.low, self.high)) >= 3:
            return found
        return ticks(self.low, self.high, most)


def ticks(low: float, high: float, most: int = 5) -> list[float]:
    """At most about `most` multiples of 1, 2 or 5 times a power of ten, inside [low, high]."""
    if not high > low:
        return [low]
    raw = (high - low) / max(1, most)
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(power * factor for factor in (1, 2, 5, 10) if power * factor >= raw * 0.999)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [index * step for index in range(first, last + 1)]


def log_ticks(low: float, high: float) -> list[float]:
    """1, 2 and 5 times powers of ten inside [low, high]; powers alone over many decades."""
    factors = (1, 2, 5) if high / low < 2e3 else (1,)
    powers = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    return [f * 10.0**p for p in powers for f in factors if low <= f * 10.0**p <= high]


def time_ticks(low: float, high: float, most: int = 9) -> list[float]:
    """Round instants (UTC) inside [low, high]."""
    enough = (step for step in _TIME_STEPS_S if (high - low) / step <= most)
    step = next(enough, 86400 * math.ceil((high - low) / 86400 / most))
    return [float(t) for t in range(math.ceil(low / step) * step, math.floor(high) + 1, step)]


def clock_words(instant: float, with_date: bool = False) -> str:
    """An instant as people say it, UTC."""
    pattern = "%-d %B %Y, %H:%M" if with_date else "%H:%M"
    return datetime.fromtimestamp(instant, UTC).strftime(pattern)


def number_words(value: float) -> str:
    """About four significant digits, without an exponent where people would not use one."""
    if not math.isfinite(value):
        return "-"
    size = abs(value)
    if size >= 1000:
        return f"{value:,.0f}"
    decimals = 1 if size >= 10 else 2 if size >= 1 else 3
    if size and size < 0.01:
        return f"{value:.2g}"
    text = f"{value:.{decimals}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def thinned(points: Sequence[Point], most: int = 1200) -> list[Point]:
    """Fewer points for a long line; each stretch keeps its lowest and its highest."""
    if len(points) <= most:
        return list(points)
    size = math.ceil(2 * len(points) / most)
    kept: list[Point] = []
    for start in range(0, len(points), size):
        stretch = points[start : start + size]
        ends = {stretch.index(min(stretch, key=_second)), stretch.index(max(stretch, key=_second))}
        kept += [stretch[index] for index in sorted(ends)]
    return kept


def _second(point: Point) -> float:
    return point[1]


class Drawing:
    """One inline SVG. Every text is escaped on its way in."""

    def __init__(self, width: float, height: float, title: str) -> None:
        self.width, self.height = width, height
        self._title = title
        self._parts: list[str] = []

    def element(self, name: str, content: str = "", **attributes: object) -> None:
        """An element; `class_` and `stroke_width` become `class` and `stroke-width`."""
        words = "".join(
            f' {key.rstrip("_").replace("_", "-")}="{_attribute(value)}"'
            for key, value in attributes.items()
        )
        self._parts.append(
            f"<{name}{words}>{escaped(content)}</{name}>" if content else f"<{name}{words}/>"
        )

    def text(self, x: float, y: float, words: str, class_: str = "", anchor: str = "start") -> None:
        self.element("text", words or " ", x=x, y=y, class_=class_, text_anchor=anchor)

    def line(self, start: Point, end: Point, class_: str) -> None:
        self.element("line", x1=start[0], y1=start[1], x2=end[0], y2=end[1], class_=class_)

    def rectangle(
        self, x: float, y: float, width: float, height: float, class_: str, hint: str = ""
    ) -> None:
        box = f'x="{x:.1f}" y="{y:.1f}" width="{max(0.0, width):.1f}" height="{height:.1f}"'
        inner = f"<title>{escaped(hint)}</title>" if hint else ""
        self._parts.append(f'<rect {box} class="{escaped(class_)}">{inner}</rect>')

    def path(self, points: Iterable[Point], class_: str, closed: bool = False) -> None:
        """A line through the points; a gap wherever one is not finite."""
        words: list[str] = []
        pen_down = False
        for x, y in points:
            if not (math.isfinite(x) and math.isfinite(y)):
                pen_down = False
                continue
            words.append(f"{'L' if pen_down else 'M'}{x:.1f} {y:.1f}")
            pen_down = True
        if words:
            self.element("path", d="".join(words) + ("Z" if closed else ""), class_=class_)

    def dot(self, x: float, y: float, radius: float, class_: str) -> None:
        self.element("circle", cx=x, cy=y, r=radius, class_=class_)

    def __str__(self) -> str:
        return (
            f'<svg viewBox="0 0 {self.width:g} {self.height:g}" role="img"'
            f' aria-label="{escaped(self._title)}"><title>{escaped(self._title)}</title>'
            + "".join(self._parts)
            + "</svg>"
        )


def _attribute(value: object) -> str:
    return f"{value:.1f}" if isinstance(value, float) else escaped(value)
