"""The pictures of the page on coverage: a small writer of SVG, and what it draws."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from tests.external.coverage_cells import Family, bounds
from tests.external.coverage_draws import DRAWS, NOISE, VESSELS, Cell, measured
from tests.external.coverage_ways import WAYS, compared

_STYLE = """\
<style>
.paper{fill:#ffffff}.ink{fill:#1d2733;font:13px sans-serif}.axis{stroke:#5a6673;fill:none}.faint{stroke:#d7dde3}
.band{fill:#bfe0cb;opacity:.6}.a{fill:#1f6feb;stroke:#1f6feb}.b{fill:#c2410c;stroke:#c2410c}.dot{stroke:none}
.open{fill:none;stroke-width:1.5}.way{fill:none;stroke-width:2}
@media (prefers-color-scheme:dark){.paper{fill:#15191e}.ink{fill:#e6ebf0}.axis{stroke:#9aa7b4}.faint{stroke:#333c46}
.band{fill:#24543a}.a{fill:#7ab7ff;stroke:#7ab7ff}.b{fill:#ff9d5c;stroke:#ff9d5c}}
</style>
"""

Ticks = Sequence[tuple[float, str]]


class Plot:
    """A small picture: axes with ticks and labels, dots, lines and bands, as SVG with a title and a description."""

    def __init__(self, title: str, told: str, x: tuple[str, Ticks], y: tuple[str, Ticks], height: int) -> None:
        self.x_ticks, self.y_ticks = x[1], y[1]
        self.left, self.right, self.top, self.bottom = 60, 690, 28, height - 55
        self.parts = [
            f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 720 {height}" role="img" aria-labelledby="t d">',
            f'<title id="t">{title}</title>\n<desc id="d">{told}</desc>',
            f'{_STYLE}<rect class="paper" width="720" height="{height}"/>',
        ]
        for at, text in x[1]:
            self.parts.append(f'<path class="faint" d="M{self.across(at)} {self.top}V{self.bottom}"/>')
            self.text(self.across(at), f"{self.bottom + 18}", text, "middle")
        for at, text in y[1]:
            self.parts.append(f'<path class="faint" d="M{self.left} {self.up(at)}H{self.right}"/>')
            self.text(f"{self.left - 8}", f"{float(self.up(at)) + 4:.1f}", text, "end")
        self.parts.append(f'<path class="axis" d="M{self.left} {self.top}V{self.bottom}H{self.right}"/>')
        self.text(f"{(self.left + self.right) / 2:.1f}", f"{self.bottom + 42}", x[0], "middle")
        self.text(f"{self.left}", f"{self.top - 6}", y[0], "start")

    def across(self, x: float) -> str:
        """Where x is."""
        low, high = self.x_ticks[0][0], self.x_ticks[-1][0]
        return f"{self.left + (x - low) / (high - low) * (self.right - self.left):.1f}"

    def up(self, y: float) -> str:
        """Where y is."""
        low, high = self.y_ticks[0][0], self.y_ticks[-1][0]
        return f"{self.bottom - (y - low) / (high - low) * (self.bottom - self.top):.1f}"

    def text(self, x: str, y: str, words: str, anchor: str) -> None:
        """Words at a place in the picture."""
        self.parts.append(f'<text class="ink" x="{x}" y="{y}" text-anchor="{anchor}">{words}</text>')

    def dot(self, x: float, y: float, hue: str, size: float = 3.0) -> None:
        """A full dot of hue a, a ring of hue b."""
        kind = "dot" if hue == "a" else "open"
        self.parts.append(f'<circle class="{hue} {kind}" cx="{self.across(x)}" cy="{self.up(y)}" r="{size}"/>')

    def key(self, full: str, ring: str) -> None:
        """What dots and rings are, above the picture on the right."""
        for at, hue, words in ((330, "a", full), (520, "b", ring)):
            kind = "dot" if hue == "a" else "open"
            self.parts.append(f'<circle class="{hue} {kind}" cx="{at}" cy="{self.top - 10}" r="4"/>')
            self.text(f"{at + 10}", f"{self.top - 6}", words, "start")

    def band(self, low: float, high: float) -> None:
        """A band between two x."""
        width = float(self.across(high)) - float(self.across(low))
        self.parts.append(
            f'<rect class="band" x="{self.across(low)}" y="{self.top}" width="{width:.1f}" '
            f'height="{self.bottom - self.top}"/>'
        )

    def way(self, points: Iterable[tuple[float, float]], hue: str, words: str = "") -> None:
        """A line through points, with words at its end."""
        placed = [(self.across(x), self.up(y)) for x, y in points]
        self.parts.append(f'<path class="{hue} way" d="M{"L".join(f"{x} {y}" for x, y in placed)}"/>')
        if words:
            self.text(f"{float(placed[-1][0]) + 4:.1f}", f"{float(placed[-1][1]) + 4:.1f}", words, "start")

    def svg(self) -> str:
        """The whole picture."""
        return "\n".join((*self.parts, "</svg>\n"))


def steps(values: Iterable[float], unit: str = "") -> list[tuple[float, str]]:
    """Ticks at values."""
    return [(value, f"{value:g}{unit}") for value in values]


def lines_of(count: int) -> list[tuple[float, str]]:
    """Ticks for the lines of a table, the first on top."""
    return [(-float(count), ""), *((-float(nth), str(nth + 1)) for nth in reversed(range(count))), (1.0, "")]


def of_cells(chosen: Sequence[Family], cells: int) -> str:
    """Every cell where the model holds, a row of dots for each family."""
    rows = lines_of(len(chosen))
    plot = Plot(
        "Coverage where the model holds",
        "A row for each line of the table above, a dot for each cell. Nearly all dots lie in the band of chance around "
        "95 %; rings, cells in which series were refused, lie in it or above it.",
        ("series with the truth in their interval, or refused, in %", steps((94, 95, 96, 97, 98))),
        ("line of the table", rows), 420,
    )  # fmt: skip
    least, most = bounds(cells)
    plot.band(100.0 * least / DRAWS, 100.0 * most / DRAWS)
    for nth, family in enumerate(chosen):
        for place, cell in enumerate(family.cells):
            found = measured(cell)
            hue = "b" if found.refused else "a"
            plot.dot(100.0 * found.coverage, -nth - 0.3 + 0.6 * (place + 0.5) / len(family.cells), hue, 2.0)
    plot.key("a cell", "a cell with refusals")
    return plot.svg()


def of_refusals() -> str:
    """Series without a number against the noise, one line for each number of vessels."""
    places = range(len(NOISE))
    plot = Plot(
        "Series that get no number",
        "Share of series whose slope does not differ from zero, against the noise, for 3, 4, 5, 6 and 8 vessels. With "
        "three vessels it is most series from a noise of 5 % on; with six it is few even at 10 %.",
        ("noise, in % of the top signal", [(at, f"{100 * NOISE[at]:g}") for at in places]),
        ("series refused, in %", steps((0, 20, 40, 60, 80, 100))), 360,
    )  # fmt: skip
    for n in (3, 4, 5, 6, 8):
        found = [measured(Cell("flasks", n, noise, 1.0)) for noise in NOISE]
        plot.way([(at, found[at].refused * 100.0 / DRAWS) for at in places], "a", f"{n}")
    plot.text("716", f"{plot.top - 6}", "vessels", "end")
    return plot.svg()


def of_widths() -> str:
    """Median half-widths against the number of vessels, own precision beside declared."""
    plot = Plot(
        "How wide the interval is",
        "Median half-width of the interval in per cent of the content, against the number of vessels, for own and for "
        "declared precision. With three or four vessels own precision costs most of the width.",
        ("vessels", steps(VESSELS)), ("median half-width, in % of the content", steps((0, 10, 20, 30, 40, 50))), 360,
    )  # fmt: skip
    for precision, hue in (("declared", "a"), ("own", "b")):
        halves = [(n, 100.0 * measured(Cell("flasks", n, 0.01, 1.0, "constant", precision)).half) for n in VESSELS]
        plot.way(halves, hue)
        for n, half in halves:
            plot.dot(n, half, hue)
    plot.key("declared precision", "own precision")
    return plot.svg()


def of_ways() -> str:
    """The wrong ways beside the right ones."""
    rows = lines_of(len(WAYS))
    plot = Plot(
        "Coverage of wrong ways",
        "A row for each line of the table above: how often the interval holds the truth when calculated rightly (dot, "
        "near 95 %) and wrongly (ring, down to none).",
        ("series of which the interval holds the truth, in %", steps((0, 20, 40, 60, 80, 100))),
        ("line of the table", rows), 420,
    )  # fmt: skip
    for nth, way in enumerate(WAYS):
        one = compared(way)
        plot.way([(100.0 * one.wrong.coverage, -nth), (100.0 * one.right.coverage, -nth)], "b")
        plot.dot(100.0 * one.wrong.coverage, -nth, "b", 5.0)
        plot.dot(100.0 * one.right.coverage, -nth, "a", 3.0)
    plot.key("right", "wrong")
    return plot.svg()
