"""Lines of one analyte, dilutions of one sample, and the slope against plain calibration."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from scipy import stats

from spikeward.rules.checks.chance import allowed
from spikeward.rules.checks.registry import REGISTRY, check_line
from spikeward.rules.checks.reruns import beside_each_other, original_of, reported_rerun
from spikeward.rules.checks.slopes import slopes_differ
from spikeward.rules.checks.spectral_lines import is_reported
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN
from spikeward.rules.prepared import WayBack
from spikeward.rules.records import Members, SeriesKey
from spikeward.rules.rulebook import LinesRule, Top
from spikeward.rules.solve.calibration import calibration_of
from spikeward.rules.uncertainty.interval import Component

X4 = (0.0, 0.25, 0.5, 0.75)
SCATTER = (0.004, -0.007, 0.005, -0.002)
OTHER_SCATTER = (-0.003, 0.006, -0.006, 0.003)
FIRST, SECOND = "Cd 214.4", "Cd 226.5"


def solved(bench, content=0.3, line="", sample="07", role="sample", scatter=SCATTER, slope=1.0, **changes):
    prepared = bench.line_of(X4, [slope * (content + x) + e for x, e in zip(X4, scatter, strict=True)], **changes)
    key = SeriesKey("root", "inbox", "MD12", role, sample)
    return bench.subject_of(replace(prepared, key=key, line=line)).solved


def among(bench, own, *others, rules=None, **context):
    """A line among others of its batch."""
    subject = bench.subject_of(own.prepared, rules)
    context = replace(subject.context, **context)
    return replace(subject, solved=own, context=beside_each_other(context, (own, *others)))


# ---- the rule that comparisons share


def test_chance_is_students_t_and_no_factor_of_two():
    """Student's table: t(0.995, 4) is 4.604, t(0.995, 2) 9.925; the normal distribution has 2.576."""
    two_and_two = [Component(0.3, 2), Component(0.3, 2)]
    assert allowed(two_and_two, 0.01) == pytest.approx(4.604 * 0.3 * math.sqrt(2), rel=2e-4)
    assert allowed([Component(1.0, 2), Component(0.0, 2)], 0.01) == pytest.approx(9.925, rel=1e-4)
    assert allowed([Component(3.0, math.inf), Component(4.0, math.inf)], 0.01) == pytest.approx(2.5758 * 5, rel=1e-4)
    assert allowed([Component(1.0, 0), Component(1.0, 2)], 0.01) is None
    assert allowed([], 0.01) is None
    assert allowed([Component(0.0, 2)], 0.01) is None


# ---- lines of one analyte


def ruled(bench, agree=None):
    return bench.rulebook(lines={"Cd": LinesRule(FIRST, agree)})


def test_lines_that_agree_within_chance_pass_and_others_warn(bench):
    own = solved(bench, line=FIRST)
    near, far = (solved(bench, content, SECOND, scatter=OTHER_SCATTER) for content in (0.31, 0.40))
    check = bench.check_of("line_agreement", among(bench, own, near, rules=ruled(bench)))
    assert check.verdict == PASS
    assert "Cd 214.4 gives" in check.sentence
    assert "and Cd 226.5" in check.sentence
    check = bench.check_of("line_agreement", among(bench, own, far, rules=ruled(bench)))
    assert check.verdict == WARN
    assert "the reported line is not changed by itself" in check.remedy
    assert check.unit == "mg/L"
    # by hand: t(0.995, nu_eff) of Welch and Satterthwaite on the two standard uncertainties
    u1, u2 = own.fit_uncertainty, far.fit_uncertainty
    nu = math.floor((u1**2 + u2**2) ** 2 / (u1**4 / 2 + u2**4 / 2))
    chance = stats.t.ppf(0.995, nu) * math.hypot(u1, u2)
    apart = abs(own.content.content - far.content.content)
    assert check.observed == pytest.approx(apart, rel=1e-12)
    assert check.observed > chance
    just = 1 - 2 * stats.t.sf(apart / math.hypot(u1, u2), nu)
    subject = among(bench, own, far, rules=ruled(bench))
    assert bench.check_of("line_agreement", subject, warn_p=(1 - just) * 0.99).verdict == PASS


def test_the_worst_of_several_lines_speaks(bench):
    own = solved(bench, line=FIRST)
    others = [solved(bench, c, name, scatter=OTHER_SCATTER) for c, name in ((0.31, SECOND), (0.5, "Cd 228.8"))]
    for order in (others, others[::-1]):
        check = bench.check_of("line_agreement", among(bench, own, *order, rules=ruled(bench)))
        assert (check.verdict, "Cd 228.8" in check.sentence) == (WARN, True)


def test_a_declared_share_takes_the_place_of_chance(bench):
    own, other = solved(bench, line=FIRST), solved(bench, 0.33, SECOND)
    loose, strict = (
        bench.check_of("line_agreement", among(bench, own, other, rules=ruled(bench, share))) for share in (0.2, 0.05)
    )
    assert (loose.verdict, strict.verdict) == (PASS, WARN)
    assert "warns above 5 %" in strict.sentence
    assert strict.source == "the rule file; key lines"


def test_a_share_of_nothing_means_nothing(bench):
    own, other = solved(bench, 0.001, FIRST), solved(bench, 0.004, SECOND)
    check = bench.check_of("line_agreement", among(bench, own, other, rules=ruled(bench, 0.1)))
    assert check.verdict == NOT_EVALUATED
    assert "cannot be told from zero" in check.sentence


def test_a_reported_line_that_is_not_exported_fails_the_others(bench):
    other = solved(bench, line=SECOND)
    check = bench.check_of("line_agreement", among(bench, other, rules=ruled(bench)))
    assert check.verdict == FAIL
    assert check.sentence == "Cd 214.4, the line of Cd that is reported, is not in the export."
    assert check.remedy


def test_where_lines_cannot_be_compared(bench):
    own, other = solved(bench, line=FIRST), solved(bench, line=SECOND)

    def of(*lines, rules=None):
        return bench.check_of("line_agreement", among(bench, *lines, rules=rules or ruled(bench)))

    assert "was read at its reported line only" in of(own).sentence
    assert "was read at one line only" in of(own, rules=bench.rulebook()).sentence
    assert "do not say which line" in of(own, other, rules=bench.rulebook()).sentence
    dead = solved(bench, line=SECOND, slope=0.0, scatter=(0.0,) * 4)
    assert "Cd 226.5 gives no number" in of(own, dead).sentence
    pair = solved(bench, line=SECOND)
    unsure = replace(pair, fit_uncertainty=None)
    assert "scatter about one of the two lines is not known" in of(own, unsure).sentence
    elsewhere = solved(bench, 0.5, SECOND, sample="08")  # another sample is no other line of this one
    assert of(own, elsewhere).verdict == NOT_EVALUATED


def test_the_line_that_is_reported(bench):
    rules = ruled(bench)
    assert is_reported("Cd", FIRST, rules)
    assert is_reported("Cd", "214.4", rules)
    assert not is_reported("Cd", SECOND, rules)
    assert is_reported("Pb", "220.4", rules)


def test_a_single_line_without_a_rule_is_not_troubled(bench):
    subject = among(bench, solved(bench))
    made = {check.name for check in check_line(subject)}
    assert not {"line_agreement", "rerun", "electrode_slope", "noise", "pooled_precision", "slope_ratio"} & made
    assert {"duplicate", "lack_of_fit", "robust"} <= made


# ---- dilutions of one sample


def diluted(bench, factor, sample, rerun_of="", content=3.0, **changes):
    back = WayBack(10.0 * factor, "mg/kg", "", 50.0 * factor, 0.5, "", dilution=float(factor))
    return solved(bench, content / factor, sample=sample, way_back=back, rerun_of=rerun_of, **changes)


def test_the_lowest_dilution_in_range_is_reported(bench):
    rules = bench.rulebook(tops={"Cd": Top(2.0, "A")})
    neat, five, ten = diluted(bench, 1, "07"), diluted(bench, 5, "07-D5", "07"), diluted(bench, 10, "07-D10", "07")
    subject = among(bench, five, neat, ten, rules=rules)
    chosen = reported_rerun((ten, neat, five), subject.context)
    assert chosen == five.prepared.key  # the undiluted one reads 3.75 A
    assert bench.check_of("rerun", subject).verdict == PASS
    told = bench.check_of("rerun", among(bench, neat, five, ten, rules=rules))
    assert told.verdict == PASS
    assert "sample 07-D5 (dilution 5) is the one to report of 3 runs of 07" in told.sentence
    assert "this one is not in range" in told.sentence
    wide = among(bench, five, neat, ten)
    assert reported_rerun((five, neat, ten), wide.context) == neat.prepared.key


def test_dilutions_in_range_must_agree(bench):
    five = diluted(bench, 5, "07-D5", "07")
    same, other = diluted(bench, 10, "07-D10", "07"), diluted(bench, 10, "07-D10", "07", content=4.5)
    agrees = bench.check_of("rerun", among(bench, five, same))
    assert agrees.verdict == PASS
    for own, partner in ((five, other), (other, five)):
        check = bench.check_of("rerun", among(bench, own, partner))
        assert check.verdict == WARN
        assert "sample 07-D5 (dilution 5) is the one to report" in check.sentence
        assert check.unit == "mg/kg"
    u = [10.0 * f * one.fit_uncertainty for f, one in ((5, five), (10, other))]
    apart = abs(50.0 * five.content.content - 100.0 * other.content.content)
    nu = math.floor((u[0] ** 2 + u[1] ** 2) ** 2 / (u[0] ** 4 / 2 + u[1] ** 4 / 2))
    assert check.observed == pytest.approx(apart, rel=1e-12)
    assert apart > stats.t.ppf(0.995, nu) * math.hypot(*u)


def test_equal_dilutions_report_the_original(bench):
    first, again = diluted(bench, 5, "07"), diluted(bench, 5, "01-again", "07")
    context = among(bench, first, again).context
    assert reported_rerun((again, first), context) == first.prepared.key
    dead = diluted(bench, 5, "07", slope=0.0, scatter=(0.0,) * 4)
    assert reported_rerun((again, dead), context) == again.prepared.key


def test_no_dilution_in_range_fails(bench):
    rules = bench.rulebook(tops={"Cd": Top(0.5, "A")})
    lines = diluted(bench, 5, "07"), diluted(bench, 10, "07-D10", "07")
    check = bench.check_of("rerun", among(bench, *lines, rules=rules))
    assert check.verdict == FAIL
    assert check.sentence == "None of the 2 runs of 07 gives a number in range."


def test_where_runs_cannot_be_judged(bench):
    first, again = diluted(bench, 5, "07"), diluted(bench, 10, "07-D10", "07")
    alone = bench.check_of("rerun", among(bench, first, solved(bench, sample="08")))
    assert alone.sentence == "Not evaluated: 07 was run once."
    late = among(bench, first, again, waiting=frozenset({again.prepared.key}))
    assert "sample 07-D10 is not complete yet" in bench.check_of("rerun", late).sentence
    assert reported_rerun((first, again), late.context) == first.prepared.key
    dry = replace(again.prepared.way_back, basis="dry matter")
    unlike = replace(again, prepared=replace(again.prepared, way_back=dry))
    assert "not on one basis" in bench.check_of("rerun", among(bench, first, unlike)).sentence
    unsure = replace(again, fit_uncertainty=None)
    assert "scatter of one of them is not known" in bench.check_of("rerun", among(bench, first, unsure)).sentence


def test_the_original_of_a_series_that_is_not_prepared_yet(bench):
    night = bench.Night()
    night.read("sample", "07-D5", "0", 0.3, values=(("rerun_of", "07", "name"),))
    night.read("sample", "08", "0", 0.3)
    found = [original_of(Members(reading.series, (reading,))) for reading in night.readings]
    assert found == ["07", "08"]


# ---- slope against plain calibration


def test_welchs_test_of_two_slopes():
    """Against the two-sample test of a reference library, whose standard deviation over sqrt n is the uncertainty."""
    t, p = slopes_differ(0.0854, 0.0011, 4, 0.0791, 0.0011, 4)
    outside = stats.ttest_ind_from_stats(0.0854, 0.0011 * 5**0.5, 5, 0.0791, 0.0011 * 5**0.5, 5, equal_var=False)
    assert t == pytest.approx(outside.statistic, rel=1e-12)
    assert p == pytest.approx(outside.pvalue, rel=1e-9)
    t, p = slopes_differ(2.5758293, 0.6, math.inf, 0.0, 0.8, math.inf)
    assert p == pytest.approx(0.01, rel=1e-6)  # the normal distribution's 2.576


def beside_calibration(bench, ratio, plain_scatter=0.002, **changes):
    night = bench.Night()
    contents = {f"S{n}": {"Cd": bench.quantity(str(0.2 * n), "mg/L")} for n in range(6)}
    for n in range(6):
        night.read("calibration", f"S{n}", "", 0.01 + 0.2 * n + plain_scatter * (-1) ** n)
    calibration = calibration_of(night.readings, contents)
    own = solved(bench, slope=ratio, scatter=tuple(ratio * e for e in SCATTER), **changes)
    return among(bench, own, calibrations={("Cd", "", ""): calibration})


def test_the_matrix_is_told_and_never_fails(bench):
    check = bench.check_of("slope_ratio", beside_calibration(bench, 0.9))
    assert check.verdict == PASS
    assert "the matrix lowers the response by 1" in check.sentence
    check = bench.check_of("slope_ratio", beside_calibration(bench, 0.66))
    assert check.verdict == WARN
    assert check.observed == pytest.approx(0.66, abs=0.02)
    assert "more than chance (t -" in check.sentence
    assert "The additions correct it" in check.remedy
    assert "warns outside 80 % to 120 %" in check.sentence
    raised = bench.check_of("slope_ratio", beside_calibration(bench, 1.3))
    assert (raised.verdict, "raises the response" in raised.sentence) == (WARN, True)
    deep = bench.check_of("slope_ratio", beside_calibration(bench, 0.2), fail_below=0.5)
    assert deep.verdict == WARN
    assert deep.remedy.startswith("Dilute the test solution: so strong a suppression")


def test_a_matrix_effect_within_chance_says_so(bench):
    check = bench.check_of("slope_ratio", beside_calibration(bench, 1.0))
    assert (check.verdict, "no more than chance" in check.sentence) == (PASS, True)


def test_where_slopes_cannot_be_compared(bench):
    good = beside_calibration(bench, 0.66)
    (calibration,) = good.context.calibrations.values()

    def of(subject):
        check = bench.check_of("slope_ratio", subject)
        assert check.verdict == NOT_EVALUATED
        return check.sentence

    assert "no plain calibration was measured" in of(among(bench, good.solved))
    broken = replace(calibration, problem="the signals of the calibration do not rise with the content")
    assert "do not rise" in of(among(bench, good.solved, calibrations={("Cd", "", ""): broken}))
    counts = replace(calibration, signal_unit="counts")
    assert "come in counts and A" in of(among(bench, good.solved, calibrations={("Cd", "", ""): counts}))
    kilo = replace(calibration, unit="mg/kg")
    assert "the calibration is in mg/kg" in of(among(bench, good.solved, calibrations={("Cd", "", ""): kilo}))
    internal = replace(good.solved, prepared=replace(good.solved.prepared, internal="Rh", entered="in_sample"))
    assert "came in with the sample" in of(replace(good, solved=internal))
    log = replace(good.solved, prepared=replace(good.solved.prepared, response="log"))
    assert "straight line" in of(replace(good, solved=log))
    assert "there is no line" in of(replace(good, solved=replace(good.solved, slope=None)))


def test_a_constant_content_of_internal_standard_takes_the_ratios(bench):
    good = beside_calibration(bench, 0.66)
    (calibration,) = good.context.calibrations.values()
    prepared = replace(good.solved.prepared, internal="Rh", entered="at_constant_content")
    ratios = replace(calibration, slope=0.66, signal_unit="")
    both = replace(good.context, calibrations={("Cd", "", ""): calibration, ("Cd", "", "Rh"): ratios})
    check = bench.check_of("slope_ratio", replace(good, solved=replace(good.solved, prepared=prepared), context=both))
    assert check.verdict == PASS


def test_checks_of_the_batch_are_marked_so():
    for name in ("slope_ratio", "rerun", "duplicate", "spike_recovery", "pooled_precision"):
        assert REGISTRY[name].looks_at == "batch"
