"""The process blank is subtracted as an amount, and what it adds to the uncertainty."""

from __future__ import annotations

import math
import statistics
from dataclasses import replace

import numpy as np
import pytest

from spikeward.rules.prepared import PreparedLine, PreparedVessel, WayBack
from spikeward.rules.records import Reading, SeriesKey
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.process_blank import blank_amount, subtract_process_blank
from spikeward.rules.solve.solved import Background, Solved

KEY = SeriesKey("", "", "B1", "sample", "S1")
NOISE = (0.001, -0.002, 0.0015, -0.0005)
BACK = WayBack(50.0, "mg/kg", "", 25.0, 0.5, "0.5 g made up to 25 mL")
BLANK_BACK = WayBack(1.0, "mg/L", "", 20.0, None, "made up to 20 mL")


def jobs(lines, backgrounds=None):
    """Each line with the background of its batch, as an evaluation would ask for them."""
    known = backgrounds or {}
    return [Job(one, Corrections(known.get((one.key.batch_key, one.analyte, one.line)))) for one in lines]


def line(truth, sensitivity, key, back, already=(), noise=NOISE, unit="mg/L", levels=4) -> PreparedLine:
    vessels = []
    for i in range(levels):
        signal = sensitivity * (truth + i) + noise[i] * sensitivity
        reading = Reading(
            key, str(i), "", "", "", f"{key.sample}-{i}", "Cd", "", "", signal, str(signal), "", 1, None, "", "", None,
            (), already, "run.csv", i + 2, "",
        )  # fmt: skip
        vessels.append(PreparedVessel(str(i), "", 1.0, 0.0, 1.0, float(i), (reading,)))
    return PreparedLine(key, "Cd", "", "flasks", unit, "", tuple(vessels), back, "", "")


def sample(truth=2.0, **more) -> Solved:
    return solve_lines(jobs([line(truth, 0.12, KEY, more.pop("back", BACK), **more)]), 0.95)[0]


def blank(truth, name="PB1", back=BLANK_BACK, **more) -> Solved:
    key = replace(KEY, role="process_blank", sample=name)
    return solve_lines(jobs([line(truth, 0.20, key, back, **more)]), 0.95)[0]


def test_amounts_not_signals():
    """(C0 V_dig - C_b V_dig,b) / m, with the sample's response suppressed by 40 % against the blank's."""
    before, one = sample(), blank(0.1)
    after = subtract_process_blank(before, [one], 0.95)
    by_hand = (before.content.content * 25.0 - one.content.content * 20.0) / 0.5
    assert after.in_sample.content == pytest.approx(by_hand, rel=1e-12)
    assert after.blank == pytest.approx(one.content.content * 20.0 / 0.5, rel=1e-12)
    assert after.blank == blank_amount(one, before.prepared)
    assert after.content == before.content


def test_several_blanks_share_their_mean_and_lend_their_scatter():
    before, blanks = sample(), [blank(0.10), blank(0.14, "PB2"), blank(0.12, "PB3")]
    after = subtract_process_blank(before, blanks, 0.95)
    # the blank's amount over the sample's mass: 20 mL / 0.5 g; u² = s_b² (1 + 1/3)
    u_blank = 40 * statistics.stdev(one.content.content for one in blanks) * math.sqrt(4 / 3)
    assert u_blank == pytest.approx(0.8 * math.sqrt(4 / 3), rel=1e-3)
    u_fit = before.in_sample.standard_uncertainty
    assert after.in_sample.standard_uncertainty == pytest.approx(math.hypot(u_fit, u_blank), rel=1e-9)
    assert after.in_sample.expanded_uncertainty > before.in_sample.expanded_uncertainty
    assert after.effective_degrees_of_freedom == 2
    assert "mean of 3 process blanks" in after.blank_note
    assert subtract_process_blank(before, blanks[::-1], 0.95) == after


def test_one_blank_counts_twice():
    before, one = sample(), blank(0.1)
    after = subtract_process_blank(before, [one], 0.95)
    u_blank = one.fit_uncertainty * 20.0 / 0.5 * math.sqrt(2)
    u_fit = before.in_sample.standard_uncertainty
    assert after.in_sample.standard_uncertainty == pytest.approx(math.hypot(u_fit, u_blank), rel=1e-9)
    assert "once for the mean and once for the blank of this sample" in after.blank_note
    assert "how preparations vary is not in it" in after.blank_note
    assert (after.blanks, after.in_sample.effective_degrees_of_freedom) == (1, after.effective_degrees_of_freedom)


def test_equal_blanks_are_known_as_well_as_their_fits():
    before, blanks = sample(), [blank(0.1), blank(0.1, "PB2")]
    after = subtract_process_blank(before, blanks, 0.95)
    floor = blanks[0].fit_uncertainty * 20.0 / 0.5 / math.sqrt(2)
    expected = math.hypot(before.in_sample.standard_uncertainty, floor)
    assert after.in_sample.standard_uncertainty == pytest.approx(expected, rel=1e-9)
    exact = [blank(0.1, name, levels=2) for name in ("PB1", "PB2")]
    assert "not known" in subtract_process_blank(before, exact, 0.95).blank_note


@pytest.mark.parametrize("truths", [(0.1,), (0.08, 0.12), (0.08, 0.12, 0.13)])
def test_the_background_of_sample_and_blanks_is_one(truths):
    """Correlated inputs (JCGM 100:2008, 5.2), against refitting with the background moved: it cancels in part."""
    u, keys = 0.004, [KEY, *(replace(KEY, role="process_blank", sample=f"PB{i}") for i in range(len(truths)))]
    lines = [line(2.0, 0.12, KEY, BACK)] + [
        line(truth, 0.20, key, BLANK_BACK) for truth, key in zip(truths, keys[1:], strict=True)
    ]

    def net(shift, known):
        backgrounds = {(KEY.batch_key, "Cd", ""): Background(0.01 + shift, known, 5, 6, (), "")}
        before, *blanks = solve_lines(jobs(lines, backgrounds), 0.95)
        return subtract_process_blank(before, blanks, 0.95).in_sample

    effect = (net(1e-5, None).content - net(-1e-5, None).content) / 2e-5
    added = math.sqrt(net(0.0, u).standard_uncertainty ** 2 - net(0.0, None).standard_uncertainty ** 2)
    assert added == pytest.approx(abs(effect) * u, rel=1e-6)


def night_of_blanks(rng, count, batch):
    """One sample of 30 mg/kg and some blanks over one background: truth and lines, signals with noise 0.001."""
    key = replace(KEY, batch=batch)
    contents = [0.3 + 0.02 + rng.normal(0, 0.002), *(0.02 + rng.normal(0, 0.002) for _ in range(count))]
    keys = [key, *(replace(key, role="process_blank", sample=f"PB{i}") for i in range(count))]
    backs = [WayBack(100.0, "mg/kg", "", 50.0, 0.5, ""), *([WayBack(1.0, "mg/L", "", 50.0, None, "")] * count)]
    lines = []
    for content, one, back in zip(contents, keys, backs, strict=True):
        signals = [0.02 + 0.4 * (content + 0.25 * i) + rng.normal(0, 0.0004) for i in range(4)]
        made = line(0.0, 1.0, one, back)
        vessels = tuple(
            replace(v, added=0.25 * i, readings=(replace(v.readings[0], signal=signal),))
            for i, (v, signal) in enumerate(zip(made.vessels, signals, strict=True))
        )
        lines.append(replace(made, vessels=vessels))
    return lines


@pytest.mark.parametrize(("count", "low", "high"), [(1, 0.88, 0.95), (2, 0.95, 0.983), (3, 0.96, 0.989)])
def test_coverage_with_blanks_over_one_background(count, low, high):
    """Blanks that vary by 0.002 mg/L and three background vessels that vary by 0.0012: about 95 % hold the truth.

    With the background counted in the sample and again in every blank 97 to 99 % did. One blank shows nothing of how
    blanks vary, so its intervals are too narrow, which the result says.
    """
    rng, lines, backgrounds, nights = np.random.default_rng(count), [], {}, 1200
    for i in range(nights):
        lines += night_of_blanks(rng, count, f"B{i}")
        vessels = 0.02 + rng.normal(0, 0.0012, 3)
        key = replace(KEY, batch=f"B{i}").batch_key
        backgrounds[key, "Cd", ""] = Background(vessels.mean(), vessels.std(ddof=1) / 3**0.5, 2, 3, (), "")
    solved, inside = solve_lines(jobs(lines, backgrounds), 0.95), 0
    for i in range(nights):
        before, *blanks = solved[i * (count + 1) : (i + 1) * (count + 1)]
        interval = subtract_process_blank(before, blanks, 0.95).in_sample.interval
        inside += interval[0] <= 30.0 <= interval[1]
    assert low < inside / nights < high


def test_a_blank_by_one_addition_has_no_uncertainty_to_lend():
    one = blank(0.1, levels=2)
    assert one.content.standard_uncertainty is None
    after = subtract_process_blank(sample(), [one], 0.95)
    assert after.in_sample.standard_uncertainty == pytest.approx(sample().in_sample.standard_uncertainty)
    assert "its uncertainty is not known" in after.blank_note


def test_a_sample_by_one_addition_keeps_its_reason():
    before = sample(levels=2)
    after = subtract_process_blank(before, [blank(0.1)], 0.95)
    assert after.in_sample.content < before.in_sample.content
    assert after.in_sample.standard_uncertainty is None
    assert after.in_sample.reason == before.in_sample.reason


def with_background(solved):
    """The same blank, one background of no uncertainty having been taken off its signals."""
    net = solve_lines([Job(solved.prepared, Corrections(Background(0.0, 0.001, 5, 6, (), "")))], 0.95)[0]
    return replace(net, background=Background(0.01, 0.0, 5, 6, (), ""))


def test_the_background_stays_in_the_uncertainty():
    known = {(KEY.batch_key, "Cd", ""): Background(0.01, 0.004, 5, 6, (), "")}
    before = solve_lines(jobs([line(2.0, 0.12, KEY, BACK)], known), 0.95)[0]
    blanks = [with_background(blank(0.10, name)) for name in ("PB1", "PB2")]
    after = subtract_process_blank(before, blanks, 0.95)
    fit, floor = 50 * before.fit_uncertainty, 40 * blanks[0].fit_uncertainty / math.sqrt(2)
    # 50 for the sample's factor, 40 for 20 mL over 0.5 g; dC/dB of the blank is taken off that of the sample
    shared = 0.004 * (50 * before.background_effect - 40 * blanks[0].background_effect)
    expected = math.sqrt(fit**2 + floor**2 + shared**2)
    assert after.in_sample.standard_uncertainty == pytest.approx(expected, rel=1e-9)


def test_units_of_two_standards():
    micro = blank(2.0, unit="ug/L")
    assert blank_amount(micro, sample().prepared) == pytest.approx(micro.content.content / 1000 * 20.0 / 0.5)
    amount = blank(0.1, unit="mmol/L")
    assert blank_amount(amount, sample().prepared) is None
    assert "in mmol/L" in subtract_process_blank(sample(), [amount], 0.95).blank_note


def test_blanks_without_a_number_are_named():
    dead = blank(0.1, noise=(0.0, -1.0, -2.0, -3.0))
    assert dead.no_number
    after = subtract_process_blank(sample(), [dead], 0.95)
    assert after.blank is None
    assert after.in_sample == sample().in_sample
    assert "no process blank was subtracted: PB1 gives no number" in after.blank_note
    mixed = subtract_process_blank(sample(), [dead, blank(0.1, "PB2")], 0.95)
    assert mixed.blank is not None
    assert "PB1 gives no number" in mixed.blank_note
    assert "the batch has none" in subtract_process_blank(sample(), [], 0.95).blank_note


def test_a_background_off_by_the_export_leaves_the_process_blank_to_be_subtracted():
    net = blank(0.1, already=("blank",))
    assert subtract_process_blank(sample(already=("blank",)), [net], 0.95).blank == pytest.approx(
        subtract_process_blank(sample(), [blank(0.1)], 0.95).blank
    )
    mixed = subtract_process_blank(sample(already=("blank",)), [blank(0.1)], 0.95)
    assert mixed.blank is None
    assert "export both in the same way" in mixed.blank_note


def test_never_without_a_way_back():
    assert "no way back" in subtract_process_blank(sample(back=None), [blank(0.1)], 0.95).blank_note
    own = blank(0.1)
    assert subtract_process_blank(own, [own], 0.95) == own


def test_a_digest_volume_on_one_side_only():
    assert "PB1 has no way back" in subtract_process_blank(sample(), [blank(0.1, back=None)], 0.95).blank_note
    undigested = WayBack(5.0, "mg/L", "", None, None, "diluted by a factor 5")
    after = subtract_process_blank(sample(), [blank(0.1, back=undigested)], 0.95)
    assert after.blank is None
    assert "not both known" in after.blank_note
    liquid = WayBack(10.0, "mg/L", "", None, None, "diluted by a factor 10")
    same = subtract_process_blank(sample(back=liquid), [blank(0.1, back=liquid)], 0.95)
    assert same.blank == pytest.approx(10 * blank(0.1).content.content)


def test_each_dilution_is_its_own():
    """A sample diluted by 2 and a blank by 5, without a digest: 2 C0 - 5 C_b, also into another unit."""
    of_sample = WayBack(2000.0, "ug/L", "", None, None, "diluted by a factor 2")
    of_blank = WayBack(5.0, "mg/L", "", None, None, "diluted by a factor 5")
    before, one = sample(back=of_sample), blank(0.1, back=of_blank)
    after = subtract_process_blank(before, [one], 0.95)
    expected = 1000 * (2 * before.content.content - 5 * one.content.content)
    assert after.in_sample.content == pytest.approx(expected, rel=1e-12)
    unsaid = subtract_process_blank(before, [blank(0.1, back=None)], 0.95)
    assert unsaid.blank is None
    assert "declare its digest volume or dilution" in unsaid.blank_note


def test_more_blank_than_sample_is_named():
    after = subtract_process_blank(sample(0.05), [blank(0.4)], 0.95)
    assert after.in_sample.content < 0
    assert any("below zero" in note for note in after.notes)


def test_a_blank_beyond_all_numbers():
    vast = replace(BLANK_BACK, digest_ml=1e308)
    after = subtract_process_blank(sample(), [blank(0.1, back=vast), blank(2.0, "PB2", back=vast)], 0.95)
    assert "too large or too small" in after.no_number
    assert after.in_sample is None
