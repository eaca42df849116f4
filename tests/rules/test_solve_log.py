"""Log responses: exact and published cases, an independent program, and every series the same in any company."""

from __future__ import annotations

import math
import operator
from decimal import Decimal, localcontext

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq, least_squares
from scipy.stats import norm, t

from spikeward.rules.solve.line import Fit, fit_lines
from spikeward.rules.solve.log_response import LogFit, LogFits, fit_log_response, theoretical_slope

FREE = math.nan
RESIDUALS = math.nan


def one(x, share, e, slope=FREE, slope_u=0.0, noise=RESIDUALS, w=None) -> LogFit:
    """A single series, fitted alone."""
    weights = np.ones(len(x)) if w is None else w
    columns = [np.array(values, dtype=float).reshape(-1, 1) for values in (x, share, e, weights)]
    known = [np.array([value], dtype=float) for value in (slope, slope_u, noise)]
    return fit_log_response(*columns, *known, 0.95).of(0)


def gran(x, share, e, slope) -> Fit:
    """V 10^(E/S) against what was added: a straight line with the content at its x-intercept (G. Gran, Analyst 77
    (1952) 661)."""
    y = 10.0 ** ((np.asarray(e) - e[0]) / slope) / share
    columns = [np.array(values, dtype=float).reshape(-1, 1) for values in (x, y, np.ones(len(x)), np.ones(len(x)))]
    return fit_lines(*columns).of(0)


def vessel(v, e0=200.0, slope=-57.3, content=2.0):
    """Additions of v mL of a standard of 1000 to 100 mL, successively, with exact readings."""
    v = np.asarray(v, dtype=float)
    x, share = 1000.0 * v / 100.0, 100.0 / (100.0 + v)
    return x, share, e0 + slope * np.log10((content + x) * share)


# -- exact and published -----------------------------------------------------------------------------------------------


def test_double_addition_without_a_slope():
    """Constructed: three readings give content, slope and standard potential; the ratio of steps is 1.7031731072."""
    x, share, e = vessel([0.0, 0.5, 1.5])
    assert e == pytest.approx([182.7510, 151.7000, 129.8658], abs=5e-5)
    assert (e[2] - e[0]) / (e[1] - e[0]) == pytest.approx(1.7031731072, abs=5e-11)
    fit = one(x, share, e)
    assert fit.content == pytest.approx(2.0, rel=1e-12)
    assert fit.slope == pytest.approx(-57.3, rel=1e-12)
    assert fit.standard_potential == pytest.approx(200.0, rel=1e-12)
    assert fit.fitted == pytest.approx(tuple(e), rel=1e-14)
    assert fit.steps == pytest.approx((-31.0510, -21.8342), abs=1e-4)
    assert (fit.vessels, fit.dof) == (3.0, 0.0)
    assert math.isnan(fit.fit_uncertainty)
    assert math.isnan(fit.low)
    assert math.isnan(fit.residual_sd)


def test_an_exact_series_has_no_scatter():
    fit = one(*vessel([0.0, 0.5, 1.5, 3.0]))
    assert fit.content == pytest.approx(2.0, rel=1e-12)
    assert fit.exact
    assert fit.residual_sd == 0.0
    assert fit.fit_uncertainty == 0.0
    assert fit.low == fit.content == fit.high


def test_how_much_a_known_slope_is_worth():
    """Double addition with 0.1 mV a reading, by 4 000 simulated series: 2.5 % free, 1.2 % with 0.3 mV, 0.6 % known."""
    x, share, e = vessel([0.0, 0.5, 1.5])
    relative = []
    for slope, slope_u in ((FREE, 0.0), (-57.3, 0.3), (-57.3, 0.0)):
        rng = np.random.default_rng(3)
        readings = e[:, None] + rng.normal(0.0, 0.1, (3, 4000))
        believed = slope + rng.normal(0.0, 1.0, 4000) * slope_u
        rows = [np.broadcast_to(column[:, None], readings.shape) for column in (x, share)]
        fits = fit_log_response(
            *rows, readings, np.ones(readings.shape), believed, np.full(4000, slope_u), np.full(4000, 0.1), 0.95
        )
        fit = one(x, share, e, slope, slope_u, 0.1)
        assert fit.fit_uncertainty == pytest.approx(fits.content.std(), rel=0.03)
        assert np.mean((fits.low < 2.0) & (fits.high > 2.0)) == pytest.approx(0.95, abs=0.011)  # three of its sd
        assert fit.dof == math.inf
        relative.append(100.0 * fit.fit_uncertainty / 2.0)
    assert relative == pytest.approx([2.5, 1.2, 0.6], abs=0.05)


def test_a_wrong_slope_leaves_a_gran_plot_straight():
    """Constructed: 2.36035 with r = 0.99995 and 1.55498 with r = 0.99992. The potentials themselves show it."""
    x, share, e = vessel(np.arange(7) * 0.5)
    for slope, content, r in ((-57.3, 2.0, 1.0), (-59.16, 2.36035, 0.999952), (-55.0, 1.55498, 0.999918)):
        plot = gran(x, share, e, slope)
        assert plot.content == pytest.approx(content, abs=5e-6)
        assert plot.correlation == pytest.approx(r, abs=5e-7)
        believed = one(x, share, e, slope)
        assert believed.exact == (slope == -57.3)
        if not believed.exact:  # of the same sign, smaller, and with a scatter that no electrode need show
            assert 0.0 < (believed.content - 2.0) / (content - 2.0) < 0.6
            assert believed.residual_sd > 0.25
    assert one(x, share, e).content == pytest.approx(2.0, rel=1e-11)


def test_ammonia_in_sea_water():
    """Harris, Quantitative Chemical Analysis, problem on an ammonia electrode, data from memory: 100.0 mL of sea water
    and 1.0 mL of base, 30.0 ppm standard, slope 56.6 mV. The Gran plot by arithmetic: 1.09421 ppm, r 0.999537."""
    v = np.array([0.0, 10.0, 20.0, 30.0, 40.0])
    x, share = 30.0 * v / 100.0, 100.0 / (101.0 + v)
    e = [-84.4, -58.1, -46.9, -39.4, -34.7]
    plot = gran(x, share, e, 56.6)
    assert plot.content == pytest.approx(1.09421, abs=5e-6)
    assert plot.content * 100.0 / 30.0 == pytest.approx(3.64736, abs=5e-6)
    assert plot.correlation == pytest.approx(0.999537, abs=5e-7)
    fit = one(x, share, e, 56.6)
    assert fit.steps == pytest.approx((26.3, 11.2, 7.5, 4.7), abs=1e-9)
    # the potentials do not follow that slope: the plot hides 0.7 mV, and the contents differ by 17 %
    assert fit.residual_sd == pytest.approx(0.729, abs=1e-3)
    assert fit.content == pytest.approx(least_squared(x, share, e, 56.6)[0], rel=1e-8)


def textbook(x1, v0_at, v1, aliquot, de, slope):
    """Cs v / {V0 [(V1/V_at_0) 10^(dE/S) - 1]}, with Cs v / V0 as ``x1``."""
    return x1 / (v1 / v0_at * 10.0 ** (de / slope) - 1.0), x1 / (v1 / aliquot * 10.0 ** (de / slope) - 1.0)


@given(
    st.floats(-3, 3), st.floats(-2, 2), st.sampled_from([-59.2, -28.0, 29.0, 57.0]), st.floats(0, 60), st.floats(0.1, 9)
)
def test_one_known_addition(log_content, log_ratio, slope, buffer, v):
    """With a slope two readings are the textbook's closed form, buffer counted in both volumes (known addition,
    instruction sheets of electrodes, common practice)."""
    content = 10.0**log_content
    x1 = content * 10.0**log_ratio
    before, after = 50.0 + buffer, 50.0 + buffer + v
    e = [slope * math.log10(content * 50.0 / before), slope * math.log10((content + x1) * 50.0 / after)]
    fit = one([0.0, x1], [50.0 / before, 50.0 / after], e, slope)
    closed, _ = textbook(x1, before, after, 50.0, e[1] - e[0], slope)
    condition = 1e-13 * (1.0 + content / x1)
    assert closed == pytest.approx(content, rel=1000 * condition)
    assert fit.content == pytest.approx(closed, rel=1000 * condition)
    assert fit.standard_potential == pytest.approx(0.0, abs=1e-9 * (1.0 + content / x1))
    assert fit.slope == pytest.approx(slope, rel=1e-14)


def test_forgotten_buffer():
    """50 mL of buffer on 50 mL of sample: with the aliquot where the volume belongs, 0.4 of the content."""
    e = [0.0, -59.16 * math.log10((2.0 + 4.06) / 2.0 * 100.0 / 101.0)]
    right, forgotten = textbook(4.06, 100.0, 101.0, 50.0, e[1], -59.16)
    fit = one([0.0, 4.06], [50.0 / 100.0, 50.0 / 101.0], e, -59.16)
    assert fit.content == pytest.approx(right, rel=1e-12)
    assert fit.content == pytest.approx(2.0, rel=1e-12)
    assert forgotten / right == pytest.approx(0.4, abs=0.005)


def test_fluoride_of_a_far_step():
    """Two public answers to this exercise, 1.05 mg/L among them, take the potential as linear; it is 0.00140631."""
    x, share, e = [0.0, 0.5 * 100.0 / 50.0], [1.0, 50.0 / 50.5], [-180.5, -349.0]
    fit = one(x, share, e, -59.16)
    assert fit.content == pytest.approx(0.00140631, abs=5e-9)
    assert fit.steps == pytest.approx((-168.5,))


def test_fluoride_needs_the_sign_of_its_slope():
    """100.00 mL, 672.5 to 755 mV by 2.200 mL of 0.340 M: 3.0718961e-4 M by arithmetic, for a slope of that sign."""
    x, share = [0.0, 0.340 * 2.2 / 100.0], [1.0, 100.0 / 102.2]
    assert one(x, share, [672.5, 755.0], 59.16).content == pytest.approx(3.0718961e-4, rel=2e-8)
    assert one(x, share, [-672.5, -755.0], -59.16).content == pytest.approx(3.0718961e-4, rel=2e-8)
    assert math.isnan(one(x, share, [672.5, 755.0], -59.16).content)


@pytest.mark.parametrize(
    ("step", "by_step", "by_slope"), [(10, 1.17, 0.20), (20, 0.71, 0.24), (30, 0.56, 0.29), (60, 0.43, 0.44)]
)
def test_error_budget(step, by_step, by_slope):
    """Per cent of content by 0.1 mV in the step and by 0.1 mV per decade in the slope, 1.5 % of volume added
    (arithmetic; Wang, Analytical Electrochemistry, chapter 5: 1 mV in a direct reading is 4 %)."""
    share, e = [1.0, 1.0 / 1.015], [0.0, float(step)]
    x = [0.0, 1.015 * 10.0 ** (step / 59.16) - 1.0]
    noise = 0.1 / math.sqrt(2.0)  # of a reading, so that the step has 0.1 mV
    alone = one(x, share, e, 59.16, 0.0, noise)
    both = one(x, share, e, 59.16, 0.1, noise)
    assert 100.0 * alone.fit_uncertainty == pytest.approx(by_step, abs=0.006)
    assert 100.0 * math.sqrt(both.fit_uncertainty**2 - alone.fit_uncertainty**2) == pytest.approx(by_slope, abs=0.006)
    assert step < 20 or 100.0 * both.fit_uncertainty < 0.8  # a step of 20 mV and these errors: at most 0.8 %
    # and by moving the step and the slope themselves
    moved = one(x, share, [0.0, step + 0.01], 59.16).content, one(x, share, e, 59.17).content
    assert 1000.0 * abs(1.0 - moved[0]) == pytest.approx(by_step, abs=0.01)
    assert 1000.0 * abs(1.0 - moved[1]) == pytest.approx(by_slope, abs=0.01)


def test_theoretical_slope():
    """59.16 mV per decade at 25 degC (common tables); 58.17 at 20 degC, and half of it for two charges."""
    assert theoretical_slope(25.0, 1) == pytest.approx(59.16, abs=0.005)
    assert theoretical_slope(20.0, 1) == pytest.approx(58.17, abs=0.005)
    assert theoretical_slope(25.0, -1) == -theoretical_slope(25.0, 1)
    assert theoretical_slope(25.0, 2) == pytest.approx(29.58, abs=0.005)


# -- an independent program --------------------------------------------------------------------------------------------


def residuals_of(x, share, e, slope, slope_u, noise, w):
    """What least squares makes small over (E0, S, ln C0), or (E0, ln C0) with an exact slope; in mV."""
    x, share, e = (np.asarray(values, dtype=float) for values in (x, share, e))

    def residuals(p):
        s = slope if slope_u == 0.0 and not math.isnan(slope) else p[1]
        left = np.sqrt(w) * (e - p[0] - s * np.log10((math.exp(p[-1]) + x) * share))
        return np.append(left, noise / slope_u * (slope - s)) if slope_u > 0.0 else left

    return residuals


def least_squared(x, share, e, slope=FREE, slope_u=0.0, noise=1.0, w=1.0, start=(0.0, 50.0, 0.0)):
    """Content and u(C0)/noise, by Levenberg and Marquardt's method and finite differences."""
    first = np.array(start if math.isnan(slope) or slope_u > 0.0 else (start[0], start[2]))
    solution = least_squares(
        residuals_of(x, share, e, slope, slope_u, noise, w), first, method="lm", x_scale="jac", jac="2-point",
        xtol=1e-15, ftol=1e-15, gtol=1e-15, max_nfev=20000,
    )  # fmt: skip
    content = math.exp(solution.x[-1])
    return content, content * math.sqrt(np.linalg.inv(solution.jac.T @ solution.jac)[-1, -1])


def random_series(rng: np.random.Generator, vessels: int):
    """x, share, E, w, and the truth (E0, S, ln C0)."""
    content, e0 = 10.0 ** rng.uniform(-3, 2), rng.uniform(-300, 300)
    slope = rng.choice([-1, 1, 0.5]) * rng.uniform(52, 60)
    x = content * np.concatenate(([0.0], rng.uniform(0.4, 1.2, vessels - 1))) * np.arange(vessels)
    share = 1.0 / (rng.uniform(1.0, 2.0) + np.arange(vessels) * rng.uniform(0.0, 0.03))
    w = rng.choice([1.0, 0.5, 0.25], vessels)
    w[0] = 1.0
    e = e0 + slope * np.log10((content + x) * share) + rng.normal(0.0, 0.05, vessels) / np.sqrt(w)
    return (x, share, e, w), (e0, slope, math.log(content))


MODES = [(False, False), (True, False), (True, True)]


@pytest.mark.parametrize(("known", "uncertain"), MODES)
def test_agrees_with_another_program(known, uncertain):
    """Levenberg and Marquardt's method from the truth; with declared noise, and with the noise of the residuals."""
    rng = np.random.default_rng(8)
    drawn = [random_series(rng, int(rng.integers(4, 9))) for _ in range(130)]
    modes = [(truth[1] + 0.2 if known else FREE, 0.3 if uncertain else 0.0) for _, truth in drawn]
    declared = packed([(*rows, *mode, 0.05) for (rows, _), mode in zip(drawn, modes, strict=True)])
    scattered = packed([(*rows, *mode, RESIDUALS) for (rows, _), mode in zip(drawn, modes, strict=True)])
    free = packed([(*rows, FREE, 0.0, RESIDUALS) for rows, _ in drawn])
    for column, ((rows, truth), (slope, slope_u)) in enumerate(zip(drawn, modes, strict=True)):
        x, share, e, w = rows
        dof = len(x) - (2 if known and not uncertain else 3)
        for fit, noise in ((declared.of(column), 0.05), (scattered.of(column), free.of(column).residual_sd)):
            content, per_noise = least_squared(x, share, e, slope, slope_u, noise, w, truth)
            # finite differences end within a millionth of the uncertainty; the next test has the digits
            assert fit.content == pytest.approx(content, rel=1e-8, abs=1e-6 * declared.of(column).fit_uncertainty)
            s = 0.05 if noise == 0.05 else fit.residual_sd
            assert fit.fit_uncertainty == pytest.approx(s * per_noise, rel=1e-5)
            assert fit.dof == (math.inf if noise == 0.05 else dof)
            left = residuals_of(x, share, e, fit.slope, 0.0, 1.0, w)((fit.standard_potential, math.log(fit.content)))
            assert fit.fitted[: len(x)] == pytest.approx(tuple(e - left / np.sqrt(w)), abs=1e-9)
            if not uncertain:
                assert fit.residual_sd == pytest.approx(math.sqrt(np.square(left).sum() / dof), rel=1e-8)
        assert not uncertain or scattered.of(column).residual_sd == free.of(column).residual_sd


def exact_profile(content, rows):
    """The sum of squares with a free slope at a content held, to 40 digits."""
    x, share, e, w = ([Decimal(float(value)) for value in row] for row in rows)
    phi = [((content + a) * h).ln() for a, h in zip(x, share, strict=True)]
    means = [sum(map(operator.mul, w, values)) / sum(w) for values in (phi, e)]
    phi, e = [value - means[0] for value in phi], [value - means[1] for value in e]
    across = sum(a * b * c for a, b, c in zip(w, phi, e, strict=True))
    slope = across / sum(a * b * b for a, b in zip(w, phi, strict=True))
    return sum(a * (c - slope * b) ** 2 for a, b, c in zip(w, phi, e, strict=True))


def test_digits():
    """The lowest point of the profile in arithmetic of 40 digits, free slopes: to all digits but the last ones."""
    rng = np.random.default_rng(8)
    drawn = [random_series(rng, int(rng.integers(4, 9)))[0] for _ in range(30)]
    fits = packed([(*rows, FREE, 0.0, RESIDUALS) for rows in drawn])
    with localcontext() as context:
        context.prec = 40
        for column, rows in enumerate(drawn):
            content = Decimal(float(fits.content[column]))
            step = content * Decimal("1e-9")
            for _ in range(4):
                below, here, above = (exact_profile(content + n * step, rows) for n in (-1, 0, 1))
                content -= step * (above - below) / 2 / (above - 2 * here + below)
            assert fits.content[column] == pytest.approx(float(content), rel=2e-14)


@pytest.mark.parametrize(("known", "uncertain"), MODES)
def test_the_ends_lie_on_the_profile(known, uncertain):
    """At both ends the least squares with the content held have risen by t² s²; here by linear least squares."""
    rng = np.random.default_rng(9)
    for _ in range(40):
        (x, share, e, w), truth = random_series(rng, 5)
        slope, slope_u = (truth[1] + 0.2 if known else FREE), (0.3 if uncertain else 0.0)
        declared = bool(rng.integers(2))
        fit = one(x, share, e, slope, slope_u, 0.05 if declared else RESIDUALS, w)
        s = 0.05 if declared else fit.residual_sd
        factor = norm.ppf(0.975) if declared else t.ppf(0.975, fit.dof)

        def squares(content, x=x, share=share, e=e, w=w, slope=slope, slope_u=slope_u, s=s):
            phi = np.log10((content + x) * share)
            design, aim = np.column_stack([np.ones(5), phi]) * np.sqrt(w)[:, None], e * np.sqrt(w)
            if slope_u > 0.0:
                design, aim = np.vstack([design, [0.0, s / slope_u]]), np.append(aim, s / slope_u * slope)
            elif not math.isnan(slope):
                design, aim = design[:, :1], aim - slope * design[:, 1]
            return np.square(aim - design @ np.linalg.lstsq(design, aim, rcond=None)[0]).sum()

        limit = squares(fit.content) + (factor * s) ** 2
        high = math.inf
        if squares(1e9 * fit.content) > limit:
            high = brentq(lambda c: squares(c) - limit, fit.content, 1e9 * fit.content, xtol=1e-15, rtol=1e-13)  # noqa: B023
        low = brentq(lambda c: squares(c) - limit, 1e-9 * fit.content, fit.content, xtol=1e-15, rtol=1e-13)  # noqa: B023
        assert fit.low == pytest.approx(low, rel=1e-7)
        assert fit.high == pytest.approx(high, rel=1e-6)
        assert fit.low < fit.content < fit.high


def test_uncertainty_of_the_slope():
    """The covariance of (E0, S, C0) from the matrix of derivatives, inverted."""
    x, share, e = vessel([0.0, 0.5, 1.5, 3.0])
    for slope_u in (0.0, 0.3):
        fit = one(x, share, e, -57.3 if slope_u else FREE, slope_u, 0.1)
        design = np.column_stack([np.ones(4), np.log10((2.0 + x) * share), -57.3 / math.log(10.0) / (2.0 + x)])
        information = design.T @ design / 0.01
        if slope_u:
            information[1, 1] += 1.0 / slope_u**2
        covariance = np.linalg.inv(information)
        assert fit.slope_uncertainty == pytest.approx(math.sqrt(covariance[1, 1]), rel=1e-8)
        assert fit.fit_uncertainty == pytest.approx(math.sqrt(covariance[2, 2]), rel=1e-8)
    assert one(x, share, e, -57.3, 0.0, 0.1).slope_uncertainty == 0.0


def test_a_slope_with_an_uncertainty_lies_between():
    """As the uncertainty of the slope goes from nothing to much, the result goes from the known slope to the free."""
    x, share, e = vessel([0.0, 0.5, 1.5, 3.0])
    e = e + np.array([0.1, -0.15, 0.05, 0.1])
    known, free = one(x, share, e, -58.0, 0.0, 0.1), one(x, share, e, FREE, 0.0, 0.1)
    assert one(x, share, e, -58.0, 1e-7, 0.1).content == pytest.approx(known.content, rel=1e-9)
    assert one(x, share, e, -58.0, 1e6, 0.1).content == pytest.approx(free.content, rel=1e-9)
    between = [one(x, share, e, -58.0, u, 0.1) for u in (0.01, 0.1, 0.3, 1.0, 10.0)]
    contents = [known.content, *(fit.content for fit in between), free.content]
    assert contents == sorted(contents, reverse=contents[0] > contents[-1])
    spreads = [known.fit_uncertainty, *(fit.fit_uncertainty for fit in between), free.fit_uncertainty]
    assert spreads == sorted(spreads)


def test_noise_that_nothing_tells():
    """Two or three readings and a slope with an uncertainty: the slope counts as exact, and there is no uncertainty."""
    for n in (2, 3):
        x, share, e = vessel([0.0, 0.5, 1.5][:n])
        e = e + 0.05 * np.arange(n) ** 2
        fit, exact = one(x, share, e, -57.3, 0.3), one(x, share, e, -57.3)
        assert fit.content == exact.content
        assert fit.dof == 0.0
        assert all(map(math.isnan, (fit.fit_uncertainty, fit.slope_uncertainty, fit.low, fit.high, fit.residual_sd)))
    assert one(*vessel([0.0, 0.5, 1.5]), -57.0).dof == 1.0


def test_an_interval_without_end():
    """Additions that hardly raise the potential, slope free: no upper end, and no number for one."""
    x, share, e = vessel([0.0, 0.05, 0.1, 0.15])
    fit = one(x, share, e, FREE, 0.0, 0.5)
    assert fit.high == math.inf
    assert 0.0 < fit.low < fit.content
    assert math.isfinite(one(x, share, e, -57.3, 0.0, 0.5).high)


def test_a_reading_before_dilution_needs_no_rise():
    """The unspiked reading on the undiluted solution, the spiked one with as much buffer: the content in it falls."""
    share, x = [1.0, 0.5], [0.0, 0.6]
    e = [10.0 + 58.0 * math.log10((2.0 + a) * h) for a, h in zip(x, share, strict=True)]
    assert e[1] < e[0]
    assert one(x, share, e, 58.0).content == pytest.approx(2.0, rel=1e-12)


def test_no_vessel_without_an_addition():
    """The lowest addition need not be zero."""
    x, share, e = vessel([0.5, 1.5, 3.0, 4.0])
    assert one(x, share, e).content == pytest.approx(2.0, rel=1e-11)
    noisy = e + np.array([0.1, -0.1, 0.05, 0.1])
    fit = one(x, share, noisy, -57.3, 0.0, 0.1)
    assert fit.content == pytest.approx(least_squared(x, share, noisy, -57.3)[0], rel=1e-8)
    assert fit.content - fit.low == pytest.approx(1.96 * fit.fit_uncertainty, rel=0.1)
    assert fit.high - fit.content == pytest.approx(1.96 * fit.fit_uncertainty, rel=0.1)


def test_two_contents_that_fit_alike():
    """Two undiluted readings and one at four fifths: 2 and 0.0679 both go through all three, each with its own slope.
    None is given; a fourth vessel, or the slope, decides."""
    x, share = np.array([0.0, 1.0, 2.0, 5.0]), np.array([1.0, 1.0, 0.8, 0.8])
    e = 10.0 + 58.0 * np.log10((2.0 + x) * share)

    def ratio(content):
        phi = np.log10((content + x) * share)
        return (phi[2] - phi[0]) / (phi[1] - phi[0])

    other = brentq(lambda content: ratio(content) - ratio(2.0), 0.01, 0.5)
    assert other == pytest.approx(0.0679, abs=1e-3)
    fit = one(x[:3], share[:3], e[:3])
    assert fit.ambiguous
    assert all(map(math.isnan, (fit.content, fit.slope, fit.fit_uncertainty, fit.low, fit.high)))
    known, fourth = one(x[:3], share[:3], e[:3], 58.0), one(x, share, e)
    assert (known.content, fourth.content) == pytest.approx((2.0, 2.0), rel=1e-11)
    assert not known.ambiguous
    assert not fourth.ambiguous
    # within the noise the two are no less alike: the interval has no end towards the other
    noisy = one(x, share, e + np.array([0.0, 0.2, -0.2, 0.1]), FREE, 0.0, 8.0)
    assert math.isinf(noisy.low) or math.isinf(noisy.high)


def test_an_end_close_to_zero():
    """Noise as wide as the potentials are: the lower end is far down, and above zero."""
    x, share, e = vessel([0.0, 0.5, 1.5, 3.0])
    fit = one(x, share, e, -57.3, 0.0, 30.0)
    assert fit.fit_uncertainty > 0.6 * fit.content
    assert 0.0 < fit.low < 0.3 * fit.content

    def rise(content):
        left = e + 57.3 * np.log10((content + x) * share)
        return np.square(left - left.mean()).sum() - (norm.ppf(0.975) * 30.0) ** 2

    assert fit.low == pytest.approx(brentq(rise, 1e-9, 2.0, xtol=1e-15), rel=1e-9)


numbers = st.floats(0.01, 100.0)


# -- any company, any scale, any order ---------------------------------------------------------------------------------


def packed(series, deepest=0) -> LogFits:
    """Series as (x, share, E, w, slope, slope uncertainty, noise), padded to the deepest."""
    deepest = max(deepest, *(len(one_of[0]) for one_of in series))
    arrays = np.zeros((4, deepest, len(series)))
    for column, one_of in enumerate(series):
        for nth in range(4):
            arrays[nth, : len(one_of[0]), column] = one_of[nth]
    known = [np.array([one_of[nth] for one_of in series], dtype=float) for nth in (4, 5, 6)]
    return fit_log_response(*arrays, *known, 0.95)


def mixed(rng: np.random.Generator, count: int):
    series = []
    for _ in range(count):
        rows, truth = random_series(rng, int(rng.integers(2, 9)))
        mode = int(rng.integers(3))
        noise = 0.05 if rng.integers(2) else RESIDUALS
        series.append((*rows, FREE if mode == 0 else truth[1], 0.3 if mode == 2 else 0.0, noise))
    return series


def same(one_of: LogFit, other: LogFit) -> bool:
    """Bit for bit; the padding of a deeper company is not a number."""
    for name in LogFit.__slots__:
        a, b = (np.atleast_1d(np.array(getattr(fit, name), dtype=float)) for fit in (one_of, other))
        depth = min(len(a), len(b))
        if not (np.array_equal(a[:depth], b[:depth], equal_nan=True) and np.isnan([*a[depth:], *b[depth:]]).all()):
            return False
    return True


def test_company_leaves_every_bit():
    series = mixed(np.random.default_rng(4), 300)
    together, backwards = packed(series), packed(series[::-1])
    deeper = packed(series, deepest=17)
    for column in range(300):
        fit = together.of(column)
        assert same(fit, backwards.of(299 - column))
        assert same(fit, deeper.of(column))
        if column % 6 == 0:
            assert same(fit, packed(series[column : column + 1]).of(0))
            assert same(fit, packed(series[column : column + 7]).of(0))
    assert np.isfinite(together.content).sum() > 200


@given(st.integers(-200, 200), st.integers(-100, 100))
def test_a_power_of_two_changes_no_digit(x_power, e_power):
    x, share, e = vessel([0.0, 0.5, 1.5, 3.0])
    e = e + np.array([0.1, -0.2, 0.1, 0.05])
    plain = one(x, share, e)
    scaled = one(np.ldexp(x, x_power), share, np.ldexp(e, e_power))
    for name in ("content", "fit_uncertainty", "low", "high"):
        assert getattr(scaled, name) == np.ldexp(getattr(plain, name), x_power)
    for name in ("slope", "slope_uncertainty", "residual_sd"):
        assert getattr(scaled, name) == np.ldexp(getattr(plain, name), e_power)


@settings(max_examples=40)
@given(st.floats(-500, 500), st.sampled_from([-1.0, 1.0]), st.permutations(range(5)))
def test_sign_origin_and_order_do_not_matter(origin, sign, order):
    """Anions and cations, any standard potential, any order of vessels."""
    x, share, e = vessel([0.0, 0.5, 1.0, 1.5, 3.0])
    e = e + np.array([0.1, -0.2, 0.1, 0.05, -0.1])
    plain = one(x, share, e, -57.0, 0.3)
    way = list(order)
    other = one(x[way], share[way], (sign * (e + origin))[way], -57.0 * sign, 0.3)
    assert other.content == pytest.approx(plain.content, rel=1e-9)
    assert other.fit_uncertainty == pytest.approx(plain.fit_uncertainty, rel=1e-7)
    assert other.slope == pytest.approx(sign * plain.slope, rel=1e-9)
    assert other.standard_potential == pytest.approx(sign * (plain.standard_potential + origin), rel=1e-9, abs=1e-8)


ILL = [
    ([0, 1, 2, 3], [1, 1, 1, 1], [5, 5, 5, 5]),
    ([1, 1, 1, 1], [1, 0.9, 0.8, 0.7], [5, 6, 7, 8]),
    ([0, 0, 1, 1], [1, 1, 1, 1], [5, 6, 20, 21]),  # two contents do not tell content and slope
    ([0, 1, 2, 3], [1, 1, 1, 1], [5, 40, 20, 60]),
    ([0, 1, 2, 3], [1, 1, 1, 1], [0, 1, 2, 3]),  # linear: the content is beyond any addition
    ([0, 1, 2, 3], [1, 1, 1, 1], [0, 50, 50, 50]),  # no content at all
    ([0, 1, np.nan, 3], [1, 1, 1, 1], [0, 17, 28, 35]),
    ([0, 1, 2, 3], [1, 1, 1, 1], [0, np.nan, 28, 35]),
    ([0, 1, 2, 3], [1, 1, 0, 1], [0, 17, 28, 35]),
    ([0, 1, 2, 3], [1, 1, -1, 1], [0, 17, 28, 35]),
    ([0, 1, 2, np.inf], [1, 1, 1, 1], [0, 17, 28, 35]),
    ([0, 1e308, 1.7e308, 1.75e308], [1, 1, 1, 1], [-1e308, 0, 1e308, 1.5e308]),
    ([0, 5e-324, 1e-323, 2e-323], [1, 1, 1, 1], [0, 5e-324, 1e-323, 1e-323]),
    ([1], [1], [1]),
    ([0, 1], [1, 1], [0, 17]),
    ([], [], []),
]  # fmt: skip


@pytest.mark.parametrize("noise", [RESIDUALS, 0.1])
@given(
    potentials=st.lists(st.floats(-300, 300), min_size=2, max_size=8), top=numbers, shares=st.tuples(numbers, numbers)
)
def test_two_levels_do_not_tell_content_and_slope(noise, potentials, top, shares):
    """However often both are measured, and whatever the shares."""
    level = np.arange(len(potentials)) % 2
    x, share = top * level, np.where(level == 0, *shares)
    assert math.isnan(one(x, share, potentials, FREE, 0.0, noise).content)


@given(st.floats(-300, 300), st.integers(2, 9), numbers)
def test_rounding_is_no_response(potential, vessels, share):
    """Equal potentials, whose mean need not be equal to the last digit."""
    x, e = np.arange(float(vessels)), np.full(vessels, potential)
    for slope in (FREE, 58.0):
        assert math.isnan(one(x, np.full(vessels, share), e, slope).content)


@pytest.mark.parametrize(("x", "share", "e"), ILL)
def test_nothing_warns_and_neighbours_stay(x, share, e):
    good = (*vessel([0.0, 0.5, 1.5, 3.0]), np.ones(4), -57.0, 0.0, 0.1)
    bad = (x, share, e, np.ones(len(x)), FREE, 0.0, RESIDUALS)
    both = packed([good, bad])
    assert same(both.of(0), packed([good]).of(0))
    fit = both.of(1)
    assert not math.isfinite(fit.content) or fit.low == -math.inf or fit.high == math.inf


def test_no_series_at_all():
    empty = np.zeros((0, 0))
    assert fit_log_response(empty, empty, empty, empty, *[np.zeros(0)] * 3, 0.95).content.shape == (0,)
