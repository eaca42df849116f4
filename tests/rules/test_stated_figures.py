"""The figures that the guide states of wrong ways and of small samples: each is made again from its set-up.

Contents come from the functions that solve a night; what a wrong way does to the points before is written out here. The
truth is a content of 1 with a sensitivity of 1 unless a test says otherwise.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import pytest
from scipy.special import stdtr

from spikeward.rules.solve.blocks import fit_blocks
from spikeward.rules.solve.curve import fit_curves
from spikeward.rules.solve.line import Fit, fit_lines
from spikeward.rules.solve.log_response import LogFit, fit_log_response
from spikeward.rules.solve.straightness import straightness
from spikeward.rules.uncertainty.fieller import g_value, half_widths, t_quantile
from tests.external.coverage import PAGE
from tests.external.coverage_draws import Intervals, columns, normals, of_line
from tests.external.published import cases

NAN = math.nan
TO_1_5 = (0.0, 0.5, 1.0, 1.5)
STEPS = (0.0, 1.0, 2.0, 3.0)


def told(*words: str) -> None:
    """The words stand in the guide."""
    page = " ".join(PAGE.read_text(encoding="utf-8").split())
    for each in words:
        assert each in page


def column(values: Sequence[float]) -> np.ndarray:
    return np.array(values, dtype=float)[:, np.newaxis]


def line(x: Sequence[float], y: Sequence[float], share: Sequence[float] | None = None) -> Fit:
    """A straight line, weighted for constant noise of the signals where shares of test solution differ."""
    shares = [1.0] * len(x) if share is None else list(share)
    weights = [(each / max(shares)) ** 2 for each in shares]
    return fit_lines(column(x), column(y), column(weights), column([1.0 / each for each in shares])).of(0)


def potential(
    x: Sequence[float], share: Sequence[float], e: Sequence[float], s: float, u: float, noise: float
) -> LogFit:
    """An electrode with what is known of its slope, mV per decade."""
    one = np.ones((len(x), 1))
    known = (np.array([each]) for each in (s, u, noise))
    return fit_log_response(column(x), column(share), column(e), one, *known, 0.95).of(0)


# ---- wrong ways, without chance ------------------------------------------------------------------------------------


def test_two_runs_as_one_line():
    y = [(1.0 + x) * (1.0 if x < 2 else 0.8) for x in STEPS]
    assert line(STEPS, y).content == pytest.approx(1.5714, abs=1e-4)
    told("one line through all gives 1.57")
    run = np.array([[0], [0], [1], [1]], dtype=np.int64)
    found = fit_blocks(column(STEPS), column(y), np.ones((4, 1)), run, np.array([NAN]), 0.95).of(0)
    assert found.content == pytest.approx(1.0, rel=1e-9)
    assert found.slopes == pytest.approx((1.0, 0.8))


def suppressed(share: Sequence[float], most: float) -> list[float]:
    """Sensitivity 1/(1 + q share), 0.7 where a vessel holds the share ``most`` of test solution."""
    return [1.0 / (1.0 + 3.0 / 7.0 * each / most) for each in share]


@pytest.mark.parametrize(
    ("x", "share", "most", "equally_weighted", "as_solved", "words"),
    [
        ((0.0, 1.0), (1.0, 0.5), 1.0, 0.7391, 0.7391, "made up to the double volume gives 0.739"),
        (TO_1_5, [1 / (1 + 0.05 * i) for i in range(4)], 1.0, 0.9307, 0.9321, "grows by 15 % give 0.932"),
        (
            [10 * a / v for a, v in zip(TO_1_5, (10, 9.5, 9, 8.5), strict=True)], (0.4, 0.38, 0.36, 0.34), 0.4,
            0.9231, 0.9250, "8.5 mL in 25 mL give 0.925",
        ),
        (TO_1_5, (0.4, 0.4, 0.4, 0.4), 0.4, 1.0, 1.0, "made up to one volume give 1."),
    ],
)  # fmt: skip
def test_more_matrix_in_one_vessel_than_in_another(x, share, most, equally_weighted, as_solved, words):
    """Amounts of standard are equal steps; with unequal aliquots x is the amount over the aliquot."""
    y = [k * (1.0 + a) for k, a in zip(suppressed(share, most), x, strict=True)]
    assert line(x, y).content == pytest.approx(equally_weighted, abs=5e-5)
    assert line(x, y, share).content == pytest.approx(as_solved, abs=5e-5)
    told(words)


def test_a_growing_vessel_looks_straight():
    share = [1 / (1 + 0.05 * i) for i in range(4)]
    y = [k * (1.0 + a) for k, a in zip(suppressed(share, 1.0), TO_1_5, strict=True)]
    assert line(TO_1_5, y).correlation == pytest.approx(0.99995, abs=5e-6)
    told("with r 0.99995")


def test_the_background_subtracted_after_the_volumes():
    x, top = (0.0, 0.25, 0.5, 0.75), 1.25 / 2.5
    signals = [(0.5 + a) / 2.5 + top / 16 for a in x]
    assert line(x, [2.5 * s - top / 16 for s in signals]).content == pytest.approx(0.547, abs=5e-4)
    assert line(x, [2.5 * (s - top / 16) for s in signals]).content == pytest.approx(0.5, rel=1e-12)
    told("a sixteenth of the net top signal: 0.547")


def test_the_process_blank_subtracted_as_a_signal():
    """The sample holds 1 and brings 0.2 with its preparation; 40 % suppression, the blank's own slope is 1."""
    y = [0.6 * (1.2 + x) for x in STEPS]
    assert line(STEPS, [each - 0.2 for each in y]).content == pytest.approx(1.0 - 0.1333, abs=5e-5)
    blank = line(STEPS, [0.2 + x for x in STEPS]).content
    assert line(STEPS, y).content - blank == pytest.approx(1.0, rel=1e-9)
    told("the result is 13 % too low")


def test_the_buffer_forgotten():
    """50 mL of sample and 50 mL of buffer, 1 mL of 100; 59.16 mV per decade."""
    inside = [50.0 / 100.0, (50.0 + 100.0) / 101.0]
    e = [59.16 * math.log10(each) for each in inside]
    x, share = (0.0, 100.0 / 50.0), (50.0 / 100.0, 50.0 / 101.0)
    assert potential(x, share, e, 59.16, 0.0, NAN).content == pytest.approx(1.0, rel=1e-9)
    assert potential(x, (1.0, 50.0 / 101.0), e, 59.16, 0.0, NAN).content == pytest.approx(0.4, rel=1e-9)
    told("the first volume as 50 mL gives 0.40")


DOUBLE = ((0.0, 0.5, 1.5), 1000.0, 100.0, 2.0, -57.3)
"""mL added, their content, mL of sample, its content, mV per decade."""


def double_addition() -> tuple[list[float], list[float], list[float]]:
    v, standard, sample, content, slope = DOUBLE
    share = [sample / (sample + each) for each in v]
    x = [standard * each / sample for each in v]
    return x, share, [200.0 + slope * math.log10((content + a) * s) for a, s in zip(x, share, strict=True)]


@pytest.mark.parametrize(
    ("slope", "u", "per_cent"), [(NAN, NAN, 2.52), (-57.3, 0.3, 1.21), (-57.3, 0.0, 0.61)],
    ids=["fitted", "known to 0.3 mV", "known"],
)  # fmt: skip
def test_how_well_a_double_addition_knows_the_content(slope, u, per_cent):
    """0.1 mV per reading; 2 mg/L in 100 mL, 0.5 and 1.5 mL of 1000 mg/L."""
    found = potential(*double_addition(), slope, u, 0.1)
    assert found.content == pytest.approx(2.0, rel=1e-6)
    assert 100 * found.fit_uncertainty / found.content == pytest.approx(per_cent, abs=0.01)


@pytest.mark.parametrize(("slope", "content", "r"), [(-59.16, 2.36035, 0.999952), (-55.0, 1.55498, 0.999918)])
def test_a_wrong_electrode_slope_leaves_grans_plot_straight(slope, content, r):
    """Gran's plot of V 10^(E/S) over the addition, 0 to 3 mL in steps of 0.5."""
    v = [0.5 * i for i in range(7)]
    e = [200.0 - 57.3 * math.log10((2.0 * 100.0 + 1000.0 * each) / (100.0 + each)) for each in v]
    gran = [(100.0 + each) * 10 ** ((one - 200.0) / slope) for each, one in zip(v, e, strict=True)]
    fit = line([1000.0 * each / 100.0 for each in v], gran)
    assert fit.content == pytest.approx(content, abs=5e-5)
    assert fit.correlation == pytest.approx(r, abs=1e-6)
    told("18 % too much, 55 gives 22 % too little", "plot still have r 0.9999")


@pytest.mark.parametrize(
    ("step", "per_reading", "per_slope"), [(10, 1.17, 0.20), (20, 0.71, 0.24), (30, 0.56, 0.29), (60, 0.43, 0.44)]
)
def test_what_a_tenth_of_a_millivolt_does(step, per_reading, per_slope):
    """1.5 mL to 100 mL that move the electrode by ``step`` mV: % of the content per 0.1 mV of reading or slope."""
    x, share = (0.0, 1.015 * 10 ** (step / 59.16) - 1.0), (1.0, 1.0 / 1.015)

    def change(read: float, slope: float) -> float:
        return 100 * (potential(x, share, (0.0, step + read), 59.16 + slope, 0.0, NAN).content - 1.0)

    assert abs(change(0.05, 0) - change(-0.05, 0)) == pytest.approx(per_reading, abs=0.006)
    assert abs(change(0, 0.05) - change(0, -0.05)) == pytest.approx(per_slope, abs=0.006)


def test_a_curve_fitted_to_corrected_points():
    x = [1.5 * i / 5 for i in range(6)]
    share = [1.0 / (1.0 + 0.1 * i) for i in range(6)]
    signals = [c - 0.08 * c * c for c in ((1.0 + a) * s for a, s in zip(x, share, strict=True))]
    y = [signal / s for signal, s in zip(signals, share, strict=True)]
    wrong = straightness(column(x), column(y), np.ones((6, 1)))
    assert wrong.by_parabola[0] == pytest.approx(1.047, abs=5e-4)
    right = fit_curves(column(x), column(share), column(signals), np.ones((6, 1)), np.array([NAN]), 0.95).of(0)
    assert right.content == pytest.approx(1.0, rel=1e-7)
    told("corrected points gives 1.047")


@pytest.mark.parametrize("top", [1.5, 2.0, 3.0])
def test_drift_in_the_order_of_levels(top):
    x = [top * i / 3 for i in range(4)]
    fit = line(x, [(1.0 + a) * (1.0 - 0.01 * i) for i, a in enumerate(x)])
    assert 1.05 < fit.content < 1.06
    assert fit.correlation == pytest.approx(0.99996, abs=5e-6)
    told("5 to 6 % too much, with r 0.99996")


def test_not_detected_taken_as_zero():
    assert line((0.0, 0.05, 0.10, 0.15), (0.0, 0.07, 0.12, 0.17)).content == pytest.approx(0.0054, abs=5e-5)
    told("it is 0.0054")


def test_a_pipette_that_delivers_too_much():
    """0.5 mg/L in 10 mL, standard of 10 mg/L; x is what was meant, y what went in."""
    meant = (0.0, 0.25, 0.5, 0.75)
    flasks = [0.5 * 10 + 10 * (v + 0.008) if v else 0.5 * 10 for v in meant]
    assert line(meant, flasks).content / 0.5 - 1 == pytest.approx(-0.005, abs=5e-4)
    amounts = [0.5 * 10 + 10 * (v + 0.008 * i) for i, v in enumerate(meant)]
    assert line(meant, amounts).content / 0.5 - 1 == pytest.approx(-0.031, abs=5e-4)
    # the volume grows by what was delivered, and is taken for what was meant
    grown = [a / (10 + v + 0.008 * i) * (10 + v) for i, (a, v) in enumerate(zip(amounts, meant, strict=True))]
    assert line(meant, grown, [10 / (10 + v) for v in meant]).content / 0.5 - 1 == pytest.approx(-0.027, abs=5e-4)
    told("0.5 % too low", "2.7 % too low, and 3.1 %")


# ---- formulas and factors ------------------------------------------------------------------------------------------


def three_formulas(fit: Fit) -> tuple[float, float, float]:
    """u of the content: as solved, without the covariance of slope and intercept, and with one more 1/m."""
    alone = abs(fit.content) * math.hypot(fit.intercept_uncertainty / fit.intercept, fit.slope_uncertainty / fit.slope)
    return fit.fit_uncertainty, alone, math.hypot(fit.fit_uncertainty, fit.residual_sd / abs(fit.slope))


def scattered(x: Sequence[float]) -> Fit:
    """Points on 1 + x with a scatter that changes neither slope nor intercept: residuals at right angles to both."""
    basis = np.stack([np.ones(len(x)), np.array(x)], axis=1)
    odd = np.array([math.sin(7.0 * i * i + 1.0) for i in range(len(x))])
    left = odd - basis @ np.linalg.lstsq(basis, odd, rcond=None)[0]
    return line(x, 1.0 + np.array(x) + 0.01 * left)


def test_without_the_covariance_it_is_too_narrow():
    """u1² = u2² + 2 C x_mean s²/(b² Sxx) for published series."""
    ratios = {}
    for case in cases():
        x = [float(case.standard * addition / aliquot) for aliquot, addition, _, _ in case.flasks]
        y = [float(signal * final / aliquot) for aliquot, _, final, signal in case.flasks]
        fit = line(x, y)
        if len(x) < 4 or fit.exact or fit.slope < 0 or case.response != "linear" or min(x) > 0.0:
            continue
        right, narrow, _ = three_formulas(fit)
        more = 2 * fit.content * fit.x_mean * (fit.residual_sd / fit.slope) ** 2 / fit.sxx
        assert right**2 == pytest.approx(narrow**2 + more, rel=1e-9)
        ratios[case.name] = narrow / right
    assert len(ratios) > 7
    assert (min(ratios.values()), max(ratios.values())) == pytest.approx((0.739, 0.783), abs=5e-4)


@pytest.mark.parametrize(
    ("x", "narrow", "wide"), [(STEPS, 0.77, 1.29), ((0, 0.1, 0.2, 0.3), 0.88, 1.02), ((0, 10, 20, 30), 0.96, 1.52)]
)
def test_how_wrong_a_formula_is_depends_on_the_design(x, narrow, wide):
    right, *wrong = three_formulas(scattered(x))
    assert [each / right for each in wrong] == pytest.approx([narrow, wide], abs=6e-3)


def test_one_more_term_makes_it_too_wide():
    """A quarter for a published series of four flasks; 60 % with three vessels at either end, the top at 3."""
    (gum,) = [case for case in cases() if case.name == "aluminium-in-gum"]
    x = [float(gum.standard * addition / aliquot) for aliquot, addition, _, _ in gum.flasks]
    right, _, wide = three_formulas(line(x, [float(f[3] * f[2] / f[0]) for f in gum.flasks]))
    assert wide / right == pytest.approx(1.25, abs=0.005)
    right, _, wide = three_formulas(scattered([0.0] * 3 + [3.0] * 3))
    assert wide / right == pytest.approx(1.61, abs=0.005)


@pytest.mark.parametrize(
    ("top", "spaced", "at_ends"),
    [
        (0.5, 3.016, 2.082), (1, 1.839, 1.291), (1.5, 1.453, 1.036), (2, 1.263, 0.913), (3, 1.076, 0.793),
        (5, 0.931, 0.702), (10, 0.825, 0.638),
    ],
)  # fmt: skip
def test_replicates_at_the_ends(top, spaced, at_ends):
    """u(C) in units of s/b with six vessels: better by a quarter to a third, and straightness is then not seen."""

    def units(x: Sequence[float]) -> float:
        fit = scattered(x)
        return fit.fit_uncertainty / (fit.residual_sd / fit.slope)

    steps, ends = units([top * i / 5 for i in range(6)]), units([0.0] * 3 + [top] * 3)
    assert steps == pytest.approx(spaced, abs=6e-4)
    assert ends == pytest.approx(at_ends, abs=6e-4)
    assert 0.22 < 1 - ends / steps < 0.34


def test_student_at_two_degrees_of_freedom():
    assert t_quantile(2, 0.95) == pytest.approx(4.30, abs=5e-3)
    assert t_quantile(2, 0.90) == pytest.approx(2.92, abs=5e-3)  # one-sided 95 %
    told("make t 4.30")


def test_ten_tests():
    assert pytest.approx(0.40, abs=5e-3) == 1 - 0.95**10
    told("in 40 % of good series")


# ---- small samples, by chance --------------------------------------------------------------------------------------


def flat_draws(words: object, x: Sequence[float], sd: float) -> np.ndarray:
    """Signals 1 + x with constant noise, shape (vessels, draws)."""
    return 1.0 + columns(np.array(x)) + sd * normals(words, len(x))


def many(x: Sequence[float], y: np.ndarray) -> tuple[object, Intervals]:
    fits = fit_lines(columns(np.array(x)), y, np.ones_like(y), np.ones_like(y))
    return fits, of_line(fits, fits.dof)


def test_two_sound_results_at_factor_two():
    """Student's t with 4 degrees of freedom where both uncertainties are alike and have 2."""
    one, other = (many(TO_1_5, flat_draws(("pair", nth), TO_1_5, 0.005))[0] for nth in range(2))
    apart = np.abs(one.content - other.content) > 2.0 * np.hypot(one.fit_uncertainty, other.fit_uncertainty)
    assert 2 * stdtr(4, -2) == pytest.approx(0.116, abs=5e-4)
    assert apart.mean() == pytest.approx(0.116, abs=0.01)
    told("in 11.6 % of pairs")


def test_zeta_at_two_degrees_of_freedom():
    fits, _ = many(TO_1_5, flat_draws("zeta", TO_1_5, 0.005))
    assert 2 * stdtr(2, -3) == pytest.approx(0.0955, abs=5e-5)
    assert (np.abs(fits.content - 1.0) > 3.0 * fits.fit_uncertainty).mean() == pytest.approx(0.0955, abs=0.009)
    told("happens to 9.5 % of sound references")


def test_four_vessels_and_two_per_cent_of_noise():
    """Noise over the signal of level 0, additions to 1.5; of the top signal it would be more than 90 %."""
    fits, found = many(TO_1_5, flat_draws("two per cent", TO_1_5, 0.02))
    wide = ~((found.high - found.low) / 2.0 <= 0.1 * fits.content)
    assert wide.mean() == pytest.approx(0.61, abs=0.012)
    of_top = many(TO_1_5, flat_draws("of the top", TO_1_5, 0.05))
    assert (~((of_top[1].high - of_top[1].low) / 2.0 <= 0.1 * of_top[0].content)).mean() > 0.9
    told("61 % of good series have an expanded uncertainty above 10 %")


def test_pooled_degrees_of_freedom():
    fit = line(TO_1_5, [1.0 + x for x in TO_1_5])

    def half(nu: float) -> float:
        g = g_value(t_quantile(nu, 0.95), fit.slope, 0.01 / fit.spread)
        return sum(half_widths(fit.content, fit.x_mean, fit.spread, fit.weight, g)) / 2

    assert (half(2), half(40)) == pytest.approx((0.071, 0.033), abs=6e-4)
    told("half-width is 7.1 %, and 3.3 % with 40")


@pytest.mark.parametrize(("vessels", "covers"), [(4, 0.913), (6, 0.874)])
def test_a_shared_error_of_the_blank(vessels, covers):
    """1.5 times the noise, common to all vessels, additions to 1.5: what an interval of the fit alone covers."""
    x = [1.5 * i / (vessels - 1) for i in range(vessels)]
    y = flat_draws(("shared", vessels), x, 0.01) + 0.015 * normals(("blank", vessels), 1)
    _, found = many(x, y)
    assert ((found.low <= 1.0) & (found.high >= 1.0)).mean() == pytest.approx(covers, abs=0.012)


def ends(below: float, above: float) -> tuple[float, float]:
    """Contents that leave such shares of the distribution below and above; known noise of 0.05."""
    fit = line(TO_1_5, [1.0 + x for x in TO_1_5])

    def half(share: float) -> tuple[float, float]:
        g = g_value(t_quantile(math.inf, 1.0 - 2.0 * share), 1.0, 0.05 / fit.spread)
        return half_widths(1.0, fit.x_mean, fit.spread, fit.weight, g)

    return 1.0 - half(below)[0], 1.0 + half(above)[1]


def test_fieller_beside_monte_carlo():
    """Fieller's ends are those of the equal-tailed interval of the draws; the shortest interval lies lower."""
    fits, _ = many(TO_1_5, flat_draws("monte carlo", TO_1_5, 0.05))
    fieller = ends(0.025, 0.025)
    assert fieller == pytest.approx(np.quantile(fits.content, (0.025, 0.975)).tolist(), abs=0.01)
    every = [ends(below / 2000, (100 - below) / 2000) for below in range(1, 100)]
    _, low, high = min((high - low, low, high) for low, high in every)
    assert fieller == pytest.approx((0.851, 1.176), abs=5e-4)
    assert (low, high) == pytest.approx((0.845, 1.168), abs=2e-3)


def test_nothing_counts_twice():
    """Deliveries that scatter by 0.015 show in the residuals; declared beside them they count twice."""
    slips = 0.015 * normals("deliveries", 4)
    slips[0] = 0.0  # nothing is delivered to level 0
    fits, _ = many(TO_1_5, 1.0 + columns(np.array(TO_1_5)) + slips)
    moved = []
    for nth in (1, 2, 3):
        slipped = [1.0 + x + 0.015 * (nth == i) for i, x in enumerate(TO_1_5)]
        moved.append(line(TO_1_5, slipped).content - 1.0)
    shown = math.sqrt(float(np.mean(fits.fit_uncertainty**2)))
    assert float(np.std(fits.content)) == pytest.approx(0.0151, abs=3e-4)
    assert math.hypot(shown, *moved) == pytest.approx(0.0273, abs=5e-4)
    told("scatters by 0.015.", "it seems 0.027")


def test_a_residual_of_four_points_has_a_bound():
    """Internally studentised residuals cannot exceed sqrt(n - 2)."""
    x = columns(np.array(STEPS))
    fits, _ = many(STEPS, flat_draws("residuals", STEPS, 0.1))
    leverage = 0.25 + (x - 1.5) ** 2 / 5.0
    largest = (np.abs(fits.residuals) / (fits.residual_sd * np.sqrt(1 - leverage))).max()
    assert math.sqrt(2) - 0.001 < largest <= math.sqrt(2) + 1e-9


def test_a_curve_that_four_points_cannot_show():
    inside = 1.0 + np.array(TO_1_5)
    exact = inside / (1.0 + 0.08 * inside)
    fit = line(TO_1_5, exact)
    assert fit.content == pytest.approx(1.22, abs=5e-3)
    assert fit.correlation == pytest.approx(0.9995, abs=5e-5)
    y = columns(exact) * (1.0 + 0.01 * normals("mandel", 4))
    found = straightness(columns(np.array(TO_1_5)), y, np.ones_like(y))
    assert (found.mandel_p < 0.05).mean() == pytest.approx(0.11, abs=0.01)
    # over 20 series: the mean bend of the parabola over its standard deviation
    one = found.parabola[2]
    assert abs(one.mean()) / one.std() * math.sqrt(20) == pytest.approx(7.7, abs=0.25)
    told("22 % too high, r is 0.9995", "notices it in 11 %")
