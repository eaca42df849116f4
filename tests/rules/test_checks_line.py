"""Checks of one line: for each a series that passes, one that warns, one that fails and one that it cannot judge."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from spikeward.rules.checks.line import _studentised_critical
from spikeward.rules.checks.registry import REGISTRY
from spikeward.rules.checks.straight import straightness_of
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN
from spikeward.rules.records import OVER_RANGE
from spikeward.rules.rulebook import Top
from spikeward.rules.solve.solved import Background

X4 = (0.0, 0.25, 0.5, 0.75)
X6 = (0.0, 0.2, 0.4, 0.6, 0.8, 1.0)
SCATTER = (0.004, -0.007, 0.005, -0.002, 0.003, -0.003)


def ys(x, content=0.3, noise=1.0, slope=1.0, bend=0.0):
    return [slope * (content + v) + bend * v * v + noise * e for v, e in zip(x, SCATTER, strict=False)]


def every_verdict(bench, name, subjects, **limits):
    """The four subjects stand in the order pass, warn, fail, not evaluated; None where that cannot be."""
    for verdict, subject in zip((PASS, WARN, FAIL, NOT_EVALUATED), subjects, strict=True):
        if subject is None:
            continue
        check = bench.check_of(name, subject, **limits)
        assert check.verdict == verdict, (verdict, check)
        assert check.name == name
        assert check.sentence.endswith(".")
        assert bool(check.remedy) == (verdict in (WARN, FAIL)) or verdict == NOT_EVALUATED
        if verdict in (WARN, FAIL):
            assert check.source, check


def test_levels(bench):
    def of(n):
        return bench.subject_of(bench.line_of(X4[:n], ys(X4[:n])))

    every_verdict(bench, "levels", (of(4), of(3), of(2), None))
    single = bench.subject_of(bench.line_of(X4[:2], ys(X4[:2]), design="single"))
    assert bench.check_of("levels", single).verdict == PASS
    assert "declare the design single" in bench.check_of("levels", of(2)).remedy
    without_zero = bench.subject_of(bench.line_of(X4[1:3], ys(X4[1:3])))
    for subject in (of(1), of(3), without_zero, single):  # none of these would be a single addition, or is one
        assert "declare" not in bench.check_of("levels", subject).remedy


def test_response_holds_g_against_fieller(bench):
    def of(noise, n=4):
        return bench.subject_of(bench.line_of(X4[:n], ys(X4[:n], noise=noise)))

    every_verdict(bench, "response", (of(1), of(14), of(60), of(1, n=2)))
    g = of(14).solved.g
    x, y = X4, ys(X4, noise=14)
    outside = stats.linregress(x, y)
    assert g == pytest.approx((stats.t.ppf(0.975, 2) * outside.stderr / outside.slope) ** 2, rel=1e-9)


def test_a_signal_that_falls_fails_the_response(bench):
    check = bench.check_of("response", bench.subject_of(bench.line_of(X4, ys(X4, slope=-1, content=-1))))
    assert check.verdict == FAIL


def test_correlation_only_where_a_method_demands_it(bench):
    good, poor = (bench.subject_of(bench.line_of(X4, ys(X4, noise=noise))) for noise in (1, 14))
    assert bench.check_of("correlation", good).verdict == NOT_EVALUATED
    every_verdict(
        bench, "correlation",
        (good, None, poor, bench.subject_of(bench.line_of(X4[:2], ys(X4[:2])))), fail_below=0.995,
    )  # fmt: skip


def test_residual(bench):
    def of(slip, n=4):
        y = ys(X4[:n])
        y[1] += slip
        return bench.subject_of(bench.line_of(X4[:n], y))

    every_verdict(bench, "residual", (of(0), of(0.06), of(0.4), of(0, n=2)))
    assert "level 1" in bench.check_of("residual", of(0.4)).sentence


def test_noise_at_a_content_near_zero_is_no_slip(bench):
    x = (0.0, 0.5, 1.0, 1.5)
    subject = bench.subject_of(bench.line_of(x, ys(x, content=0.005)))
    assert bench.check_of("residual", subject).verdict == PASS
    assert bench.check_of("residual", subject, floor=0.0).verdict == FAIL


def test_studentised(bench):
    def of(slip, n=6, noise=1.0):
        y = ys(X6[:n], noise=noise)
        y[3] += slip
        return bench.subject_of(bench.line_of(X6[:n], y))

    # with six vessels the ratio cannot exceed 2: a slip of 15 % in 0.5 % noise only comes near
    every_verdict(bench, "studentised", (of(0), of(0.1), of(30), of(0, n=4)))
    assert "1.41" in bench.check_of("studentised", of(0, n=4)).sentence


@pytest.mark.parametrize(("n", "p"), [(6, 0.01), (8, 0.001), (12, 0.01)])
def test_studentised_critical_value_is_bonferronis(n, p):
    # the squared ratio over n - 2 follows a beta distribution (Cook and Weisberg 1982)
    outside = math.sqrt((n - 2) * stats.beta.isf(p / n, 0.5, (n - 3) / 2))
    assert _studentised_critical(p, n) == pytest.approx(outside, rel=1e-9)


def test_curvature(bench):
    def of(bend, n=6, content=0.3):
        return bench.subject_of(bench.line_of(X6[:n], ys(X6[:n], content=content, bend=bend, noise=0.2)))

    every_verdict(bench, "curvature", (of(0.0), of(-0.05, content=0.9), of(-0.3), of(-0.3, n=4)))
    assert "6 or more vessels" in bench.check_of("curvature", of(-0.3, n=5)).remedy


def test_points_on_the_line_to_the_last_digit_are_not_curved(bench):
    subject = bench.subject_of(bench.line_of(X6, [0.1 + 0.3 * x for x in X6]))
    assert bench.check_of("curvature", subject).verdict == PASS


def test_mandel_on_certified_data(bench):
    """NIST Statistical Reference Datasets, Pontius: r is 0.99999 and the curvature beyond any doubt."""
    first = (
        0.11019, 0.21956, 0.32949, 0.43899, 0.54803, 0.65694, 0.76562, 0.87487, 0.98292, 1.09146,
        1.20001, 1.30822, 1.41599, 1.52399, 1.63194, 1.73947, 1.84646, 1.95392, 2.06128, 2.16844,
    )  # fmt: skip
    second = (
        0.11052, 0.22018, 0.32939, 0.43886, 0.54798, 0.65739, 0.76596, 0.87474, 0.98300, 1.09150,
        1.20004, 1.30818, 1.41613, 1.52408, 1.63159, 1.73965, 1.84696, 1.95445, 2.06177, 2.16829,
    )  # fmt: skip
    x = [150000.0 * k for k in range(1, 21)] * 2
    subject = bench.subject_of(bench.line_of(x, first + second))
    check = bench.check_of("curvature", subject)
    assert check.verdict == FAIL
    # F by analysis of variance of the certified straight-line and quadratic fits
    assert check.observed == pytest.approx(4218.52506, rel=1e-8)
    # the certified parabola, B0 + B1 x + B2 x²: its zero nearest to that of the line
    b0, b1, b2 = 0.673565789473684e-3, 0.732059160401003e-6, -0.316081871345029e-14
    zero = (-b1 + math.sqrt(b1 * b1 - 4 * b2 * b0)) / (2 * b2)
    assert straightness_of(subject).by_parabola.item() == pytest.approx(-zero, rel=1e-9)


def test_a_curve_that_mandel_passes_and_r_fails(bench):
    """Nickel in ore by additions, Heinemann Chemistry 2, chapter 7: five points, the line is wrong by a factor 1.9."""
    x, y = (0.0, 10.0, 20.0, 40.0, 60.0), (0.15, 0.25, 0.34, 0.44, 0.53)
    subject = bench.subject_of(bench.line_of(x, y))
    assert bench.check_of("curvature", subject).verdict == NOT_EVALUATED
    forced = bench.check_of("curvature", subject, needs_vessels=4)
    assert forced.verdict == PASS
    assert forced.observed == pytest.approx(15.69, abs=0.01)
    assert forced.observed < stats.f.isf(0.05, 1, 2)
    r = bench.check_of("correlation", subject, fail_below=0.995)
    assert r.verdict == FAIL
    assert r.observed == pytest.approx(0.98394, abs=5e-6)


def test_span(bench):
    def of(content):
        return bench.subject_of(bench.line_of(X4, ys(X4, content=content)))

    every_verdict(bench, "span", (of(0.3), of(0.1), of(2.0), of(0.001)))
    assert bench.check_of("span", of(1.0)).verdict == WARN


def test_matrix_spread(bench):
    def of(*finals):
        line = bench.line_of(X4, ys(X4))
        vessels = tuple(replace(v, final=f) for v, f in zip(line.vessels, finals, strict=True))
        return bench.subject_of(replace(line, vessels=vessels))

    one = bench.subject_of(bench.line_of(X4[:1], ys(X4[:1])))
    every_verdict(bench, "matrix_spread", (of(1, 1, 1, 1), of(1, 1.02, 1.03, 1.05), of(1, 1.1, 1.1, 1.15), one))


def test_expanded_uncertainty(bench):
    def of(noise, x=X6):
        return bench.subject_of(bench.line_of(x, ys(x, noise=noise)))

    every_verdict(bench, "expanded_uncertainty", (of(1), of(4), of(8), of(1, x=X4[:2])))


def test_two_degrees_of_freedom_condemn_no_series(bench):
    check = bench.check_of("expanded_uncertainty", bench.subject_of(bench.line_of(X4, ys(X4, noise=5))))
    assert check.observed > 0.4
    assert check.verdict == WARN
    assert "4 vessels" in check.sentence


def test_a_content_that_cannot_be_told_from_zero_warns(bench):
    check = bench.check_of("expanded_uncertainty", bench.subject_of(bench.line_of(X4, ys(X4, content=0.005))))
    assert check.verdict == WARN
    assert "cannot be told from zero" in check.sentence


def test_units(bench):
    line = bench.line_of(X4, ys(X4))
    first, *rest = line.vessels
    other = replace(first, readings=(replace(first.readings[0], unit="counts"),))
    unknown = tuple(replace(v, readings=(replace(v.readings[0], unit=""),)) for v in line.vessels)
    mixed = bench.subject_of(replace(line, vessels=(other, *rest)))
    silent = bench.subject_of(replace(line, vessels=unknown, signal_unit=""))
    assert bench.check_of("units", bench.subject_of(line)).verdict == PASS
    assert bench.check_of("units", mixed).verdict == FAIL
    assert bench.check_of("units", silent).verdict == NOT_EVALUATED


def test_linear_top(bench):
    def of(top, unit="A"):
        return bench.subject_of(bench.line_of(X4, ys(X4)), bench.rulebook(tops={"Cd": Top(top, unit)}))

    every_verdict(
        bench, "linear_top", (of(1.5), of(1.1), of(1.0), bench.subject_of(bench.line_of(X4, ys(X4))))
    )
    assert bench.check_of("linear_top", of(1.5, "counts")).verdict == FAIL
    assert "Level 3 reads 1.05 A" in bench.check_of("linear_top", of(1.0)).sentence


def test_over_range_fails_even_without_a_top(bench):
    line = bench.line_of(X4, ys(X4))
    last = line.vessels[-1]
    over = replace(last.readings[0], qualifier=OVER_RANGE, signal=None)
    subject = bench.subject_of(replace(line, vessels=(*line.vessels[:-1], replace(last, readings=(over,)))))
    check = bench.check_of("linear_top", subject)
    assert check.verdict == FAIL
    assert "over range" in check.sentence
    excluded = replace(last, readings=(over,), excluded="A. Person, 2030-05-01: spilt")
    kept = bench.subject_of(replace(line, vessels=(*line.vessels[:-1], excluded)))
    assert bench.check_of("linear_top", kept).verdict == NOT_EVALUATED


def test_precision_pools_exported_deviations_and_repeated_readings(bench):
    def of(rsd, readings=3):
        line = bench.line_of(X4, ys(X4))
        vessels = tuple(
            replace(v, readings=(replace(r, readings=readings, sd=rsd * r.signal if rsd else None),))
            for v in line.vessels for r in v.readings
        )  # fmt: skip
        return bench.subject_of(replace(line, vessels=vessels))

    every_verdict(bench, "precision", (of(0.02), of(0.15), of(0.3), of(None, readings=1)))
    assert bench.check_of("precision", of(0.15)).observed == pytest.approx(0.15, rel=1e-9)
    line = bench.line_of(X4, ys(X4))
    twice = tuple(
        replace(v, readings=(r, replace(r, signal=r.signal * 1.02, row=r.row + 50)))
        for v in line.vessels for r in v.readings
    )  # fmt: skip
    check = bench.check_of("precision", bench.subject_of(replace(line, vessels=twice)))
    # two readings that differ by d have a standard deviation of d / sqrt 2, here of 1.01 times the signal
    assert check.observed == pytest.approx(0.02 / math.sqrt(2) / 1.01, rel=1e-9)


def test_precision_is_that_of_the_signal_without_its_background(bench):
    """A background of 0.4 on signals of 0.3 to 1.05: readings that differ by 0.02."""
    line = bench.line_of(X4, [y + 0.4 for y in ys(X4)])
    twice = tuple(
        replace(v, readings=(replace(r, signal=r.signal - 0.01), replace(r, signal=r.signal + 0.01, row=r.row + 50)))
        for v in line.vessels for r in v.readings
    )  # fmt: skip
    plain = bench.subject_of(replace(line, vessels=twice))
    background = Background(0.4, None, 0, 1, (), "A")
    subject = replace(plain, solved=replace(plain.solved, background=background))
    expected = math.sqrt(sum((0.01 * math.sqrt(2) / y) ** 2 for y in ys(X4)) / 4)
    assert bench.check_of("precision", subject, floor=0.0).observed == pytest.approx(expected, rel=1e-9)
    assert bench.check_of("precision", plain, floor=0.0).observed < expected / 1.3


def test_a_content_below_zero_by_more_than_its_uncertainty_fails(bench):
    subject = bench.subject_of(bench.line_of(X4, ys(X4, content=-0.2)))
    check = bench.check_of("expanded_uncertainty", subject)
    assert check.verdict == FAIL
    assert "below zero by more than its uncertainty: though nothing was subtracted" in check.sentence
    background = Background(0.4, None, 0, 1, (), "A")
    less = replace(subject, solved=replace(subject.solved, background=background))
    assert "subtracted too high" in bench.check_of("expanded_uncertainty", less).sentence
    near = bench.subject_of(bench.line_of(X4, ys(X4, content=-0.01)))
    assert "cannot be told from zero" in bench.check_of("expanded_uncertainty", near).sentence
    single = bench.subject_of(bench.line_of(X4[:2], ys(X4[:2], content=-0.2), design="single"))
    assert bench.check_of("expanded_uncertainty", single).verdict == WARN


def growing(bench, bend=0.0):
    """Successive additions of 1 mL to 10 mL: S = 0.4 c + bend c² of the content c in the vessel."""
    line = bench.line_of([0.0] * 6, [0.0] * 6, design="successive")
    vessels = []
    for n, vessel in enumerate(line.vessels):
        content, final = (3.0 + 10.0 * n) / (10.0 + n), 10.0 + n
        signal = 0.4 * content + bend * content**2 + 0.001 * SCATTER[n]
        readings = (replace(vessel.readings[0], signal=signal),)
        vessels.append(replace(vessel, aliquot=10.0, final=final, added=10.0 * n, readings=readings))
    return bench.subject_of(replace(line, vessels=tuple(vessels)))


def test_checks_of_the_line_take_the_weights_of_its_volumes(bench):
    subject = growing(bench)
    points = subject.solved.points
    x, y = np.array([p.x for p in points]), np.array([p.y for p in points])
    w = np.array([p.matrix_share for p in points]) ** 2
    fit = sm.WLS(y, sm.add_constant(x), weights=w).fit()
    parabola = sm.WLS(y, np.column_stack([np.ones(6), x, x**2]), weights=w).fit()
    f = (fit.ssr - parabola.ssr) / (parabola.ssr / 3)
    assert bench.check_of("curvature", subject).observed == pytest.approx(f, rel=1e-6)
    influence = sm.OLS(fit.model.wendog, fit.model.wexog).fit().get_influence()
    largest = np.abs(influence.resid_studentized_internal).max()
    assert bench.check_of("studentised", subject).observed == pytest.approx(largest, rel=1e-6)
    relative = np.abs(y - fit.fittedvalues) / fit.fittedvalues
    assert bench.check_of("residual", subject, floor=0.0).observed == pytest.approx(relative.max(), rel=1e-6)


def test_curvature_in_a_growing_volume_says_that_its_figure_is_rough(bench):
    assert bench.check_of("curvature", growing(bench)).verdict == PASS
    bent = bench.check_of("curvature", growing(bench, bend=-0.02))
    assert bent.verdict in (WARN, FAIL)
    assert "a rough figure as the volumes differ" in bent.sentence


def test_standard_in_date(bench):
    line = bench.line_of(X4, ys(X4))
    never = tuple(replace(v, readings=(replace(v.readings[0], measured_at=""),)) for v in line.vessels)
    assert bench.check_of("standard", bench.subject_of(line)).verdict == PASS
    assert bench.check_of("standard", bench.subject_of(replace(line, expires="2030-05-01"))).verdict == PASS
    assert bench.check_of("standard", bench.subject_of(replace(line, expires="2030-04-30"))).verdict == FAIL
    assert bench.check_of("standard", bench.subject_of(replace(line, expires=""))).verdict == NOT_EVALUATED
    assert bench.check_of("standard", bench.subject_of(replace(line, vessels=never))).verdict == NOT_EVALUATED


def test_a_line_without_a_number_fails(bench):
    subject = bench.subject_of(bench.line_of(X4, [0.3] * 4))
    check = bench.check_of("solved", subject)
    assert check.verdict == FAIL
    assert subject.solved.no_number[1:] in check.sentence
    assert bench.check_of("solved", bench.subject_of(bench.line_of(X4, ys(X4)))).verdict == PASS


def test_every_check_survives_a_line_without_a_number(bench):
    for y in ([0.3] * 4, [0.0] * 4, [-1e300, 1e300, 0.0, 5e-324]):
        subject = bench.subject_of(bench.line_of(X4, y))
        for name in REGISTRY:
            assert bench.check_of(name, subject).sentence


def test_pack_and_registry_agree(bench):
    asked = {name for name, one in REGISTRY.items() if name in bench.general_pack() or not one.always}
    assert asked == set(bench.general_pack())
    for name, limits in bench.general_pack().items():
        assert set(limits.values) == set(limits.sources), name
        assert all(limits.sources.values()), name
    assert all(name == one.name and one.describes for name, one in REGISTRY.items())


def with_over_range(bench):
    line = bench.line_of(X4, ys(X4))
    vessel = line.vessels[3]
    over = replace(vessel.readings[0], signal=None, text="OVER", qualifier=OVER_RANGE)
    return bench.subject_of(replace(line, vessels=(*line.vessels[:3], replace(vessel, readings=(over,)))))


@pytest.mark.parametrize("name", ["levels", "response", "correlation", "curvature", "residual", "studentised"])
def test_where_no_line_was_drawn_nothing_is_said_of_it(bench, name):
    check = bench.check_of(name, with_over_range(bench))
    assert (check.verdict, check.sentence, check.remedy) == (NOT_EVALUATED, "Not evaluated: there is no line.", "")


def test_a_vessel_over_range_has_one_remedy(bench):
    check = bench.check_of("solved", with_over_range(bench))
    assert check.sentence == "There is no number: level 3 (inbox/run.csv, row 2) is over range."
    assert check.remedy == "Dilute the test solution and measure again, or exclude the vessel by a decision"


def test_one_degree_of_freedom_is_one(bench):
    check = bench.check_of("curvature", bench.subject_of(bench.line_of(X4[:3], ys(X4[:3]))))
    assert "3 vessels leave 1 degree of freedom, too few" in check.sentence


def test_a_share_near_its_limit_is_not_told_as_the_limit(bench):
    subject = bench.subject_of(bench.line_of(X4, ys(X4)))
    share = bench.check_of("residual", subject).observed
    check = bench.check_of("residual", subject, warn_above=round(share, 4))
    limit, told = f"{round(share, 4) * 100:g} %", check.sentence.split(" is ")[1].split(" of ")[0]
    assert f"warns above {limit}" in check.sentence
    assert told != limit


def test_a_limit_says_under_which_key_it_is_changed(bench):
    check = bench.check_of("residual", bench.subject_of(bench.line_of(X4, ys(X4))))
    assert check.source == "common practice; key checks: residual"
