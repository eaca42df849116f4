"""The addition plot as inline SVG: vessels, line, the way down to the content on the axis, and its interval.

Colours and weights come from the classes of the page's style sheet; positions are printed with one decimal, so that
equal results give equal text.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from markupsafe import Markup, escape

from spikeward.daemon.pages.axis import Axis, axis_over
from spikeward.daemon.pages.numbers import interval_shown, shown, value_shown
from spikeward.daemon.pages.text import visible
from spikeward.rules.outcomes import Point, Result
from spikeward.rules.words import unit_words

_WIDTH, _HEIGHT = 440, 330
_RIGHT, _TOP, _BOTTOM = 428, 16, 272
_LETTER = 9.3  # width of a digit where the labels are largest, on a narrow screen
_SHAPES = ("round", "square", "diamond", "triangle")
_TO_ZERO = ("linear", "curve")  # responses whose model reaches zero signal at minus the content
_REACH = 1.5  # an interval is drawn this far beyond the rest, in widths of the rest; an arrow says that it goes on


@dataclass(frozen=True, slots=True)
class _Frame:
    """Both axes, and where a value lies on the drawing."""

    x: Axis
    y: Axis

    @property
    def left(self) -> float:
        """Where the drawing starts: the labels beside it need room."""
        return 30.0 + _LETTER * max(len(label) for _, label in self.y.ticks)

    def along(self, share: float) -> float:
        return self.left + (_RIGHT - self.left) * share

    def across(self, value: float) -> float:
        return self.along(self.x.share(value))

    def up(self, value: float) -> float:
        return _BOTTOM - (_BOTTOM - _TOP) * self.y.share(value)


def addition_plot(result: Result, identity: str) -> Markup:
    """The plot of one result, or an empty text where no vessel can be drawn.

    Parameters
    ----------
    identity : a word that no other chart of the page uses, for the ids of title and description
    """
    points = [point for point in result.points if math.isfinite(point.x) and math.isfinite(point.y)]
    if not points:
        return Markup("")
    frame = _frame(result, points)
    parts = [
        _drawn(
            '<title id="{0}-title">{1}</title><desc id="{0}-desc">{2}</desc>',
            identity,
            _title(result),
            _description(result, points),
        ),
        *_axes(frame, result),
        *_line(frame, result, points),
        *_content(frame, result),
        *(_mark(frame, point, shape) for point, shape in zip(points, _shapes(points), strict=True)),
    ]
    return _drawn(
        '<svg class="chart" viewBox="0 0 {1} {2}" role="img" aria-labelledby="{0}-title {0}-desc">\n{3}\n</svg>',
        identity, _WIDTH, _HEIGHT, Markup("\n").join(parts),
    )  # fmt: skip


def _drawn(template: str, *values: object) -> Markup:
    """A piece of the drawing, every text in it escaped; many times faster than the formatter of ``Markup``."""
    return Markup(template.format(*(escape(value) if isinstance(value, str) else value for value in values)))


def _crossing(result: Result) -> float | None:
    """Where the line reaches zero signal, -C0, if the result stands on it."""
    if result.response not in _TO_ZERO or result.content is None or result.no_number:
        return None
    if not math.isfinite(result.content.content):
        return None
    return -result.content.content


def _interval(result: Result) -> tuple[float, float] | None:
    crossing = _crossing(result)
    if crossing is None or result.content is None or result.content.interval is None:
        return None
    low, high = result.content.interval
    return (-high, -low) if math.isfinite(low) and math.isfinite(high) else None


def _frame(result: Result, points: Sequence[Point]) -> _Frame:
    across = [0.0, *(point.x for point in points)]
    crossing = _crossing(result)
    if crossing is not None:
        across.append(crossing)
    interval = _interval(result)
    if interval is not None:
        reach = (max(across) / 2 - min(across) / 2) * 2 * _REACH
        reach = reach if math.isfinite(reach) else 0.0
        across += [max(interval[0], min(across) - reach), min(interval[1], max(across) + reach)]
    upward = [] if result.response == "log" else [0.0]
    upward += [point.y for point in points]
    upward += [point.fitted for point in points if point.fitted is not None and math.isfinite(point.fitted)]
    if result.intercept is not None and math.isfinite(result.intercept):
        upward.append(result.intercept)
    return _Frame(axis_over(min(across), max(across), 6), axis_over(min(upward), max(upward), 5))


def _axes(frame: _Frame, result: Result) -> Iterator[Markup]:
    shown_labels = _with_room(frame)
    for share, label in frame.x.ticks:
        at = frame.along(share)
        yield _drawn('<path class="grid" d="M{0:.1f} {1}V{2}"/>', at, _TOP, _BOTTOM)
        if label in shown_labels:
            yield _drawn('<text class="tick" x="{0:.1f}" y="{1}">{2}</text>', at, _BOTTOM + 18, label)
    for share, label in frame.y.ticks:
        at = _BOTTOM - (_BOTTOM - _TOP) * share
        yield _drawn('<path class="grid" d="M{0:.1f} {1:.1f}H{2}"/>', frame.left, at, _RIGHT)
        yield _drawn('<text class="tick up" x="{0:.1f}" y="{1:.1f}">{2}</text>', frame.left - 6, at + 4.5, label)
    yield _drawn(
        '<path class="axis" d="M{0:.1f} {1:.1f}H{2}M{3:.1f} {4}V{5}"/>',
        frame.left,
        _floor(frame, result),
        _RIGHT,
        frame.across(0.0),
        _TOP,
        _BOTTOM,
    )
    added, middle = frame.x.titled(f"{_analyte(result)} added", unit_words(result.content_unit)), frame.along(0.5)
    yield _drawn('<text class="name" x="{0:.1f}" y="{1}">{2}</text>', middle, _HEIGHT - 12, added)
    what = "Potential" if result.response == "log" else "Signal corrected for volume"
    signal = frame.y.titled(what, visible(result.signal_unit))
    yield _drawn(
        '<text class="name" transform="rotate(-90)" x="{0:.1f}" y="14">{1}</text>', -(_TOP + _BOTTOM) / 2, signal
    )


def _with_room(frame: _Frame) -> set[str]:
    """The labels below the axis that can stand beside each other: every one, or each second or third from zero on."""
    labels = [label for _, label in frame.x.ticks]
    needed = (max(map(len, labels)) + 1) * _LETTER * (len(labels) - 1)
    every = math.ceil(needed / (_RIGHT - frame.left))
    zero = round(frame.x.share(0.0) * (len(labels) - 1))
    return {label for place, label in enumerate(labels) if (place - zero) % every == 0}


def _floor(frame: _Frame, result: Result) -> float:
    """Where the axis of contents lies: at zero signal, and below all potentials."""
    return float(_BOTTOM) if result.response == "log" else frame.up(0.0)


def _line(frame: _Frame, result: Result, points: Sequence[Point]) -> Iterator[Markup]:
    """What was fitted, over the vessels of each run, and dashed down to the axis where it carries a content."""
    crossing = _crossing(result)
    for run in dict.fromkeys(point.block for point in points):
        of_run = ((point.x, point.fitted) for point in points if point.block == run and point.fitted is not None)
        fitted = sorted(set(of_run))
        if len(fitted) < 2 or fitted[0][0] == fitted[-1][0]:
            continue
        if result.response == "linear":
            fitted = [fitted[0], fitted[-1]]
        places = [f"{frame.across(x):.1f} {frame.up(y):.1f}" for x, y in fitted]
        yield _drawn('<path class="fit" d="M{0}"/>', "L".join(places))
        if crossing is not None:
            yield _drawn(
                '<path class="beyond" d="M{0}L{1:.1f} {2:.1f}"/>', places[0], frame.across(crossing), frame.up(0.0)
            )


def _content(frame: _Frame, result: Result) -> Iterator[Markup]:
    """-C0 on the axis with its interval; an end outside the drawing becomes an arrow."""
    crossing, interval, floor = _crossing(result), _interval(result), frame.up(0.0)
    if crossing is None:
        return
    if interval is not None:
        left, right = (min(max(frame.across(end), frame.left), _RIGHT) for end in interval)
        ends = _end(left, floor, -1, frame.x.share(interval[0])) + _end(right, floor, 1, frame.x.share(interval[1]))
        yield _drawn('<path class="interval" d="M{0:.1f} {1:.1f}H{2:.1f}{3}"/>', left, floor, right, ends)
    at = frame.across(crossing)
    yield _drawn('<path class="crossing" d="M{0:.1f} {1:.1f}l4 4l-4 4l-4 -4z"/>', at, floor - 4)
    yield _drawn(
        '<text class="crossing-name" x="{0:.1f}" y="{1:.1f}">−C₀</text>', max(at - 3, frame.left + 28), floor - 12
    )


def _end(at: float, floor: float, side: int, share: float) -> str:
    if 0 <= share <= 1:
        return f"M{at:.1f} {floor - 9:.1f}v18"
    return f"M{at - 6 * side:.1f} {floor - 6:.1f}l{6 * side} 6l{-6 * side} 6"


def _shapes(points: Sequence[Point]) -> list[str]:
    """One shape for each preparation of a level; an excluded vessel is a cross."""
    preparations = list(dict.fromkeys(point.vessel for point in points))
    return [
        "excluded" if point.excluded else _SHAPES[preparations.index(point.vessel) % len(_SHAPES)] for point in points
    ]


def _mark(frame: _Frame, point: Point, shape: str) -> Markup:
    outline = {
        "round": "m-5 0a5 5 0 1 0 10 0a5 5 0 1 0 -10 0z",
        "square": "m-4.5 -4.5h9v9h-9z",
        "diamond": "m0 -6l6 6l-6 6l-6 -6z",
        "triangle": "m0 -6l6 10h-12z",
        "excluded": "m-5 -5l10 10m0 -10l-10 10",
    }[shape]
    left_out = f"; excluded: {visible(point.excluded)}" if point.excluded else ""
    return _drawn('<path class="vessel {0}" d="M{1:.1f} {2:.1f}{3}"><title>{4}</title></path>',
        shape, frame.across(point.x), frame.up(point.y), outline,
        f"level {visible(point.level)}{visible(point.vessel)}: {shown(point.x)} added, {shown(point.y)}{left_out}",
    )  # fmt: skip


def _analyte(result: Result) -> str:
    return visible(result.analyte)


def caption(result: Result) -> str:
    """What the marks of the plot mean, in words."""
    words = "Each mark is a vessel, one shape for each preparation of a level."
    if any(point.excluded for point in result.points):
        words += " A cross is an excluded vessel, which the line leaves out."
    if _crossing(result) is not None:
        words += " The dashed part of the line reaches zero signal at minus the content, −C₀."
    if _interval(result) is not None:
        words += " The bar on the axis is its interval; an arrow says that it goes on beyond the drawing."
    return words


def _title(result: Result) -> str:
    return f"Addition plot of {_analyte(result)}"


def _description(result: Result, points: Sequence[Point]) -> str:
    excluded = sum(bool(point.excluded) for point in points)
    drawn = f"{len(points)} {'vessel' if len(points) == 1 else 'vessels'}"
    drawn += f", {excluded} of them excluded from the line" if excluded else ""
    if _crossing(result) is None or result.content is None:
        if result.content is not None and not result.no_number:
            return f"{drawn}. The content of the test solution is {value_shown(result.content)}."
        return f"{drawn}. No content is read from the line: {visible(result.no_number) or 'there is none yet'}."
    model = "curve" if result.response == "curve" else "line"
    words = f"{drawn}. The {model} meets the axis at minus the content, "
    words += f"{value_shown(result.content)} in the test solution"
    interval = interval_shown(result.content)
    return f"{words}, interval {interval}." if interval else f"{words}."
