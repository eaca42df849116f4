"""Certified and published data through the arithmetic of lines and curves. The source stands beside each."""

from __future__ import annotations

import math
from decimal import Decimal
from fractions import Fraction
from importlib.resources import files

import numpy as np
import pytest

from spikeward.rules.solve.line import Fits, fit_lines
from spikeward.rules.solve.straightness import Straightness, straightness
from spikeward.rules.uncertainty.fieller import g_values, half_widths_each, t_quantiles


def column(values) -> np.ndarray:
    return np.array([float(value) for value in values]).reshape(-1, 1)


def fit_of(x, y) -> Fits:
    x, y = column(x), column(y)
    return fit_lines(x, y, np.ones_like(x), np.ones_like(x))


def curve_of(x, y) -> Straightness:
    x, y = column(x), column(y)
    return straightness(x, y, np.ones_like(x))


# ---- NIST StRD, linear regression --------------------------------------------------------------------------------

# Norris, lower level of difficulty: certified values
B0, U_B0 = -0.262323073774029, 0.232818234301152
B1, U_B1 = 1.00211681802045, 0.429796848199937e-3
S, R_SQUARED = 0.884796396144373, 0.999993745883712


def norris() -> tuple[list[float], list[float]]:
    """The points, as scipy ships the file for its own tests."""
    text = (files("scipy.stats") / "tests/data/nist_linregress/Norris.dat").read_text(encoding="utf-8")
    numbers = [tuple(map(float, row.split())) for row in text.splitlines()[60:] if row.strip()]
    assert len(numbers) == 36
    return [x for _, x in numbers], [y for y, _ in numbers]


@pytest.mark.parametrize("x_factor", [1.0, 1e9, 1e-9])
@pytest.mark.parametrize("y_factor", [1.0, 1e9, 1e-9])
def test_norris(x_factor, y_factor):
    """Twelve digits, in any unit: the slope then changes by the ratio of the units and nothing else does."""
    x, y = norris()
    fit = fit_of([one * x_factor for one in x], [one * y_factor for one in y])
    assert fit.intercept[0] == pytest.approx(B0 * y_factor, rel=1e-12)
    assert fit.intercept_uncertainty[0] == pytest.approx(U_B0 * y_factor, rel=1e-12)
    assert fit.slope[0] == pytest.approx(B1 * y_factor / x_factor, rel=1e-13)
    assert fit.slope_uncertainty[0] == pytest.approx(U_B1 * y_factor / x_factor, rel=1e-12)
    assert fit.residual_sd[0] == pytest.approx(S * y_factor, rel=1e-12)
    assert fit.correlation[0] ** 2 == pytest.approx(R_SQUARED, rel=1e-13)
    assert fit.content[0] == pytest.approx(B0 / B1 * x_factor, rel=1e-12)


def test_norris_far_from_zero():
    """x larger by 2^20: slope and scatter stay, the intercept is smaller by slope 2^20.

    One decimal of x is lost in the binary digits of x + 2^20, 2^-33 of it, which the slope cannot know; so eleven
    digits of the slope are what the data allow (spread of x about 1000, 2^-33/1000 = 1e-13, over 36 points).
    """
    x, y = norris()
    fit = fit_of([one + 2.0**20 for one in x], y)
    assert fit.slope[0] == pytest.approx(B1, rel=1e-11)
    assert fit.slope_uncertainty[0] == pytest.approx(U_B1, rel=1e-10)
    assert fit.residual_sd[0] == pytest.approx(S, rel=1e-10)
    assert fit.intercept[0] == pytest.approx(B0 - B1 * 2.0**20, rel=1e-11)


_PONTIUS = (
    (".11019 .21956 .32949 .43899 .54803 .65694 .76562 .87487 .98292 1.09146 1.20001 1.30822 1.41599 1.52399 1.63194 "
      "1.73947 1.84646 1.95392 2.06128 2.16844"),
    (".11052 .22018 .32939 .43886 .54798 .65739 .76596 .87474 .98300 1.09150 1.20004 1.30818 1.41613 1.52408 1.63159 "
      "1.73965 1.84696 1.95445 2.06177 2.16829"),
)  # fmt: skip
PONTIUS = tuple(one for half in _PONTIUS for one in half.split())
LOADS = tuple(150000.0 * number for number in range(1, 21)) * 2
C0, C1, C2 = 0.673565789473684e-3, 0.732059160401003e-6, -0.316081871345029e-14
PONTIUS_S = 0.205177424076185e-3


@pytest.mark.parametrize("x_factor", [1.0, 1e9, 1e-9])
@pytest.mark.parametrize("y_factor", [1.0, 1e9, 1e-9])
def test_pontius(x_factor, y_factor):
    """NIST StRD, Pontius: certified coefficients and standard deviation of the parabola.

    F against the straight line as an analysis of variance of R gives it, 4218.52506; correlation 0.99999 all the same.
    """
    x, y = [one * x_factor for one in LOADS], [float(one) * y_factor for one in PONTIUS]
    found = curve_of(x, y)
    expected = [C0 * y_factor, C1 * y_factor / x_factor, C2 * y_factor / x_factor / x_factor]
    assert found.parabola[:, 0].tolist() == pytest.approx(expected, rel=1e-11)
    assert found.parabola_sd[0] == pytest.approx(PONTIUS_S * y_factor, rel=1e-12)
    assert found.mandel[0] == pytest.approx(4218.52506, abs=5e-6)
    assert (found.mandel_dof[0], found.lack_dof[0], found.pure_dof[0]) == (37.0, 18.0, 20.0)
    assert fit_of(x, y).correlation[0] == pytest.approx(0.99999426, abs=5e-9)
    assert not found.exact[0]


def test_pontius_far_from_zero():
    """x larger by a million: the curvature and the scatter stay to 13 digits, and F with them.

    The other coefficients follow from the certified ones in exact arithmetic: b1 - 2 b2 h and b0 - b1 h + b2 h².
    """
    h = Fraction(10**6)
    b0, b1, b2 = (Fraction(Decimal(repr(one))) for one in (C0, C1, C2))
    found = curve_of([one + 1e6 for one in LOADS], PONTIUS)
    expected = [float(b0 - b1 * h + b2 * h * h), float(b1 - 2 * b2 * h), C2]
    assert found.parabola[:, 0].tolist() == pytest.approx(expected, rel=1e-12)
    assert found.parabola_sd[0] == pytest.approx(PONTIUS_S, rel=1e-12)
    assert found.mandel[0] == pytest.approx(4218.52506, abs=5e-6)


def test_pontius_lack_of_fit():
    """Sums of squares in exact arithmetic: what the line leaves, and what two readings at one load differ by."""
    pairs = list(zip(map(Fraction, PONTIUS[:20]), map(Fraction, PONTIUS[20:]), strict=True))
    pure = sum((a - b) ** 2 / 2 for a, b in pairs)
    x, y = [Fraction(one) for one in LOADS], [Fraction(one) for one in PONTIUS]
    x_mean, y_mean = sum(x) / 40, sum(y) / 40
    sxx = sum((one - x_mean) ** 2 for one in x)
    sxy = sum((one - x_mean) * (other - y_mean) for one, other in zip(x, y, strict=True))
    of_line = sum((one - y_mean) ** 2 for one in y) - sxy**2 / sxx
    assert curve_of(LOADS, PONTIUS).lack_of_fit[0] == pytest.approx(
        float((of_line - pure) / 18 / (pure / 20)), rel=1e-11
    )


# ---- published standard additions ----------------------------------------------------------------------------------

ASCORBIC = (0.0, 0.050, 0.250, 0.400, 0.550, 0.700, 0.850, 1.000, 1.150)
CURRENTS = ("1.78", "2.00", "2.81", "3.35", "3.88", "4.37", "4.86", "5.33", "5.82")

# Points as published. The figures are computed from them: a, b, s, u(a), u(b), r, content, u(content) with and without
# the covariance and with the term for a reading of its own, half-width t u, Fieller's two ends.
SERIES = {
    "silver in photographic waste: Miller and Miller, chapter 5 (from memory)": (
        range(0, 35, 5), "0.32 0.41 0.52 0.60 0.70 0.77 0.89",
        "0.321785714286 0.0186428571429 0.0109217999563 0.00744195223 0.000412805236 0.998776489 17.2605363985 "
        "0.7478706360 0.55265 0.95001 1.92246 15.43696 19.29383",
    ),
    "gold in concentrated sea water: Miller and Miller, chapter 5, exercise": (
        range(0, 80, 10), "0.257 0.314 0.364 0.413 0.468 0.528 0.574 0.635",
        "0.256916666667 0.00534880952381 0.00369389242803 0.00238439731 5.69979976e-5 0.999659510 48.0324949922 "
        "0.9178817169 0.67875 1.14867 2.24598 45.84154 50.33644",
    ),
    "iron by thiocyanate: Skoog, against the volume of standard": (
        range(0, 25, 5), "0.240 0.437 0.621 0.809 1.009",
        "0.2412 0.0382 0.00485798312 0.00376297754 0.000307245830 0.999902977 6.31413612565 0.1430111635 0.11083 "
        "0.19138 0.45513 5.86943 6.78023",
    ),
    "zinc by fluorescence: Skoog, Principles of Instrumental Analysis, 15-8, against the volume": (
        range(0, 16, 4), "6.12 11.16 15.68 20.64",
        "6.188 1.202 0.154402072525 0.129182042 0.0172626765 0.999793807 5.14808652246 0.1725069036 0.13045 0.21508 "
        "0.74224 4.44593 5.93570",
    ),
    "palladium in a meteorite: Skoog, Fundamentals of Analytical Chemistry, 26-31, against the volume": (
        range(0, 30, 5), "0.209 0.329 0.455 0.581 0.707 0.833",
        "0.206142857143 0.0250285714286 0.00207019667803 0.00149829835 9.89743319e-5 0.999968726 8.23630136986 "
        "0.0886812946 0.06815 0.12127 0.24622 7.99256 8.48505",
    ),
    "aluminium in chewing gum: a published course tutorial, against the volume": (
        "0 0.1 0.2 0.3", "0.214 0.386 0.554 0.728",
        "0.214 1.71 0.00173205080757 0.00144913767 0.00774596669 0.999979481 0.125146198830 0.001345324890 0.00101957 "
        "0.00168399993 0.00578847 0.119460 0.131041",
    ),
    "ascorbic acid in one vessel: Harris, Quantitative Chemical Analysis, figure 5-5 (from memory)": (
        [279.0 * v / 50.0 for v in ASCORBIC],
        [float(i) * (50.0 + v) / 50.0 for i, v in zip(CURRENTS, ASCORBIC, strict=True)],
        "1.86870433665 0.646299951854 0.0644700701547 0.0374180521 0.00998094229 0.999166320 2.89138863664 "
        "0.0978691034 0.07311 0.13975 0.23142 2.66763 3.13106",
    ),
}  # fmt: skip


def points(name: str) -> tuple[list[float], list[float]]:
    """Additions and signals of a published series."""
    return tuple(
        [float(one) for one in (values.split() if isinstance(values, str) else values)] for values in SERIES[name][:2]
    )


def like(figure: str):
    """Half a unit of the last digit that is shown, and never less than 1e-9 of the value."""
    value = Decimal(figure)
    shown = float(Decimal((0, (5,), int(value.as_tuple().exponent) - 1)))
    return pytest.approx(float(value), rel=1e-9, abs=shown)


@pytest.mark.parametrize("name", SERIES)
def test_published_additions(name):
    figures = SERIES[name][2]
    a, b, s, u_a, u_b, r, content, u, without, separate, half, lower, upper = figures.split()
    fit = fit_of(*points(name))
    assert fit.intercept[0] == like(a)
    assert fit.slope[0] == like(b)
    assert fit.residual_sd[0] == like(s)
    assert fit.intercept_uncertainty[0] == like(u_a)
    assert fit.slope_uncertainty[0] == like(u_b)
    assert fit.correlation[0] == like(r)
    assert fit.content[0] == like(content)
    assert fit.fit_uncertainty[0] == like(u)
    t = t_quantiles(fit.dof, 0.95)
    assert t[0] * fit.fit_uncertainty[0] == like(half)
    g = g_values(t, fit.slope, fit.slope_uncertainty)
    below, above = half_widths_each(fit.content, fit.x_mean, fit.spread, fit.weight, g)
    assert fit.content[0] - below[0] == like(lower)
    assert fit.content[0] + above[0] == like(upper)
    # two wrong formulas are in print: without the covariance it is too small, and no reading of its own is there
    relative = (fit.intercept_uncertainty / fit.intercept) ** 2 + (fit.slope_uncertainty / fit.slope) ** 2
    assert fit.content[0] * math.sqrt(relative[0]) == like(without)
    assert fit.fit_uncertainty[0] > 1.05 * float(without)
    assert fit.fit_uncertainty[0] < 0.9 * float(separate)


@pytest.mark.parametrize("name", SERIES)
def test_the_covariance_is_the_difference(name):
    """u1² = u2² + 2 C0 xbar s²/(b² Sxx), u2 without covariance (Bruce and Gill, J. Chem. Educ. 76 (1999) 805)."""
    fit = fit_of(*points(name))
    relative = (fit.intercept_uncertainty / fit.intercept) ** 2 + (fit.slope_uncertainty / fit.slope) ** 2
    between = 2 * fit.content * fit.x_mean * fit.residual_sd**2 / (fit.slope**2 * fit.sxx)
    assert fit.fit_uncertainty[0] ** 2 == pytest.approx((fit.content**2 * relative + between)[0], rel=1e-12)


@pytest.mark.parametrize("name", SERIES)
def test_in_exact_arithmetic(name):
    """The same from sums of whole fractions, written as the covariance matrix of intercept and slope."""
    x, y = ([Fraction(one) for one in values] for values in points(name))
    n = len(x)
    sx, sxx, sy = sum(x), sum(one * one for one in x), sum(y)
    sxy, syy = sum(p * q for p, q in zip(x, y, strict=True)), sum(one * one for one in y)
    det = n * sxx - sx * sx
    a, b = (sxx * sy - sx * sxy) / det, (n * sxy - sx * sy) / det
    s2 = (syy - a * sy - b * sxy) / (n - 2)
    c = a / b
    variance = s2 / det / b**2 * (sxx + 2 * c * sx + c * c * n)
    fit = fit_of(*points(name))
    assert fit.intercept[0] == pytest.approx(float(a), rel=1e-13)
    assert fit.slope[0] == pytest.approx(float(b), rel=1e-13)
    assert fit.residual_sd[0] == pytest.approx(math.sqrt(s2), rel=1e-12)
    assert fit.covariance[0] == pytest.approx(float(-sx * s2 / det), rel=1e-12)
    assert fit.content[0] == pytest.approx(float(c), rel=1e-13)
    assert fit.fit_uncertainty[0] == pytest.approx(math.sqrt(variance), rel=1e-12)
    assert fit.residuals[:, 0].tolist() == pytest.approx(
        [float(q - a - b * p) for p, q in zip(x, y, strict=True)], abs=1e-15 * max(map(float, y))
    )


def test_thermometer():
    """JCGM 100:2008, H.3: y1 -0.1712 (0.0029), y2 0.00218 (0.00067), r -0.930, s 0.0035 (readings from memory)."""
    x = [1.521, 2.012, 2.512, 3.003, 3.507, 3.999, 4.513, 5.002, 5.503, 6.010, 6.511]
    y = [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]
    fit = fit_of(x, y)
    assert fit.intercept[0] == pytest.approx(-0.1712, abs=5e-5)
    assert fit.intercept_uncertainty[0] == pytest.approx(0.0029, abs=5e-5)
    assert fit.slope[0] == pytest.approx(0.00218, abs=5e-6)
    assert fit.slope_uncertainty[0] == pytest.approx(0.00067, abs=5e-6)
    assert fit.residual_sd[0] == pytest.approx(0.0035, abs=5e-5)
    correlated = fit.covariance / (fit.slope_uncertainty * fit.intercept_uncertainty)
    assert correlated[0] == pytest.approx(-0.930, abs=5e-4)
