"""Published lines, curves and critical values through the functions of the solver."""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal

from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.quantities import Quantity
from spikeward.rules.records import Reading, SeriesKey
from spikeward.rules.solve.calibration import beside, calibration_of
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.line import Fit
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.weights import pool
from spikeward.rules.uncertainty.fieller import t_quantile
from tests.external.published_sheets import Sheet, figure, line, numbers, tests_of
from tests.external.test_reference_data import LOADS, PONTIUS, norris

ARITHMETIC = "by arithmetic"


def sheets() -> tuple[Sheet, ...]:
    """All of them."""
    return (
        _norris(), _pontius(), _through_origin(), _through_origin_again(), _thermometer(), _fluorescein(), _weighted(),
        _ceramic(), _with_known_noise(), _straight_or_not(), _cochran(), _student(), _fisher(),
    )  # fmt: skip


# ---- reference data ------------------------------------------------------------------------------------------------


def _norris() -> Sheet:
    fit = line(*norris())
    return Sheet(
        "Norris, a straight line",
        "NIST StRD, linear regression",
        (
            figure("intercept", "-0.262323073774029", fit.intercept, relative=1e-12),
            figure("its standard deviation", "0.232818234301152", fit.intercept_uncertainty, relative=1e-12),
            figure("slope", "1.00211681802045", fit.slope, relative=1e-13),
            figure("its standard deviation", "0.429796848199937e-3", fit.slope_uncertainty, relative=1e-12),
            figure("residual standard deviation", "0.884796396144373", fit.residual_sd, relative=1e-12),
            figure("R squared", "0.999993745883712", fit.correlation**2, relative=1e-13),
            figure("F", "5436385.54079785", (fit.slope / fit.slope_uncertainty) ** 2, relative=1e-12),
        ),
    )


def _pontius() -> Sheet:
    deflections = [float(one) for one in PONTIUS]
    fit, tests = line(LOADS, deflections), tests_of(LOADS, deflections)
    b0, b1, b2 = tests.parabola[:, 0]
    return Sheet(
        "Pontius, a parabola",
        "NIST StRD, linear regression",
        (
            figure("coefficient of 1", "0.673565789473684e-3", b0, relative=1e-11),
            figure("coefficient of x", "0.732059160401003e-6", b1, relative=1e-12),
            figure("coefficient of x squared", "-0.316081871345029e-14", b2, relative=1e-11),
            figure("residual standard deviation", "0.205177424076185e-3", tests.parabola_sd[0], relative=1e-12),
            figure("F, parabola against line", "4218.52506", tests.mandel[0]),
            figure("F, lack of fit of the line", "214.747", tests.lack_of_fit[0], why=ARITHMETIC),
            figure("correlation of the line", "0.99999426", fit.correlation, why=ARITHMETIC),
        ),
        (figure("coefficient of x", "0.673565789473684e-3", b1, why="a copy prints the coefficient of 1 twice"),),
    )


def _mirrored(x: Sequence[float], y: Sequence[float]) -> tuple[list[float], list[float]]:
    """The points, and each once more on the other side of the origin, so that the line goes through it."""
    return [*x, *(-one for one in x)], [*y, *(-one for one in y)]


def _origin(title: str, x: Sequence[float], y: Sequence[float], certified: str) -> Sheet:
    fit = line(*_mirrored(x, y))
    slope, u, s, r_squared, f = certified.split()
    twice = math.sqrt(2.0)  # each point counts twice
    return Sheet(
        title,
        "NIST StRD, linear regression",
        (
            figure("slope", slope, fit.slope, relative=1e-13),
            figure("its standard deviation", u, fit.slope_uncertainty * twice, relative=1e-12),
            figure("residual standard deviation", s, fit.residual_sd, relative=1e-12),
            figure("R squared", r_squared, fit.correlation**2, relative=1e-13),
            figure("F", f, (fit.slope / fit.slope_uncertainty) ** 2 / 2.0, relative=1e-12),
        ),
        memory="each point also mirrored in the origin",
    )


def _through_origin() -> Sheet:
    certified = "2.07438016528926 0.165289256198347e-1 3.56753034006338 0.999365492298663 15750.25"
    return _origin("NoInt1, through the origin", range(60, 71), range(130, 141), certified)


def _through_origin_again() -> Sheet:
    certified = "0.727272727272727 0.420827318078432e-1 0.369274472937998 0.993348115299335 298.666666666667"
    return _origin("NoInt2, through the origin", (4, 5, 6), (3, 4, 4), certified)


# ---- calibration lines ---------------------------------------------------------------------------------------------


def _thermometer() -> Sheet:
    x = numbers("1.521 2.012 2.512 3.003 3.507 3.999 4.513 5.002 5.503 6.010 6.511")
    y = numbers("-.171 -.169 -.166 -.159 -.164 -.165 -.156 -.157 -.159 -.161 -.160")
    fit = line(x, y)
    at_30 = math.sqrt(fit.intercept_uncertainty**2 + 100 * fit.slope_uncertainty**2 + 20 * fit.covariance)
    return Sheet(
        "Calibration of a thermometer",
        "JCGM 100:2008, H.3",
        (
            figure("y1", "-0.1712", fit.intercept),
            figure("u(y1)", "0.0029", fit.intercept_uncertainty),
            figure("y2", "0.00218", fit.slope),
            figure("u(y2)", "0.00067", fit.slope_uncertainty),
            figure("r(y1, y2)", "-0.930", fit.covariance / (fit.slope_uncertainty * fit.intercept_uncertainty)),
            figure("s", "0.0035", fit.residual_sd),
            figure("correction at 30 degC", "-0.1494", fit.intercept + 10 * fit.slope),
            figure("its standard uncertainty", "0.0041", at_30),
            figure("y1, y2", "-0.1712037901 0.0021826977", fit.intercept, fit.slope, why=ARITHMETIC),
        ),
    )


FLUORESCEIN = (numbers("0 2 4 6 8 10 12"), numbers("2.1 5.0 9.0 12.6 17.3 21.0 24.7"))
FURTHER = (numbers("14 16 18 20"), numbers("28.4 31.0 32.9 33.9"))


def _reading(series: SeriesKey, level: str, signal: float, row: int) -> Reading:
    return Reading(
        series, level, "", "", "", f"{series.sample} {level}", "X", "", "A", signal, str(signal), "", 1, None, "", "",
        None, (), (), "run.csv", row, "",
    )  # fmt: skip


def _read_off(points: tuple[Sequence[float], Sequence[float]], signals: Sequence[float]) -> tuple[float, float]:
    """Content and half-width of 95 % of a test solution that reads so, off a calibration; additions are invented."""
    standards = [_reading(SeriesKey("", "", "", "calibration", f"S{n}"), "", y, n) for n, y in enumerate(points[1])]
    contents = {f"S{n}": {"X": Quantity(Decimal(f"{x:g}"), "mg/L")} for n, x in enumerate(points[0])}
    key = SeriesKey("", "", "", "sample", "1")
    mean, top = sum(signals) / len(signals), points[1][-1]
    bare = [PreparedVessel("0", str(n), 1, 0, 1, 0.0, (_reading(key, "0", s, n),)) for n, s in enumerate(signals)]
    spiked = [
        PreparedVessel(str(n), "", 1, 0, 1, float(n), (_reading(key, str(n), mean + n * top, 9 + n),)) for n in (1, 2)
    ]
    prepared = PreparedLine(key, "X", "", "flasks", "mg/L", "A", (*bare, *spiked), None, "", "")
    (solved,) = solve_lines([Job(prepared)], 0.95)
    found = beside(solved, calibration_of(standards, contents, None), 0.95)
    assert found is not None
    assert found.estimate.expanded_uncertainty is not None
    return found.estimate.content, found.estimate.expanded_uncertainty


def _fluorescein() -> Sheet:
    fit = line(*FLUORESCEIN)
    t = t_quantile(fit.dof, 0.95)
    low, middle, high = (_read_off(FLUORESCEIN, [signal]) for signal in (2.9, 13.5, 23.0))
    longer = [*FLUORESCEIN[0], *FURTHER[0]], [*FLUORESCEIN[1], *FURTHER[1]]
    return Sheet(
        "Fluorescein, a plain calibration",
        "Miller and Miller, Statistics and Chemometrics for Analytical Chemistry, chapter 5",
        (
            figure("slope", "1.93", fit.slope),
            figure("intercept", "1.52", fit.intercept),
            figure("s", "0.4329", fit.residual_sd, within=1e-4),
            figure("s of slope", "0.0409", fit.slope_uncertainty),
            figure("s of intercept", "0.2950", fit.intercept_uncertainty, within=1e-4),
            figure("correlation", "0.9989", fit.correlation),
            figure("limits of slope, intercept", "0.11 0.76", t * fit.slope_uncertainty, t * fit.intercept_uncertainty),
            figure("content at 2.9", "0.72 0.68", *low),
            figure("content at 13.5", "6.21 0.62", *middle),
            figure("limits of four readings of 13.5", "0.36", _read_off(FLUORESCEIN, [13.5] * 4)[1]),
            figure("content at 23.0", "11.13 0.68", *high),
            figure("detection limit, 3 s over slope", "0.67", 3 * fit.residual_sd / fit.slope),
            figure("F, curvature with four more points", "16.10", tests_of(*longer).mandel[0], why=ARITHMETIC),
            figure("their correlation", "0.9924", line(*longer).correlation, why=ARITHMETIC),
        ),
        memory="from memory; s and its kin printed from rounded numbers",
    )


WEIGHTED = (
    numbers("0 2 4 6 8 10"), numbers(".009 .158 .301 .472 .577 .739"), numbers(".001 .004 .010 .013 .017 .022"),
)  # fmt: skip


def _weighted() -> Sheet:
    x, y, sd = WEIGHTED
    raw = [1.0 / one**2 for one in sd]
    weights = [one * len(raw) / sum(raw) for one in raw]
    fit, plain = line(x, y, weights), line(x, y)
    weights_of_book = "5.53534 0.345959 0.0553534 0.0327535 0.0191534 0.0114367"
    return Sheet(
        "A weighted calibration",
        "Miller and Miller, Statistics and Chemometrics for Analytical Chemistry, chapter 5",
        (
            figure("slope, intercept", "0.0738 0.0091", fit.slope, fit.intercept),
            figure("content at 0.1, 0.6", "1.23 8.01", *((at - fit.intercept) / fit.slope for at in (0.1, 0.6))),
            figure("weights", weights_of_book, *weights, why=ARITHMETIC),
            figure("slope, intercept", "0.07375997 0.00908391", fit.slope, fit.intercept, why=ARITHMETIC),
            figure("mean of x", "0.2295745", fit.x_mean, why=ARITHMETIC),
            figure("s", "0.00249548", fit.residual_sd, why=ARITHMETIC),
            figure("unweighted", "0.0725429 0.0132857", plain.slope, plain.intercept, why=ARITHMETIC),
            figure("content at 0.1, unweighted", "1.20 0.65", *_read_off((x, y), [0.1])),
            figure("content at 0.6, unweighted", "8.09 0.63", *_read_off((x, y), [0.6]), within=0.01),
        ),
        memory="limits from memory; of the weighted line they depend on the weight of the unknown: not compared",
    )


CERAMIC = (
    [x for x in numbers("0.1 0.3 0.5 0.7 0.9") for _ in range(3)],
    numbers(".028 .029 .029 .084 .083 .081 .135 .131 .133 .180 .181 .183 .215 .230 .216"),
)


def _ceramic() -> Sheet:
    fit, tests = line(*CERAMIC), tests_of(*CERAMIC)
    together = fit.covariance / (fit.slope_uncertainty * fit.intercept_uncertainty)
    return Sheet(
        "Cadmium from ceramic, the calibration line",
        "Eurachem/CITAC Guide, Quantifying Uncertainty in Analytical Measurement, example A5",
        (
            figure("slope and its u", "0.2410 0.0050", fit.slope, fit.slope_uncertainty),
            figure("intercept and its u", "0.0087 0.0029", fit.intercept, fit.intercept_uncertainty),
            figure("s", "0.005486", fit.residual_sd),
            figure("correlation", "0.997", fit.correlation),
            figure(
                "u of both", "0.00500769 0.00287670", fit.slope_uncertainty, fit.intercept_uncertainty, why=ARITHMETIC
            ),
            figure("correlation of both", "-0.870388", together, why=ARITHMETIC),
            figure("F, curvature", "15.329", tests.mandel[0], why=ARITHMETIC),
            figure("F, lack of fit", "4.885", tests.lack_of_fit[0], why=ARITHMETIC),
            figure("probability of the latter", "0.024", tests.lack_p[0], why=ARITHMETIC),
        ),
    )


def _with_known_noise() -> Sheet:
    x = numbers("1 2 3 4 5 6")
    same = line(x, numbers("3.3 5.6 7.1 9.3 10.7 12.1"), sd=0.5)
    other = line(x, numbers("3.2 4.3 7.6 8.6 11.7 12.8"), [1, 1, 1, 0.25, 0.25, 0.25], sd=0.5)
    cases = (
        ("equal u", same, 0.5, "1.867 0.465 1.757 0.120 -0.050 1.665", "4.913 0.322",
         "1.8666667 0.46547467 1.7571429 0.11952286 -0.05 1.6647619", "4.9132791 0.3220356"),
        ("u 0.5 and 1.0", other, 1.0, "0.8852 0.5297 2.0570 0.1779 -0.0823 4.131", "4.674 0.533",
         "0.88523207 0.52970814 2.05696203 0.17789202 -0.08227848 4.1308017", "4.6742564 0.5331809"),
    )  # fmt: skip
    figures = []
    for name, fit, u, told, at, sharp, sharply in cases:
        ours = (
            fit.intercept, fit.intercept_uncertainty, fit.slope, fit.slope_uncertainty, fit.covariance,
            fit.dof * (fit.residual_sd / 0.5) ** 2,
        )  # fmt: skip
        figures += [
            figure(f"{name}: a, u, b, u, covariance, chi squared", told, *ours),
            figure(f"{name}: x at 10.5, u", at, *_inverse(fit, 10.5, u)),
            figure(f"{name}: a, u, b, u, covariance, chi squared", sharp, *ours, why=ARITHMETIC),
            figure(f"{name}: x at 10.5, u", sharply, *_inverse(fit, 10.5, u), why=ARITHMETIC),
        ]
    return Sheet("Lines with known noise", "ISO/TS 28037:2010, clause 6, examples", tuple(figures))


def _inverse(fit: Fit, y: float, u: float) -> tuple[float, float]:
    """x at a y with its own u (ISO/TS 28037:2010, clause 11, from memory)."""
    x = (y - fit.intercept) / fit.slope
    variance = u**2 + fit.intercept_uncertainty**2 + (x * fit.slope_uncertainty) ** 2 + 2.0 * x * fit.covariance
    return x, math.sqrt(variance) / fit.slope


def _straight_or_not() -> Sheet:
    sets = {
        "silver": (range(0, 35, 5), ".32 .41 .52 .60 .70 .77 .89", "0.0080"),
        "iron": (range(0, 25, 5), ".240 .437 .621 .809 1.009", "0.2244"),
        "gold": (range(0, 80, 10), ".257 .314 .364 .413 .468 .528 .574 .635", "1.166"),
        "nickel in ore": ((0, 10, 20, 40, 60), ".15 .25 .34 .44 .53", "15.69"),
    }
    return Sheet(
        "Test values of curvature",
        "ISO 8466-1, the test of Mandel, on series of this page",
        tuple(figure(name, f, tests_of(x, numbers(y)).mandel[0], why=ARITHMETIC) for name, (x, y, f) in sets.items()),
        memory="from memory; a curve that bends nickel in ore by a factor of 1.9 stays below 18.51, F(95 %; 1, 2)",
    )


# ---- critical values -----------------------------------------------------------------------------------------------


def _largest(k: int, nu: int, level: float) -> float:
    return pool([1.0] * k, [1.0] * k, [float(nu)] * k, level).limits[0]


_FIVE = {
    2: ".9985 .9750 .9392 .9057 .8772", 3: ".9669 .8709 .7977 .7457 .7070", 4: ".9065 .7679 .6839 .6287 .5894",
    5: ".8413 .6838 .5981 .5440 .5063", 6: ".7807 .6161 .5321 .4803 .4447", 8: ".6798 .5157 .4377 .3910 .3594",
    10: ".6020 .4450 .3733 .3311 .3028",
}  # fmt: skip
_ONE = {
    2: ".9999 .9950 .9794 .9586 .9373", 5: ".9279 .7885 .6957 .6329 .5875", 10: ".7175 .5358 .4469 .3934 .3572",
}  # fmt: skip


def _cochran() -> Sheet:
    return Sheet(
        "Cochran's largest variance, critical values",
        "Tables of Cochran's test; R. U. E. 't Lam, Anal. Chim. Acta 659 (2010) 68",
        tuple(
            figure(
                f"{100 * level:g} %, {k} series of 1 to 5 degrees of freedom",
                row,
                *(_largest(k, n, level) for n in range(1, 6)),
            )
            for level, rows in ((0.05, _FIVE), (0.01, _ONE))
            for k, row in rows.items()
        ),
        (
            figure("5 %, 3 series of 3", "0.0797", _largest(3, 3, 0.05), why="digits exchanged in a copy, for 0.7977"),
            figure("5 %, 2 series of 5", "0.8584", _largest(2, 5, 0.05), why="a slip in a copy, for 0.8772"),
        ),
    )


def _student() -> Sheet:
    table = "12.7062 4.3027 3.1824 2.7764 2.5706 2.4469 2.3646 2.3060 2.2622 2.2281 2.0860"
    return Sheet(
        "Student's t, 95 % in the middle",
        "Tables of Student's t (common practice)",
        (figure("1 to 10 and 20 degrees of freedom", table, *(t_quantile(n, 0.95) for n in (*range(1, 11), 20))),),
    )


def _f(k: int, level: float) -> float:
    """F(1 - level; 1, k) as it stands in the limit of the first of two series with 1 and k degrees of freedom."""
    part = pool([1.0, 1.0], [1.0, 1.0], [1.0, float(k)], 2.0 * level).limits[0]
    return k * part / (1.0 - part)


def _fisher() -> Sheet:
    tables = {0.05: "10.128 7.709 6.608 5.987 5.591 5.318", 0.01: "34.116 21.198 16.258 13.745 12.246 11.259"}
    return Sheet(
        "Fisher's F with 1 and 3 to 8 degrees of freedom",
        "Tables of F (common practice)",
        tuple(figure(f"{100 - 100 * p:g} %", row, *(_f(k, p) for k in range(3, 9))) for p, row in tables.items()),
        memory="out of the limits of Cochran's test",
    )
