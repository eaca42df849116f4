"""Prepared lines through the solver: volumes, background, verdicts without a number, and company."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.prepared import PreparedLine, PreparedVessel, WayBack
from spikeward.rules.records import FAULTY, MISSING, NOT_DETECTED, OVER_RANGE, Reading, SeriesKey
from spikeward.rules.solve.background import background_of
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.solved import Background, Solved

KEY = SeriesKey("", "", "B1", "sample", "S1")
SLOT = (KEY.batch_key, "Cd", "228.8")


def jobs(lines, backgrounds=None):
    """Each line with the background of its batch, as an evaluation would ask for them."""
    known = backgrounds or {}
    return [Job(one, Corrections(known.get((one.key.batch_key, one.analyte, one.line)))) for one in lines]


def read(signal, level="0", vessel="", qualifier="", readings=1, sd=None, row=2, key=KEY, solution="", already=()):
    return Reading(
        key, level, vessel, "", "", solution or f"S1-{level}{vessel}", "Cd", "228.8", "A", signal, str(signal),
        qualifier, readings, sd, "", "", None, (), already, "night/run.csv", row, "",
    )  # fmt: skip


def vessel(level, x, signal, aliquot=1.0, final=1.0, name="", excluded="", **more):
    """``x`` is the content added per volume of test solution."""
    readings = signal if isinstance(signal, tuple) else (read(signal, str(level), name, row=2 + level, **more),)
    return PreparedVessel(str(level), name, aliquot, 0.0, final, x * aliquot, readings, excluded)


def line(*vessels, back=None, key=KEY):
    return PreparedLine(key, "Cd", "228.8", "flasks", "mg/L", "A", vessels, back, "mix", "")


def solve(*vessels, back=None, backgrounds=None, coverage=0.95) -> Solved:
    return solve_lines(jobs([line(*vessels, back=back)], backgrounds or {}), coverage)[0]


X, Y = (0.0, 1.0, 2.0, 3.0), (0.31, 0.44, 0.62, 0.75)
GOOD = tuple(vessel(i, x, y) for i, (x, y) in enumerate(zip(X, Y, strict=True)))


def test_readings_of_a_vessel_are_one_point():
    readings = (read(0.30, readings=3, sd=0.01), read(0.34, row=3, readings=1))
    solved = solve(vessel(0, 0.0, readings), *GOOD[1:])
    point = solved.points[0]
    assert point.signal == pytest.approx((3 * 0.30 + 0.34) / 4)
    assert point.readings == 4
    # within: 2 x 0.01²; between: 3 x 0.01² + 0.03²
    assert point.sd == pytest.approx(math.sqrt((2 * 1e-4 + 3 * 1e-4 + 9e-4) / 3))
    assert solved.degrees_of_freedom == 2


def test_an_exported_mean_without_sd_leaves_the_scatter_unknown():
    assert solve(vessel(0, 0.0, (read(0.31, readings=3), read(0.32))), *GOOD[1:]).points[0].sd is None
    assert solve(*GOOD).points[0].sd is None


def test_the_volumes_are_corrected():
    """S = k (C0 V0 + Cs v)/V with k = 0.2, C0 = 0.5, aliquots of 10 and 8 mL, growing and made-up volumes."""
    volumes = [(10.0, 10.0), (10.0, 10.5), (8.0, 25.0), (10.0, 11.0)]
    vessels = [vessel(i, 0.3 * i, 0.2 * (0.5 + 0.3 * i) * v0 / vf, v0, vf) for i, (v0, vf) in enumerate(volumes)]
    solved = solve(*vessels)
    assert solved.content.content == pytest.approx(0.5, rel=1e-12)
    assert [point.matrix_share for point in solved.points] == [v0 / vf for v0, vf in volumes]


def growing(background):
    """Successive additions into 10 mL: truth 0.500, with a constant background on every reading."""
    finals = [10.0, 10.5, 11.0, 11.5]
    return [
        vessel(i, 0.25 * i, 0.2 * (0.5 + 0.25 * i) * 10.0 / vf + background, 10.0, vf) for i, vf in enumerate(finals)
    ]


def test_the_background_comes_off_before_the_volumes():
    backgrounds = {SLOT: Background(0.03, None, 0, 1, (), "A")}
    assert solve(*growing(0.03), backgrounds=backgrounds).content.content == pytest.approx(0.5, rel=1e-12)
    # subtracted from the corrected signals, or not at all, it would not be 0.500
    after = solve(*[replace(v, final=10.0) for v in growing(0.03)], backgrounds=backgrounds).content.content
    assert abs(after - 0.5) > 0.01
    assert solve(*growing(0.03)).content.content > 0.6


def test_the_background_uncertainty_moves_the_content_as_refitting_does():
    vessels, u = growing(0.03), 0.002
    noisy = [
        replace(v, readings=(replace(v.readings[0], signal=v.readings[0].signal + e),))
        for v, e in zip(vessels, (0.001, -0.002, 0.0015, -0.0005), strict=True)
    ]
    known = Background(0.03, u, 9, 10, (), "A")
    solved = solve(*noisy, backgrounds={SLOT: known})
    up, down = (
        solve(*noisy, backgrounds={SLOT: Background(0.03 + e, None, 0, 1, (), "A")}).content.content
        for e in (1e-6, -1e-6)
    )
    assert solved.background_effect == pytest.approx((up - down) / 2e-6, rel=1e-6)
    rest = solved.background_effect * u
    assert solved.content.standard_uncertainty == pytest.approx(math.hypot(solved.fit_uncertainty, rest), rel=1e-12)
    assert solved.content.interval[1] - solved.content.content > solved.fit_half_widths[1]


def test_a_shared_background_error_is_covered():
    """A background error of 1.5 times the noise, common to all vessels: the fit alone covers far less than 95 %."""
    rng, alone, widened = np.random.default_rng(7), 0, 0
    truth, noise, series = 1.0, 0.01, 2000
    lines, backgrounds = [], {}
    for i in range(series):
        key = replace(KEY, batch=f"B{i}")
        signals = [0.2 + 0.5 * (truth + x) + rng.normal(0, noise) for x in X]
        lines.append(line(*(vessel(j, x, s) for j, (x, s) in enumerate(zip(X, signals, strict=True))), key=key))
        mean = 0.2 + rng.normal(0, 1.5 * noise)
        backgrounds[key.batch_key, "Cd", "228.8"] = Background(mean, 1.5 * noise, 60, 61, (), "A")
    for solved in solve_lines(jobs(lines, backgrounds), 0.95):
        lower, upper = solved.fit_half_widths
        alone += solved.content.content - lower <= truth <= solved.content.content + upper
        widened += solved.content.interval[0] <= truth <= solved.content.interval[1]
    assert alone / series < 0.91
    assert 0.935 < widened / series < 0.985


@pytest.mark.parametrize(
    ("qualifier", "words"),
    [
        (NOT_DETECTED, "not detected: that is a bound, not zero"),
        (OVER_RANGE, "over range"),
        (MISSING, "has no signal"),
        (FAULTY, "does not hold a number"),
    ],
)
def test_a_vessel_without_a_number_stops_the_line(qualifier, words):
    solved = solve(vessel(0, 0.0, None, qualifier=qualifier), *GOOD[1:])
    assert solved.content is None
    assert words in solved.no_number
    assert "level 0 (night/run.csv, row 2)" in solved.no_number
    assert len(solved.points) == 3
    assert solved.slope is None


def test_an_excluded_vessel_is_shown_and_not_fitted():
    outlier = vessel(2, 2.0, 9.9, excluded="A. Muster, 2026-01-05: bubble in the cell")
    with_it, without = solve(*GOOD[:2], outlier, GOOD[3]), solve(*GOOD[:2], GOOD[3])
    assert with_it.content == without.content
    assert with_it.points[2].excluded
    assert with_it.points[2].fitted is None
    assert with_it.degrees_of_freedom == 1
    unread = vessel(2, 2.0, None, qualifier=OVER_RANGE, excluded="A. Muster, 2026-01-05: bubble in the cell")
    assert solve(*GOOD[:2], unread, GOOD[3]).content == without.content


@pytest.mark.parametrize(
    ("vessels", "words"),
    [
        ([], "no vessel can be used"),
        ([(0, 0.3)], "only one vessel can be used: a standard addition needs at least two levels"),
        ([(0, 0.3), (0, 0.4), (0, 0.5)], "no vessel received an addition"),
        ([(2, 0.3), (2, 0.4), (2, 0.5)], "the same addition"),
        ([(0.3, 0.3), (3 * 0.1, 0.4), (0.3, 0.5)], "the same addition"),  # 3 x 0.1 is not 0.3 in binary
        ([(0, 0.4), (1, 0.4), (2, 0.4)], "all vessels give the same signal"),
        ([(0, 0.4), (1, 0.5), (2, 0.4)], "the slope is zero"),
        ([(0, 0.5), (1, 0.4)], "falls with the additions"),
        ([(0, 0.80), (1, 0.61), (2, 0.39)], "falls with the additions"),
        ([(0, 0.4), (1, 0.5), (2, 0.38), (3, 0.47)], "the slope does not differ from zero"),
        ([(0, 0.47), (1, 0.38), (2, 0.5), (3, 0.4)], "the slope does not differ from zero"),
        ([(0, 0.3), (1, math.inf)], "does not hold a number"),
        ([(0, 0.3), (math.nan, 0.4), (2, 0.5)], "not a number"),
        ([(0, 0.3), (math.inf, 0.4), (2, 0.5)], "too large"),
        ([(0, 1e-300), (1e300, 2e-300), (2e300, 3.1e-300)], "too large or too small"),
        ([(0, 1e300), (1e-300, 2e300), (2e-300, 3.1e300)], "too large or too small"),
    ],
)
def test_no_number_says_why(vessels, words):
    solved = solve(*(vessel(i, x, y) for i, (x, y) in enumerate(vessels)))
    assert words in solved.no_number
    assert solved.content is None
    assert solved.in_sample is None


def test_a_way_back_beyond_all_numbers():
    back = WayBack(1e308, "mg/kg", "", 25.0, 0.5, "")
    solved = solve(*(vessel(i, 100 * x, y) for i, (x, y) in enumerate(zip(X, Y, strict=True))), back=back)
    assert "too large or too small" in solved.no_number
    assert solved.content is None
    assert solved.in_sample is None


def test_a_signal_too_large_to_add_up():
    readings = (read(1.7e308), read(-1.7e308, row=3), read(1.7e308, row=4))
    assert "too large" in solve(vessel(0, 0.0, readings), *GOOD[1:]).no_number


anything = st.floats(allow_nan=True, allow_infinity=True)
volumes = st.floats(-1.0, 1e308)


@given(st.lists(st.tuples(anything, anything, volumes, volumes), max_size=6), anything)
def test_whatever_comes_a_finite_number_or_a_sentence(rows, background):
    vessels = [vessel(i, x, y, v0, vf) for i, (x, y, v0, vf) in enumerate(rows)]
    back = WayBack(50.0, "mg/kg", "", 25.0, 0.5, "")
    solved = solve(*vessels, back=back, backgrounds={SLOT: Background(background, 1.0, 3, 4, (), "A")})
    if solved.no_number:
        assert solved.content is None
        return
    for estimate in (solved.content, solved.in_sample):
        known = (estimate.content, estimate.standard_uncertainty, estimate.expanded_uncertainty)
        assert all(math.isfinite(value) for value in known if value is not None)
        if estimate.interval:
            assert estimate.interval[0] <= estimate.content <= estimate.interval[1]


def test_an_insignificant_slope_is_drawn_but_gives_no_number():
    solved = solve(*(vessel(i, float(i), y) for i, y in enumerate((0.4, 0.5, 0.38, 0.47))))
    assert solved.g >= 1.0
    assert solved.slope is not None
    assert all(point.fitted is not None for point in solved.points)


def test_a_negative_content_stays_and_is_named():
    solved = solve(*(vessel(i, float(i), y) for i, y in enumerate((-0.05, 0.10, 0.24, 0.40))))
    assert solved.content.content < 0
    assert any("though nothing was subtracted" in note for note in solved.notes)
    known = {SLOT: Background(0.01, None, 0, 1, (), "A")}
    less = solve(*(vessel(i, float(i), y) for i, y in enumerate((-0.05, 0.10, 0.24, 0.40))), backgrounds=known)
    assert any("subtracted too high" in note for note in less.notes)


def test_one_addition_and_two_vessels_each():
    single = solve(vessel(0, 0.0, 0.3), vessel(1, 2.0, 0.5))
    assert single.content.content == pytest.approx(3.0, rel=1e-12)
    assert single.content.standard_uncertainty is None
    assert single.content.interval is None
    assert single.g is None
    assert single.residual_sd is None
    double = solve(
        vessel(0, 0.0, 0.30, name="a"), vessel(0, 0.0, 0.31, name="b"), vessel(1, 2.0, 0.5, name="a"),
        vessel(1, 2.0, 0.52, name="b"),
    )  # fmt: skip
    assert double.degrees_of_freedom == 2
    assert double.content.standard_uncertainty > 0


def test_an_exact_fit_says_that_zero_is_not_real():
    solved = solve(*(vessel(i, 0.1 * i, 0.2 + 0.1 * i * 0.7) for i in range(4)))
    assert solved.residual_sd == 0.0
    assert solved.content.standard_uncertainty == 0.0
    assert "not a real one" in solved.content.reason
    known = solve(
        *(vessel(i, 0.1 * i, 0.2 + 0.1 * i * 0.7) for i in range(4)),
        backgrounds={SLOT: Background(0.01, 0.001, 4, 5, (), "A")},
    )
    assert known.content.standard_uncertainty == pytest.approx(0.001 / 0.7, rel=1e-9)
    assert known.effective_degrees_of_freedom == 4


def test_problems_of_the_preparation_come_first():
    failing = replace(line(*GOOD), problems=("no final volume is known.",))
    assert solve_lines(jobs([failing]), 0.95)[0].no_number == "no final volume is known."


def test_the_way_back_scales_every_digit():
    back = WayBack(50.0, "mg/kg", "dry matter", 25.0, 0.5, "0.5 g made up to 25 mL")
    solved = solve(*GOOD, back=back)
    assert solved.in_sample.content == pytest.approx(50 * solved.content.content)
    assert solved.in_sample.interval == pytest.approx(tuple(50 * end for end in solved.content.interval))
    assert solved.in_sample.unit == "mg/kg"
    assert solved.preparation == "0.5 g made up to 25 mL"


@given(st.permutations(range(6)))
def test_the_order_of_vessels_changes_no_digit(order):
    signals = (0.31, 0.44, 0.62, 0.75, 0.31, 0.77)
    vessels = [vessel(i, float(i % 4), signals[i], 1.0, 1.0 + 0.1 * (i % 4)) for i in range(6)]
    known = {SLOT: Background(0.01, 0.002, 4, 5, (), "A")}
    straight, mixed = solve(*vessels, backgrounds=known), solve(*(vessels[i] for i in order), backgrounds=known)
    assert mixed.content == straight.content
    assert mixed.correlation == straight.correlation


def test_other_units_give_the_same_content():
    known, plain = {SLOT: Background(0.01, 0.002, 4, 5, (), "A")}, GOOD
    milli = [replace(v, added=v.added * 1000.0) for v in plain]
    litres = [replace(v, added=v.added / 1000.0, aliquot=1e-3, final=1e-3) for v in plain]
    a, b, c = (solve(*v, backgrounds=known).content for v in (plain, milli, litres))
    for other, factor in ((b, 1000.0), (c, 1.0)):
        assert other.content == pytest.approx(factor * a.content, rel=1e-12)
        assert other.expanded_uncertainty == pytest.approx(factor * a.expanded_uncertainty, rel=1e-12)


def test_alone_and_in_company():
    rng, lines, known = np.random.default_rng(3), [], {}
    for i in range(80):
        n, key = int(rng.integers(1, 12)), replace(KEY, batch=f"B{i % 5}", sample=f"S{i}")
        xs = np.concatenate(([0.0], rng.uniform(0.5, 8.0, n)))
        made = [vessel(j, float(x), float(0.3 * (1 + x) + rng.normal(0, 0.02))) for j, x in enumerate(xs)]
        lines.append(line(*made, key=key))
        known[key.batch_key, "Cd", "228.8"] = Background(0.013 * (i % 5), 0.001, 5, 6, (), "A")
    together = solve_lines(jobs(lines, known), 0.95)
    assert together == tuple(solve_lines(jobs([one], known), 0.95)[0] for one in lines)
    assert together[::-1] == solve_lines(jobs(lines[::-1], known), 0.95)
    assert solve_lines(jobs([]), 0.95) == ()


BLANK = SeriesKey("", "", "B1", "background", "")


def test_the_background_is_the_mean_of_vessels():
    readings = [
        read(0.010, key=BLANK, solution="bg 1"), read(0.012, key=BLANK, solution="bg 1"),
        read(0.014, key=BLANK, solution="bg 2"), read(0.016, key=BLANK, solution="bg 3"),
    ]  # fmt: skip
    background = background_of(readings)
    assert background.mean == pytest.approx((0.011 + 0.014 + 0.016) / 3)
    assert background.vessels == 3
    assert background.degrees_of_freedom == 2
    assert background.standard_uncertainty == pytest.approx(np.std([0.011, 0.014, 0.016], ddof=1) / 3**0.5)
    assert background.unit == "A"
    assert background_of([]) is None


def test_repeated_readings_of_a_background_are_no_vessels():
    """Two solutions, each read twice under names that end in _r1 and _r2: one degree of freedom, u = 0.004/2."""
    one, two = replace(BLANK, sample="1"), replace(BLANK, sample="2")
    readings = [
        replace(read(signal, key=key, solution=f"BLK{key.sample}_r{n}"), reading=f"{n}")
        for key, signal in ((one, 0.010), (two, 0.014)) for n in (1, 2)
    ]  # fmt: skip
    background = background_of(readings)
    assert (background.vessels, background.degrees_of_freedom) == (2, 1)
    assert background.standard_uncertainty == pytest.approx(0.002)
    single = background_of(readings[:2])
    assert single.vessels == 1
    assert "from one vessel" in single.note


def test_coverage_with_backgrounds_that_are_read_twice():
    """Background solutions vary ten times as much as their readings: 95 % of intervals or more hold the truth."""
    rng, lines, backgrounds, nights = np.random.default_rng(12), [], {}, 1000
    for i in range(nights):
        key = replace(KEY, batch=f"B{i}")
        blanks = []
        for solution in ("1", "2"):
            level = 0.02 + rng.normal(0, 0.002)
            own = replace(key, role="background", sample=solution)
            blanks += [
                read(level + rng.normal(0, 0.0002), key=own, solution=f"BLK{solution}_r{n}") for n in (1, 2)
            ]
        backgrounds[key.batch_key, "Cd", "228.8"] = background_of(blanks)
        signals = [0.02 + 0.3 + x / 4 + rng.normal(0, 0.0005) for x in X]
        lines.append(line(*(vessel(j, x / 4, s) for j, (x, s) in enumerate(zip(X, signals, strict=True))), key=key))
    intervals = [solved.content.interval for solved in solve_lines(jobs(lines, backgrounds), 0.95)]
    inside = sum(low <= 0.3 <= high for low, high in intervals)
    assert 0.93 < inside / nights < 0.995


def weighted(x, y, w):
    """Content and standard uncertainty by weighted least squares from another program."""
    fit = sm.WLS(y, sm.add_constant(x), weights=w).fit()
    (a, b), v = fit.params, fit.cov_params()
    gradient = np.array([1 / b, -a / b**2])
    return a / b, math.sqrt(gradient @ v @ gradient), math.sqrt(fit.scale), fit


@pytest.mark.parametrize(
    ("aliquots", "finals"),
    [
        ((10.0,) * 4, (10.0, 25.0, 25.0, 25.0)),  # unspiked solution read undiluted
        ((10.0,) * 4, (10.0, 12.5, 15.0, 17.5)),  # successive
        ((4.0, 6.0, 8.0, 10.0), (25.0,) * 4),
        ((10.0,) * 4, (25.0,) * 4),
    ],
)
def test_the_noise_is_that_of_the_signal(aliquots, finals):
    """u(y) = u(S) V/V0: weights (V0/V)², which change nothing where all shares are equal."""
    volumes = list(zip(aliquots, finals, strict=True))
    noise = (0.003, -0.005, 0.004, -0.002)
    signals = [0.5 * (0.3 + x / 4) * v0 / vf + e for x, (v0, vf), e in zip(X, volumes, noise, strict=True)]
    solved = solve(
        *(vessel(i, X[i] / 4, s, v0, vf) for i, (s, (v0, vf)) in enumerate(zip(signals, volumes, strict=True)))
    )
    x = np.array(X) / 4
    share = np.array(aliquots) / np.array(finals)
    content, u, s, fit = weighted(x, np.array(signals) / share, share**2)
    assert solved.content.content == pytest.approx(content, rel=1e-10)
    assert solved.content.standard_uncertainty == pytest.approx(u, rel=1e-9)
    assert solved.residual_sd == pytest.approx(s, rel=1e-9)  # in signal
    assert solved.intercept_uncertainty == pytest.approx(fit.bse[0], rel=1e-9)
    if len(set(share)) == 1:
        assert content == pytest.approx(weighted(x, np.array(signals) / share, np.ones(4))[0], rel=1e-10)


def test_coverage_where_small_aliquots_are_noisy():
    """Aliquots of 4 to 10 mL in 25 mL, constant noise of the signal: with equal weights only 90 % hold the truth."""
    rng, lines, series = np.random.default_rng(8), [], 2000
    aliquots = (4.0, 6.0, 8.0, 10.0)
    for i in range(series):
        signals = [(0.3 * v0 + 2.5 * j) / 25 + rng.normal(0, 0.002) for j, v0 in enumerate(aliquots)]
        vessels = [
            vessel(j, 2.5 * j / v0, s, v0, 25.0) for j, (s, v0) in enumerate(zip(signals, aliquots, strict=True))
        ]
        lines.append(line(*vessels, key=replace(KEY, sample=f"S{i}")))
    intervals = [solved.content.interval for solved in solve_lines(jobs(lines), 0.95)]
    assert 0.935 < sum(low <= 0.3 <= high for low, high in intervals) / series < 0.965


@pytest.mark.parametrize(("v0", "vf"), [(1e-200, 1e200), (1e200, 1e-200)])
def test_volumes_too_far_apart_are_refused(v0, vf):
    solved = solve(*GOOD[:3], vessel(3, 3.0, 0.75, v0, vf))
    assert "too large" in solved.no_number
    assert solved.content is None


def test_one_background_vessel():
    once = background_of([read(0.01, key=BLANK)])
    assert once.standard_uncertainty is None
    assert "not in the uncertainty" in once.note
    assert any("not in the uncertainty" in note for note in solve(*GOOD, backgrounds={SLOT: once}).notes)
    twice = background_of([read(0.010, key=BLANK), read(0.014, key=BLANK, row=3)])
    assert twice.standard_uncertainty == pytest.approx(0.002)
    assert twice.degrees_of_freedom == 1
    exported = background_of([read(0.010, key=BLANK, readings=4, sd=0.002)])
    assert exported.standard_uncertainty == pytest.approx(0.001)
    assert exported.degrees_of_freedom == 3


@pytest.mark.parametrize(("qualifier", "words"), [(NOT_DETECTED, "a bound, not zero"), (OVER_RANGE, "over range")])
def test_a_censored_background_is_not_zero(qualifier, words):
    background = background_of([read(0.01, key=BLANK), read(None, key=BLANK, qualifier=qualifier, row=9)])
    assert words in background.problem
    solved = solve(*GOOD, backgrounds={SLOT: background})
    assert words in solved.no_number
    assert "night/run.csv, row 9" in solved.no_number


def test_a_missing_background_reading_is_left_out_and_named():
    background = background_of([read(0.01, key=BLANK), read(None, key=BLANK, qualifier=MISSING, row=9)])
    assert background.mean == 0.01
    assert "row 9" in background.note
    assert background_of([read(None, key=BLANK, qualifier=FAULTY)]).problem


def test_a_background_in_another_unit_is_refused():
    background = replace(background_of([read(0.01, key=BLANK)]), unit="cps")
    assert "in cps and the signals are in A" in solve(*GOOD, backgrounds={SLOT: background}).no_number
    mixed = background_of([read(0.01, key=BLANK), replace(read(10.0, key=BLANK), unit="cps")])
    assert "export it in one unit" in mixed.problem


def test_a_background_is_never_subtracted_twice():
    vessels = [vessel(i, x, y, already=("blank",)) for i, (x, y) in enumerate(zip(X, Y, strict=True))]
    solved = solve(*vessels, backgrounds={SLOT: Background(0.1, 0.01, 4, 5, (), "A")})
    assert solved.content == solve(*GOOD).content
    assert solved.background is None
    assert "taken off already" in solved.blank_note
    assert "export all vessels in the same way" in solve(*vessels[:2], *GOOD[2:]).no_number
