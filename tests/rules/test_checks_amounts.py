"""Duplicates, spiked samples and references: contents of the sample on one basis."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from scipy import stats

from spikeward.rules.checks.duplicates import REPEATABILITY_FACTOR
from spikeward.rules.checks.registry import check_line
from spikeward.rules.checks.reruns import beside_each_other
from spikeward.rules.checks.spikes import sample_size
from spikeward.rules.evaluate import evaluate
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WARN
from spikeward.rules.prepared import WayBack
from spikeward.rules.records import SeriesKey
from spikeward.rules.rulebook import BlankRule, Known, Top
from spikeward.rules.solve.solved import Reagent

X4 = (0.0, 0.25, 0.5, 0.75)
SCATTER = (0.004, -0.007, 0.005, -0.002)


def solved(bench, content=0.3, role="sample", mass=0.5, scatter=SCATTER, basis="", **changes):
    """``content`` mg/L in a digest of 50 mL of ``mass`` g: 100 times content over 2 mass in mg/kg."""
    back = WayBack(50.0 / mass, "mg/kg", basis, 50.0, mass, "")
    line = bench.line_of(X4, [content + x + e for x, e in zip(X4, scatter, strict=True)], way_back=back)
    key = SeriesKey("root", "inbox", "MD12", role, changes.pop("sample", "07"))
    return bench.subject_of(replace(line, key=key, **changes)).solved


def among(bench, own, *others, rules=None, **context):
    subject = bench.subject_of(own.prepared, rules)
    context = replace(subject.context, **context)
    return replace(subject, solved=own, context=beside_each_other(context, (own, *others)))


def in_sample(one):
    return one.in_sample.content


# ---- duplicates


@pytest.mark.parametrize(("other", "verdict"), [(0.32, PASS), (0.38, WARN), (0.45, FAIL)])
def test_duplicates_over_their_mean(bench, other, verdict):
    pair = solved(bench), solved(bench, other, "duplicate")
    share = abs(in_sample(pair[0]) - in_sample(pair[1])) / ((in_sample(pair[0]) + in_sample(pair[1])) / 2)
    for own, partner in (pair, pair[::-1]):  # judged on both
        check = bench.check_of("duplicate", among(bench, own, partner))
        assert check.verdict == verdict
        assert check.observed == pytest.approx(share, rel=1e-12)
        assert bool(check.remedy) == (verdict != PASS)
    assert "Sample 07 gives" in check.sentence


def test_masses_of_two_digests_differ(bench):
    """Twice the mass in the same volume is twice the content of the test solution and the same of the sample."""
    pair = solved(bench, 0.3), solved(bench, 0.6, "duplicate", mass=1.0)
    assert bench.check_of("duplicate", among(bench, *pair)).verdict == PASS


def test_repeatability_of_the_method():
    """ISO 5725-6: the repeatability limit r = 2.8 s_r; exactly 1.96 sqrt 2, which is 2.77."""
    exact = stats.norm.ppf(0.975) * math.sqrt(2)
    assert exact == pytest.approx(2.77, abs=0.005)
    assert round(exact, 1) == REPEATABILITY_FACTOR


@pytest.mark.parametrize(("s_r", "verdict"), [(0.02, WARN), (0.04, PASS), (0.2, PASS)])
def test_a_declared_repeatability_takes_the_place_of_the_limit(bench, s_r, verdict):
    pair = solved(bench, 0.3), solved(bench, 0.32, "duplicate")  # about 6.5 % apart, beyond 5.6 % and within 11 %
    check = bench.check_of("duplicate", among(bench, *pair), repeatability=s_r)
    assert check.verdict == verdict
    assert "2.8 s_r, ISO 5725-6" in check.source
    wide = solved(bench, 0.3), solved(bench, 0.5, "duplicate")  # 50 % apart
    assert bench.check_of("duplicate", among(bench, *wide), repeatability=0.04).verdict == FAIL
    assert bench.check_of("duplicate", among(bench, *wide), repeatability=0.2).verdict == PASS


def test_duplicates_that_cannot_be_compared(bench):
    own, other = solved(bench), solved(bench, role="duplicate")

    def of(*lines, **context):
        check = bench.check_of("duplicate", among(bench, *lines, **context))
        assert check.verdict == NOT_EVALUATED
        return check.sentence

    assert "no duplicate 07 was measured in this batch" in of(own)
    assert "no duplicate 07" in of(own, solved(bench, role="duplicate", sample="08"))
    assert "not both complete yet" in of(own, other, waiting=frozenset({other.prepared.key}))
    assert "only samples and their duplicates" in of(solved(bench, role="check"), other)
    assert "not on one basis" in of(own, solved(bench, role="duplicate", basis="dry matter"))
    no_way = replace(other, in_sample=None, prepared=replace(other.prepared, way_back=None))
    assert "not on one basis" in of(own, no_way)
    assert "cannot be told from zero" in of(solved(bench, 0.001), solved(bench, 0.004, "duplicate"))
    dead = replace(other, content=None, in_sample=None, no_number="nothing")
    assert "duplicate 07 gives no number for Cd" in of(own, dead)


def test_liquids_without_a_way_back_are_compared_as_they_are(bench):
    pair = [
        replace(one, in_sample=None, prepared=replace(one.prepared, way_back=None))
        for one in (solved(bench, 0.3), solved(bench, 0.38, "duplicate"))
    ]
    assert bench.check_of("duplicate", among(bench, *pair)).verdict == WARN


def test_a_duplicate_is_held_against_the_dilution_that_is_reported(bench):
    rules = bench.rulebook(tops={"Cd": Top(1.2, "A")})
    twin = solved(bench, 0.3, "duplicate")
    over = solved(bench, 1.0)  # reads up to 1.75 A
    again = solved(bench, 0.3, sample="07-D5", rerun_of="07")
    check = bench.check_of("duplicate", among(bench, twin, over, again, rules=rules))
    assert (check.verdict, "Sample 07-D5 gives" in check.sentence) == (PASS, True)


# ---- spiked samples


def spiked(bench, found, native=0.3, mass=0.5, added=15.0, when="before digestion", **changes):
    """A sample of ``native`` mg/L in the digest of 0.5 g, and one of ``mass`` g spiked with ``added`` mg/kg g (µg)."""
    holds = native * 100.0  # mg/kg
    content = (holds * mass + found * added) / 50.0
    own = solved(bench, content, "spiked_sample", mass, spiked_amount=added, spiked_when=when, **changes)
    return own, solved(bench, native)


@pytest.mark.parametrize(("found", "verdict"), [(0.95, PASS), (0.6, WARN), (1.4, WARN)])
def test_a_spike_is_found_again(bench, found, verdict):
    pair = spiked(bench, found)
    for own, other in (pair, pair[::-1]):
        check = bench.check_of("spike_recovery", among(bench, own, other))
        assert check.verdict == verdict
        assert check.observed == pytest.approx(found, abs=0.03)
    assert "Of 15 µg added before digestion, " in check.sentence
    assert "proves nothing" not in check.sentence


@pytest.mark.parametrize("mass", [0.25, 0.5, 1.0])
def test_both_contents_count_on_the_mass_of_the_spiked_digest(bench, mass):
    """Whatever was weighed in, what the sample itself brings is taken off."""
    check = bench.check_of("spike_recovery", among(bench, *spiked(bench, 0.9, mass=mass)))
    assert check.observed == pytest.approx(0.9, abs=0.03)
    assert check.verdict == PASS


def test_the_uncertainty_of_a_recovery_is_that_of_both_fits(bench):
    own, native = spiked(bench, 0.95, mass=0.25)
    u = [factor * one.fit_uncertainty * 0.25 / 15.0 for factor, one in ((200.0, own), (100.0, native))]
    nu = math.floor((u[0] ** 2 + u[1] ** 2) ** 2 / (u[0] ** 4 / 2 + u[1] ** 4 / 2))
    half = 100 * stats.t.ppf(0.975, nu) * math.hypot(*u)
    check = bench.check_of("spike_recovery", among(bench, own, native))
    told = float(check.sentence.split(" ± ")[1].split(" %")[0])
    assert told == pytest.approx(half, rel=0.05)  # two figures


def test_a_spike_after_digestion_proves_nothing_about_it(bench):
    pair = spiked(bench, 0.95, when="after digestion")
    check = bench.check_of("spike_recovery", among(bench, *pair))
    assert "which proves nothing about the digestion" in check.sentence
    assert check.verdict == PASS


def test_spikes_that_cannot_be_judged(bench):
    own, native = spiked(bench, 0.95)

    def of(*lines, **context):
        check = bench.check_of("spike_recovery", among(bench, *lines, **context))
        assert check.verdict == NOT_EVALUATED
        return check.sentence

    assert "no sample 07 was measured" in of(own)
    assert "no spiked sample 07 was measured" in of(native)
    assert "only a spiked sample and its sample" in of(solved(bench, role="reference"), own)
    assert "not both complete yet" in of(own, native, waiting=frozenset({native.prepared.key}))
    unknown = replace(own, prepared=replace(own.prepared, spiked_amount=None))
    assert "the amount of the spike is not known" in of(unknown, native)
    small = spiked(bench, 0.95, added=3.0)  # the digest holds 15 µg
    assert "is only 20 % of what the sample holds" in of(*small)
    dead = replace(native, content=None, in_sample=None, no_number="nothing")
    assert "sample 07 gives no number for Cd" in of(own, dead)
    per_litre = replace(native.prepared.way_back, unit="mg/L")
    other = replace(native.prepared, way_back=per_litre)
    unlike = replace(native, prepared=other, in_sample=replace(native.in_sample, unit="mg/L"))
    assert "not on one basis" in of(own, unlike)


def test_a_spike_of_a_quarter_of_the_native_amount_is_enough(bench):
    pair = spiked(bench, 0.95, added=4.0)
    assert bench.check_of("spike_recovery", among(bench, *pair)).verdict != NOT_EVALUATED


def test_a_sample_of_nothing_can_be_spiked(bench):
    pair = spiked(bench, 0.95, native=0.0)
    assert bench.check_of("spike_recovery", among(bench, *pair)).verdict == PASS


def test_the_size_of_a_sample(bench):
    line = solved(bench, mass=0.25).prepared
    assert sample_size(line) == 0.25
    liquid = WayBack(10.0, "mg/L", "", 50.0, None, "", volume_ml=5.0)
    assert sample_size(replace(line, way_back=liquid)) == 5.0
    assert sample_size(replace(line, way_back=None)) is None


# ---- references


def against(bench, found, known="30", u=0.6, role="reference", sample="MUD-1"):
    own = solved(bench, found, role, sample=sample)
    rules = bench.rulebook(references={sample: {"Cd": Known(bench.quantity(known, "mg/kg"), u)}})
    return among(bench, own, rules=rules)


def test_the_zeta_score_of_a_reference(bench):
    """ISO 13528: (x - X) / sqrt(u_x² + u_X²)."""
    subject = against(bench, 0.31)
    estimate = subject.solved.in_sample
    zeta = (estimate.content - 30) / math.hypot(estimate.standard_uncertainty, 0.6)
    check = bench.check_of("reference", subject)
    assert check.verdict == PASS
    assert f"; zeta score {zeta:.1f}." in check.sentence


def test_a_zeta_score_is_held_against_students_t(bench):
    """At two degrees of freedom 3 is no rare score: t(0.975, 2) is 4.303 (Student's table)."""
    subject = against(bench, 0.32, u=None)
    u = subject.solved.in_sample.standard_uncertainty
    zeta = (subject.solved.in_sample.content - 30) / u
    p = 2 * stats.t.sf(abs(zeta), 2)
    check = bench.check_of("reference", subject, warn_p=p * 1.01)
    assert check.verdict == WARN
    told = f"zeta score {zeta:.1f}, the uncertainty of what is known not being declared: chance allows"
    assert told in check.sentence
    assert bench.check_of("reference", subject, warn_p=p * 0.99).verdict == PASS
    assert bench.check_of("reference", subject, fail_p=p * 1.01, warn_p=None).verdict == FAIL
    assert bench.check_of("reference", against(bench, 0.4)).verdict == FAIL  # 133 % of it, whatever the score
    assert bench.check_of("reference", among(bench, solved(bench, role="reference"))).verdict == NOT_EVALUATED


def test_a_blank_is_not_checked_as_a_sample_is(bench):
    for role in ("process_blank", "reagent_blank"):
        made = {check.name: check for check in check_line(among(bench, solved(bench, 0.001, role)))}
        assert not {"duplicate", "spike_recovery", "reference", "check_sample"} & set(made)
        for name in ("span", "expanded_uncertainty"):
            assert made[name].verdict == NOT_EVALUATED
            assert f"a {role.replace('_', ' ')} is expected near zero" in made[name].sentence


# ---- through the one door


def test_duplicates_and_spikes_find_each_other_in_a_batch(bench):
    night = bench.Night()
    night.series("07").series("07", "duplicate", content=0.4).series("08").series("08", "spiked_sample", content=0.9)
    (found,) = evaluate([night.batch(closed=True)], night.rules)
    by_key = {(outcome.key.role, outcome.key.sample): outcome.results[0].checks for outcome in found.outcomes}
    for role in ("sample", "duplicate"):
        check = bench.named(by_key[role, "07"], "duplicate")
        assert (check.verdict, check.observed) == (WARN, pytest.approx(0.1 / 0.35, rel=0.02))
    assert "no duplicate 08" in bench.named(by_key["sample", "08"], "duplicate").sentence
    assert "the amount of the spike is not known" in bench.named(by_key["sample", "08"], "spike_recovery").sentence


# ---- blanks


def test_what_reagents_bring_in_is_asked_for(bench):
    own = solved(bench)
    rules = bench.rulebook(blanks=BlankRule(reagent=True))
    open_, closed = among(bench, own, rules=rules), among(bench, own, rules=rules)
    closed = replace(closed, context=replace(closed.context, batch=replace(closed.context.batch, closed=True)))
    assert "it is still expected" in bench.check_of("blank", open_).sentence
    check = bench.check_of("blank", closed)
    assert check.verdict == FAIL
    assert check.sentence == "No reagent blank was measured in this batch, though the rules subtract it."
    subtracted = replace(own, reagent=Reagent(0.1, 0.01, 2.0))
    assert bench.check_of("blank", replace(closed, solved=subtracted)).verdict == PASS
    broken = replace(own, reagent=Reagent(0.0, None, 0.0, problem="the reagent blank gives no number"))
    check = bench.check_of("blank", replace(closed, solved=broken))
    assert (check.verdict, "the reagent blank gives no number" in check.sentence) == (FAIL, True)
    itself = among(bench, solved(bench, 0.001, "reagent_blank"), rules=rules)
    assert bench.check_of("blank", itself).verdict == PASS
