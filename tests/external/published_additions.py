"""Published arithmetic of additions through the functions of the solver: lines as printed, designs, electrodes."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from spikeward.rules.solve.log_response import LogFit, fit_log_response, theoretical_slope
from tests.external.published_sheets import Sheet, column, figure, line, numbers, without_covariance

ARITHMETIC, CONSTRUCTED = "by arithmetic", "constructed"

SILVER = (numbers("0 5 10 15 20 25 30"), numbers(".32 .41 .52 .60 .70 .77 .89"))
GOLD = (numbers("0 10 20 30 40 50 60 70"), numbers(".257 .314 .364 .413 .468 .528 .574 .635"))
IRON = (numbers("0 5 10 15 20"), numbers(".240 .437 .621 .809 1.009"))
ZINC = (numbers("0 4 8 12"), numbers("6.12 11.16 15.68 20.64"))
PALLADIUM = (numbers("0 5 10 15 20 25"), numbers(".209 .329 .455 .581 .707 .833"))
ALUMINIUM = (numbers("0 0.1 0.2 0.3"), numbers(".214 .386 .554 .728"))


def sheets() -> tuple[Sheet, ...]:
    """All of them."""
    return (
        _silver(), _iron(), _aluminium(), _quenching(), _covariance(), _misprints(), _manganese(), _ore(),
        _small_spike(), _designs(), _double_addition(), _gran(), _ammonia(), _error_budget(), _nernst(),
    )  # fmt: skip


# ---- lines as they are printed -------------------------------------------------------------------------------------


def _silver() -> Sheet:
    fit = line(*SILVER)
    return Sheet(
        "Silver in photographic waste, its line",
        "Miller and Miller, Statistics and Chemometrics for Analytical Chemistry, chapter 5",
        (
            figure("intercept, slope", "0.3218 0.0186", fit.intercept, fit.slope),
            figure("s", "0.01094", fit.residual_sd, within=3e-5),
        ),
        memory="from memory; s printed from a rounded slope",
    )


def _iron() -> Sheet:
    fit = line(*IRON)
    return Sheet(
        "Iron by thiocyanate, its line against mL of standard",
        "Skoog",
        (
            figure("intercept, slope", "0.2412 0.0382", fit.intercept, fit.slope),
            figure("their s", "3.76e-3 3.07e-4", fit.intercept_uncertainty, fit.slope_uncertainty),
        ),
        memory="from memory",
    )


def _aluminium() -> Sheet:
    fit = line(*ALUMINIUM)
    return Sheet(
        "Aluminium in chewing gum, its line against mL of standard",
        "A course's worked example",
        (
            figure("slope, intercept", "1.7100 0.2140", fit.slope, fit.intercept),
            figure("s", "1.7321e-3", fit.residual_sd),
            figure("s of the volume", "1.34532e-3", fit.fit_uncertainty, why=ARITHMETIC),
        ),
        (
            figure(
                "s of the volume", "1.6840e-3", fit.fit_uncertainty,
                why="a term for a separate reading, which an extrapolation has not",
            ),
        ),
    )  # fmt: skip


def _quenching() -> Sheet:
    fit = line(numbers("0 1 2 3"), numbers("68.2 55.3 41.3 28.8"))
    return Sheet(
        "Fluoride by quenching, its line against mL of standard",
        "Skoog, Principles of Instrumental Analysis, problem 15-9",
        (
            figure("intercept, slope", "68.23 -13.22", fit.intercept, fit.slope, why=ARITHMETIC),
            figure("s", "0.4347413", fit.residual_sd, why=ARITHMETIC),
        ),
        memory="signals from memory, printed answer not seen; the series itself is refused",
    )


def _covariance() -> Sheet:
    told = {
        "silver": (SILVER, "0.739"), "gold": (GOLD, "0.7395"), "iron": (IRON, "0.775"), "zinc": (ZINC, "0.7562"),
        "palladium": (PALLADIUM, "0.7685"), "aluminium": (ALUMINIUM, "0.7579"),
    }  # fmt: skip
    fits = {name: line(*points) for name, (points, _) in told.items()}
    found = []
    for name, fit in fits.items():
        share = without_covariance(fit) / fit.fit_uncertainty
        found.append(figure(f"u without the covariance over u, {name}", told[name][1], share, why=ARITHMETIC))
    of = fits["silver"]
    missing = 2.0 * of.content * of.x_mean * of.residual_sd**2 / (of.slope**2 * of.sxx)
    squares = without_covariance(of) ** 2 + missing
    return Sheet(
        "The covariance of slope and intercept",
        "Bruce and Gill, J. Chem. Educ. 76 (1999) 805: without it the standard deviation is always lower",
        (*found, figure("u of silver, its missing part put back", "0.7478706360", math.sqrt(squares), why=ARITHMETIC)),
    )


def _misprints() -> Sheet:
    fit = line(*SILVER)
    return Sheet(
        "Two misprints of the formulas, on the data of silver",
        "A course's lecture notes",
        (figure("content and u", "17.2605363985 0.7478706360", fit.content, fit.fit_uncertainty, why=ARITHMETIC),),
        (
            figure("content", "0.0579", fit.content, why="slope over intercept, for intercept over slope"),
            figure("u", "0.242", fit.fit_uncertainty, why="the slope left unsquared in the variance"),
        ),
    )


def _manganese() -> Sheet:
    signals = [0.0854 * v + 0.1478 for v in range(6)]
    by_volume, by_content = line(range(6), signals), line([100.6 * v / 50.00 for v in range(6)], signals)
    return Sheet(
        "Manganese in six flasks, from either plot",
        "Harvey, Modern Analytical Chemistry (2000), chapter 5",
        (
            figure("zero of the plot, mL", "1.7307", by_volume.content, why=ARITHMETIC),
            figure("zero of the plot, mg/L in the flask", "3.4821", by_content.content, why=ARITHMETIC),
            figure(
                "content by either, mg/L", "6.96 6.96", by_volume.content * 100.6 / 25, by_content.content * 50 / 25
            ),
        ),
        memory="line and answer from memory",
    )


def _ore() -> Sheet:
    x, y = numbers("0 10 20 40 60"), numbers(".15 .25 .34 .44 .53")
    fit, first = line(x, y), line(x[:3], y[:3])
    return Sheet(
        "Nickel in ore, how much a bent line costs",
        "Heinemann Chemistry 2, chapter 7, question 24",
        (
            figure("first three points", "16", first.content, within=0.5),
            figure("first three points", "15.965", first.content, why=ARITHMETIC),
            figure("all five, content and u", "29.719 6.256", fit.content, fit.fit_uncertainty, why=ARITHMETIC),
            figure("all five, correlation", "0.98394", fit.correlation, why=ARITHMETIC),
        ),
        memory="the book reads about 16 off a graph drawn by hand",
    )


def _small_spike() -> Sheet:
    """A vessel that is said not to grow, and one that grows by 1 %."""
    kept, grown = line((0.0, 1.0), (13.0, 21.5)), line((0.0, 1.0), (13.0, 21.5 * 10.1 / 10.0))
    return Sheet(
        "Lead by polarography, dilution left out and taken in",
        "Wang, Analytical Electrochemistry, 2nd ed., example 3-5",
        (
            figure("dilution left out, mmol/L", "1.53", kept.content),
            figure("dilution left out, mmol/L", "1.5294", kept.content, why=ARITHMETIC),
            figure("dilution taken in, mmol/L", "1.4917", grown.content, why=ARITHMETIC),
        ),
    )


# ---- designs -------------------------------------------------------------------------------------------------------


def _spread(additions: Sequence[float]) -> float:
    """u of a content of 1 over the noise, in content."""
    return line(additions, [1.0 + one for one in additions], sd=1.0).fit_uncertainty


def _designs() -> Sheet:
    tops = (0.5, 1.0, 1.5, 2.0, 3.0, 5.0, 10.0)
    equal = [_spread([top * n / 5.0 for n in range(6)]) for top in tops]
    ends = [_spread([0.0, 0.0, 0.0, top, top, top]) for top in tops]
    used = [_spread(each) for each in ((0, 0.5, 1, 1.5), (0, 0.5, 1, 2), (0, 1, 2, 4))]
    steps = "six vessels, top addition 0.5 1 1.5 2 3 5 10 times the content"
    return Sheet(
        "How far designs carry, u over noise",
        "Ellison and Thompson, Analyst 133 (2008) 992",
        (
            figure(f"{steps}, equal steps", "3.016 1.839 1.453 1.263 1.076 0.931 0.825", *equal, why=ARITHMETIC),
            figure(
                f"{steps}, half of them at each end", "2.082 1.291 1.036 .913 .793 .702 .638", *ends, why=ARITHMETIC
            ),
            figure("0 0.5 1 1.5; 0 0.5 1 2; 0 1 2 4 times the content", "1.643 1.363 1.056", *used, why=ARITHMETIC),
        ),
        memory="its rule from memory: readings at both ends are best where the line is straight",
    )


# ---- electrodes ----------------------------------------------------------------------------------------------------

Vessels = tuple[list[float], list[float], list[float]]


def _constructed(volumes: Sequence[float]) -> Vessels:
    """100 mL of content 2 with mL of a standard of 1000: contents added, shares of test solution, exact potentials."""
    x, share = [10.0 * v for v in volumes], [100.0 / (100.0 + v) for v in volumes]
    return x, share, [200.0 - 57.3 * math.log10((2.0 + a) * part) for a, part in zip(x, share, strict=True)]


def _potentials(vessels: Vessels, slope: float = math.nan, slope_u: float = 0.0, noise: float = math.nan) -> LogFit:
    x, share, e = (column(values) for values in vessels)
    known = [np.array([value]) for value in (slope, slope_u, noise)]
    return fit_log_response(x, share, e, np.ones_like(x), *known, 0.95).of(0)


def _double_addition() -> Sheet:
    vessels = _constructed([0.0, 0.5, 1.5])
    e0, e1, e2 = vessels[2]
    fit = _potentials(vessels)
    return Sheet(
        "Double known addition, the slope solved for",
        "Constructed",
        (
            figure("potentials", "182.7510 151.7000 129.8658", *fit.fitted, why=CONSTRUCTED),
            figure("ratio of the steps", "1.7031731072", (e2 - e0) / (e1 - e0), why=CONSTRUCTED),
            figure("content, slope", "2.000000 -57.30000", fit.content, fit.slope, why=CONSTRUCTED),
        ),
    )


def _plot(vessels: Vessels, slope: float) -> tuple[float, float]:
    """Gran's plot, V 10^(E/S) over additions: where it is zero, and its correlation (Gran, Analyst 77 (1952) 661)."""
    x, share, e = vessels
    fit = line(x, [10.0 ** ((one - e[0]) / slope) / part for one, part in zip(e, share, strict=True)])
    return fit.content, fit.correlation


def _gran() -> Sheet:
    vessels = _constructed([0.5 * n for n in range(7)])
    told = {-57.3: "2.0000 1.000000", -59.16: "2.36035 0.999952", -55.0: "1.55498 0.999918"}
    own = _potentials(vessels)
    plots = [
        figure(f"plot with {slope} mV: content, correlation", digits, *_plot(vessels, slope), why=CONSTRUCTED)
        for slope, digits in told.items()
    ]
    return Sheet(
        "A wrong slope leaves a Gran plot straight",
        "Constructed, after the modified Gran plot",
        (*plots, figure("the slope solved for", "2.00000 -57.3000", own.content, own.slope, why=CONSTRUCTED)),
        tuple(
            figure(
                f"content, {slope} mV declared", told[slope].split()[0], _potentials(vessels, slope).content,
                why="off the plot; the fit of the potentials goes half as far and leaves a scatter",
            )
            for slope in (-59.16, -55.0)
        ),
    )  # fmt: skip


def _ammonia() -> Sheet:
    v = [0.0, 10.0, 20.0, 30.0, 40.0]
    vessels = (
        [30.0 * one / 100.0 for one in v],
        [100.0 / (101.0 + one) for one in v],
        [-84.4, -58.1, -46.9, -39.4, -34.7],
    )
    content, correlation = _plot(vessels, 56.6)
    return Sheet(
        "Ammonia in sea water, its Gran plot",
        "Harris, Quantitative Chemical Analysis, problem on an ammonia electrode",
        (
            figure("zero, mL", "3.64736", content * 100.0 / 30.0, why=ARITHMETIC),
            figure("content, mg/L, and correlation", "1.09421 0.999537", content, correlation, why=ARITHMETIC),
            figure("content with the base in it, mg/L", "1.08337", content * 100.0 / 101.0, why=ARITHMETIC),
        ),
        memory="from memory; printed answer not remembered",
    )


def _known_addition(step: float) -> tuple[float, float]:
    """Per cent of content by 0.1 mV in a step and by 0.1 mV in the slope, 1.5 % of volume added."""
    vessels = [0.0, 1.015 * 10.0 ** (step / 59.16) - 1.0], [1.0, 1.0 / 1.015], [0.0, step]
    noise = 0.1 / math.sqrt(2.0)  # of a reading, so that the step has 0.1 mV
    alone = _potentials(vessels, 59.16, 0.0, noise).fit_uncertainty
    both = _potentials(vessels, 59.16, 0.1, noise).fit_uncertainty
    return 100.0 * alone, 100.0 * math.sqrt(both**2 - alone**2)


def _error_budget() -> Sheet:
    table = {10.0: "1.17 0.20", 20.0: "0.71 0.24", 30.0: "0.56 0.29", 60.0: "0.43 0.44"}
    found = [
        figure(f"step of {step:g} mV: per cent by 0.1 mV in it, in the slope", told, *_known_addition(step),
               why=ARITHMETIC, within=0.006)
        for step, told in table.items()
    ]  # fmt: skip
    return Sheet(
        "Error budget of one known addition",
        "A published budget of gravimetric additions to a fluoride electrode: at most 0.8 % from 20 mV on",
        (*found, figure("step of 20 mV, both", "0.75", math.hypot(*_known_addition(20.0)), why=ARITHMETIC)),
    )


def _nernst() -> Sheet:
    at_25, at_25_of_two = theoretical_slope(25.0, 1), theoretical_slope(25.0, 2)
    return Sheet(
        "The slope of an ideal electrode",
        "Wang, Analytical Electrochemistry, 2nd ed., chapter 5",
        (
            figure("mV per decade at 25 degC", "59.16", at_25),
            figure("per cent of a direct reading by 1 mV", "4", 100.0 * (10.0 ** (1.0 / at_25) - 1.0)),
            figure("by 0.1 mV", "0.4", 100.0 * (10.0 ** (0.1 / at_25) - 1.0)),
            figure("by 1 mV, two charges", "8.10", 100.0 * (10.0 ** (1.0 / at_25_of_two) - 1.0), why=ARITHMETIC),
        ),
    )
