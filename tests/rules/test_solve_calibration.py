"""Plain calibration beside the additions: against published calibrations, and against what must not be compared."""

from __future__ import annotations

from dataclasses import replace

import pytest
import statsmodels.api as sm

from spikeward.rules.records import MISSING, NOT_DETECTED
from spikeward.rules.rulebook import InternalStandard
from spikeward.rules.solve.calibration import (
    beside,
    calibration_of,
    calibrations,
    per_unit_of,
    unit_in_vessel,
    why_not_comparable,
)
from spikeward.rules.solve.solved import Background

# Miller and Miller, Statistics and Chemometrics for Analytical Chemistry, chapter 5: fluorescein (from memory)
FLUORESCEIN = ((0, 2.1), (2, 5.0), (4, 9.0), (6, 12.6), (8, 17.3), (10, 21.0), (12, 24.7))

# Eurachem/CITAC Guide, Quantifying Uncertainty in Analytical Measurement, example A5: cadmium, in triplicate
CADMIUM = tuple(
    (content, signal)
    for content, signals in (
        ("0.1", (0.028, 0.029, 0.029)), ("0.3", (0.084, 0.083, 0.081)), ("0.5", (0.135, 0.131, 0.133)),
        ("0.7", (0.180, 0.181, 0.183)), ("0.9", (0.215, 0.230, 0.216)),
    )
    for signal in signals
)  # fmt: skip


def standards(bench, points, unit="mg/L", **changes):
    """One vessel for each (content, signal), named S0, S1 …, and the contents as the rules declare them."""
    night = bench.Night()
    for n, (_, signal) in enumerate(points):
        night.read("calibration", f"S{n}", "", signal, **changes)
    contents = {f"S{n}": {"Cd": bench.quantity(str(content), unit)} for n, (content, _) in enumerate(points)}
    return night.readings, contents


def calibrated(bench, points, unit="mg/L", background=None, **changes):
    readings, contents = standards(bench, points, unit, **changes)
    return calibration_of(readings, contents, background)


def unspiked(bench, *signals, slope=1.93, **changes):
    """Vessels without addition that read so, and additions of 2 and 4 mg/L."""
    mean = sum(signals) / len(signals)
    x = [0.0] * len(signals) + [2.0, 4.0, 6.0]
    y = [*signals, mean + 2 * slope + 0.1, mean + 4 * slope - 0.1, mean + 6 * slope]
    return bench.subject_of(bench.line_of(x, y, **changes)).solved


@pytest.mark.parametrize(
    ("signals", "content", "limits"),
    [
        ((2.9,), 0.71600, 0.68010), ((13.5,), 6.20722, 0.61631), ((23.0,), 11.12858, 0.67656),
        ((13.5,) * 4, 6.20722, 0.36146),
    ],
)  # fmt: skip
def test_an_unknown_read_off_a_published_line(bench, signals, content, limits):
    """Miller and Miller print 0.72 ± 0.68, 6.21 ± 0.62, 11.13 ± 0.68 and, from four readings, 6.21 ± 0.36."""
    found = beside(unspiked(bench, *signals), calibrated(bench, FLUORESCEIN), 0.95).estimate
    assert found.content == pytest.approx(content, abs=5e-6)
    assert found.expanded_uncertainty == pytest.approx(limits, abs=5e-6)
    assert found.interval == pytest.approx((content - limits, content + limits), abs=1e-5)
    assert found.effective_degrees_of_freedom == 5


def test_the_line_is_that_of_a_reference_library(bench):
    found = calibrated(bench, FLUORESCEIN)
    x, y = zip(*FLUORESCEIN, strict=True)
    outside = sm.OLS(y, sm.add_constant(x)).fit()
    assert (found.intercept, found.slope) == pytest.approx(tuple(outside.params), rel=1e-12)
    assert found.slope_uncertainty == pytest.approx(outside.bse[1], rel=1e-10)
    assert found.covariance == pytest.approx(outside.cov_params()[0, 1], rel=1e-10)
    assert found.residual_sd == pytest.approx(outside.mse_resid**0.5, rel=1e-10)
    assert (found.vessels, found.degrees_of_freedom, found.x_mean, found.sxx) == (7, 5, 6.0, 112.0)
    assert (found.unit, found.signal_unit, found.highest) == ("mg/L", "A", 12.0)


def test_cadmium_from_ceramic(bench):
    """Quantifying Uncertainty in Analytical Measurement, A5: B1 0.2410 (0.0050), B0 0.0087, c0 0.26 mg/L, u 0.018."""
    found = calibrated(bench, CADMIUM)
    assert found.slope == pytest.approx(0.2410, abs=5e-5)
    assert found.slope_uncertainty == pytest.approx(0.0050, abs=5e-5)
    assert found.intercept == pytest.approx(0.0087, abs=5e-5)
    assert found.residual_sd == pytest.approx(0.005486, abs=5e-7)
    read_off = beside(unspiked(bench, 0.0712, 0.0716, slope=0.241), found, 0.95).estimate
    assert read_off.content == pytest.approx(0.26, abs=0.005)
    assert read_off.standard_uncertainty == pytest.approx(0.018, abs=5e-4)


def test_no_order_of_readings_matters(bench):
    readings, contents = standards(bench, CADMIUM)
    assert calibration_of(readings[::-1], contents) == calibration_of(readings, contents)


def test_the_content_is_that_before_the_vessel_was_made_up(bench):
    """Twice the volume is twice the content of the test solution, and twice its uncertainty."""
    calibration = calibrated(bench, FLUORESCEIN)
    plain = unspiked(bench, 13.5)
    doubled = tuple(replace(vessel, final=2.0) for vessel in plain.prepared.vessels)
    wide = bench.subject_of(replace(plain.prepared, vessels=doubled)).solved
    one, two = (beside(solved, calibration, 0.95).estimate for solved in (plain, wide))
    assert two.content == pytest.approx(2 * one.content, rel=1e-12)
    assert two.standard_uncertainty == pytest.approx(2 * one.standard_uncertainty, rel=1e-12)
    assert two.expanded_uncertainty == pytest.approx(2 * one.expanded_uncertainty, rel=1e-12)


def test_units_of_vessel_and_calibration_meet(bench):
    solved, calibration = unspiked(bench, 13.5), calibrated(bench, [(1000 * x, y) for x, y in FLUORESCEIN], "ug/L")
    assert per_unit_of(solved.prepared, calibration) == 1000.0
    assert beside(solved, calibration, 0.95).estimate.content == pytest.approx(6.20722, abs=5e-6)
    by_mass = replace(solved.prepared, unit="mg/kg", aliquot_unit="g")  # g of sample made up to mL
    assert unit_in_vessel(by_mass) == "mg/L"
    assert per_unit_of(by_mass, calibration) == 1000.0
    assert per_unit_of(replace(by_mass, final_unit="g"), calibration) is None
    assert "the calibration is in µg/L and the vessels are in mg/kg" in why_not_comparable(
        replace(solved, prepared=replace(by_mass, final_unit="g")), calibration
    )


def test_a_background_moves_the_intercept_only(bench):
    background = Background(0.5, None, 0, 1, (), "A")
    bare, net = calibrated(bench, FLUORESCEIN), calibrated(bench, FLUORESCEIN, background=background)
    assert net.intercept == pytest.approx(bare.intercept - 0.5, abs=1e-12)
    assert net.slope == pytest.approx(bare.slope, rel=1e-12)
    assert (bare.net, net.net) == (False, True)
    solved = unspiked(bench, 13.5)
    assert beside(solved, net, 0.95) is None  # it is off the calibration and not off the series
    assert beside(replace(solved, background=background), net, 0.95) is not None


def test_the_sentence_says_what_it_is(bench):
    told = beside(unspiked(bench, 13.5, slope=0.965), calibrated(bench, FLUORESCEIN), 0.95).sentence
    assert told.startswith("Plain calibration would have given 6.21 ± 0.62 mg/L in the test solution, ")
    assert "less than the additions (95 %, 7 calibration vessels)" in told
    assert told.endswith("It knows nothing of the matrix and is for comparison only.")
    above = beside(unspiked(bench, 30.0), calibrated(bench, FLUORESCEIN), 0.95).sentence
    assert "above the highest calibration solution, 12 mg/L" in above


def test_contents_from_the_name_where_the_rules_say_none(bench):
    night = bench.Night()
    for content, signal in FLUORESCEIN:
        night.read("calibration", f"{content}", "", signal, values=(("content", f"{content} mg/L", "name"),))
    assert calibration_of(night.readings, {}).slope == calibrated(bench, FLUORESCEIN).slope
    wrong = [replace(night.readings[0], values=(("content", "0 ppb", "name"),)), *night.readings[1:]]
    assert "does not say whether it is per volume or per mass" in calibration_of(wrong, {}).problem


@pytest.mark.parametrize(
    ("points", "changes", "problem"),
    [
        (FLUORESCEIN[:2], {}, "2 calibration solutions, a line with its scatter needs three of two contents"),
        (((1, 2.0), (1, 2.1), (1, 2.2)), {}, "3 calibration solutions, a line with its scatter needs three"),
        (((0, 2.0), (1, 1.0), (2, 0.5)), {}, "do not rise with the content"),
        (((0, 2.0), (1, 9.0), (2, 1.0), (3, 9.0)), {}, "does not differ from zero"),
    ],
)
def test_what_is_no_calibration(bench, points, changes, problem):
    found = calibrated(bench, points, **changes)
    assert problem in found.problem
    assert beside(unspiked(bench, 13.5), found, 0.95) is None


def test_solutions_without_number_or_content_are_left_out_and_named(bench):
    readings, contents = standards(bench, FLUORESCEIN)
    lost = [replace(readings[0], qualifier=NOT_DETECTED, signal=None), *readings[1:-1]]
    lost.append(replace(readings[-1], qualifier=MISSING, signal=None))
    found = calibration_of(lost, {name: told for name, told in contents.items() if name != "S3"})
    assert (found.vessels, found.problem) == (4, "")
    assert "MD12_calibration_S0_0 (inbox/run.csv, row 2) was not detected and was left out" in found.note
    assert "no content of Cd is known for calibration solution S3: declare it under calibration" in found.note
    assert "has no signal and was left out" in found.note
    assert calibration_of(readings, {}).problem.startswith("no content of Cd is known for calibration solution S0")


def test_mixed_exports_are_refused(bench):
    readings, contents = standards(bench, FLUORESCEIN)
    mixed = [replace(readings[0], unit="counts"), *readings[1:]]
    assert "comes in A and counts" in calibration_of(mixed, contents).problem
    mixed = [replace(readings[0], already=("blank",)), *readings[1:]]
    assert "some calibration solutions only" in calibration_of(mixed, contents).problem
    kinds = {**contents, "S1": {"Cd": bench.quantity("2", "mg/kg")}}
    assert "different kinds" in calibration_of(readings, kinds).problem
    other = Background(0.5, None, 0, 1, (), "counts")
    assert "different units" in calibration_of(readings, contents, other).problem


def test_repeated_readings_of_one_solution_are_one_vessel(bench):
    readings, contents = standards(bench, FLUORESCEIN)
    twice = [
        replace(reading, signal=reading.signal + off, row=reading.row + n)
        for reading in readings
        for n, off in ((0, 0.1), (100, -0.1))
    ]
    found = calibration_of(twice, contents)
    assert (found.vessels, found.degrees_of_freedom) == (7, 5)
    assert found.slope == pytest.approx(calibrated(bench, FLUORESCEIN).slope, rel=1e-12)


def test_every_line_of_a_batch_and_its_ratio_to_an_internal_standard(bench):
    """The internal standard falls by half through the run, and the analyte with it: the ratio does not."""
    night = bench.Night()
    contents = {}
    for n in range(5):
        sensitivity = 1.0 - 0.1 * n
        name = f"S{n}"
        contents[name] = {"Cd": bench.quantity(str(n), "mg/L")}
        noise = 0.001 * (-1) ** n
        night.read("calibration", name, "", sensitivity * (0.1 + 0.5 * n + noise), solution=name)
        night.read("calibration", name, "", sensitivity * 2.0, solution=name, analyte="Rh")
    night.read("sample", "07", "0", 0.3)
    book = bench.rulebook(calibration=contents)
    (preparation,) = book.preparations
    internal = InternalStandard({"Cd": "Rh"}, "at_constant_content")
    with_internal = replace(book, preparations=(replace(preparation, internal_standard=internal),))
    plain = calibrations(night.readings, {}, book)
    assert set(plain) == {("Cd", "", ""), ("Rh", "", "")}
    assert "no content of Rh" in plain["Rh", "", ""].problem
    found = calibrations(night.readings, {}, with_internal)
    ratio = found["Cd", "", "Rh"]
    assert ratio.slope == pytest.approx(0.25, rel=1e-2)
    assert ratio.residual_sd < 0.1 * found["Cd", "", ""].residual_sd
    assert ratio.signal_unit == ""
    entered = replace(preparation, internal_standard=replace(internal, entered="in_sample"))
    assert ("Cd", "", "Rh") not in calibrations(night.readings, {}, replace(book, preparations=(entered,)))


def test_an_internal_standard_that_came_with_the_sample_is_no_comparison(bench):
    solved = unspiked(bench, 13.5)
    calibration = calibrated(bench, FLUORESCEIN)
    came = replace(solved, prepared=replace(solved.prepared, internal="Rh", entered="per_vessel"))
    assert "not of one kind" in why_not_comparable(came, calibration)
    curved = replace(solved, prepared=replace(solved.prepared, response="log"))
    assert "only a straight line" in why_not_comparable(curved, calibration)
    counts = replace(solved, prepared=replace(solved.prepared, signal_unit="counts"))
    assert "come in A and counts" in why_not_comparable(counts, calibration)
    assert why_not_comparable(solved, calibration) == ""
