"""Drift between brackets: what it does to a content, what the correction gives back, and when there is none."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import UTC, datetime, timedelta

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.records import NOT_DETECTED, Reading, SeriesKey
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.drift import Drift, drift_of, visits
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.solved import Background
from spikeward.rules.solve.transform import Transformed, transform

KEY = SeriesKey("", "", "B1", "sample", "S1")
BRACKET = replace(KEY, role="bracket", sample="")
CD = ("Cd", "228.8")
START = datetime(2030, 3, 31, 23, 50, tzinfo=UTC)  # over midnight and the end of a month


def at(minute: float) -> str:
    return (START + timedelta(minutes=minute)).isoformat().replace("+00:00", "Z")


def read(signal, minute, key=KEY, level="", analyte="Cd", **changes) -> Reading:
    name = f"BR{minute:g}" if key.role == "bracket" else f"S1-{level}"
    return replace(
        Reading(
            key, level, "", "", "", name, analyte, "228.8", "A", signal, str(signal), "", 1, None, at(minute), "", None,
            (), (), "night/run.csv", round(10 * minute) + 2, "",
        ),
        **changes,
    )  # fmt: skip


def fall(minute: float) -> float:
    """One per cent of the first sensitivity in every minute."""
    return 1.0 - 0.01 * minute


MINUTES = (1.0, 2.0, 3.0, 4.0)
ADDED = (0.0, 0.5, 1.0, 1.5)  # times the content, which is 1


def series(background=0.0, minutes=MINUTES, drift=fall, **changes):
    return tuple(
        PreparedVessel(
            str(i), "", 10.0, 0.0, 25.0, 10.0 * x,
            (read(0.4 * (1.0 + x) * drift(minute) + background, minute, level=str(i), **changes),),
        )
        for i, (x, minute) in enumerate(zip(ADDED, minutes, strict=True))
    )  # fmt: skip


def marks(*minutes, background=0.0, drift=fall, height=0.3, named=True, **changes):
    """Visits with names of their own, or readings that only their times tell apart."""
    return [
        read(height * drift(minute) + background, minute, replace(BRACKET, sample=f"{minute:g}" if named else ""),
             **changes)
        for minute in minutes
    ]  # fmt: skip


def line(vessels, **changes) -> PreparedLine:
    return replace(PreparedLine(KEY, *CD, "flasks", "mg/L", "A", tuple(vessels), None, "mix", ""), **changes)


def drift(prepared: PreparedLine, brackets, background=None) -> Drift:
    readings = [*brackets, *(one for v in prepared.vessels for one in (*v.readings, *v.internal))]
    return drift_of(prepared, *visits(readings, {CD: background} if background else {}), background)


def solved(prepared: PreparedLine, brackets, background=None) -> Transformed:
    return transform(prepared, Corrections(background=background, drift=drift(prepared, brackets, background)))


def fitted(made: Transformed) -> tuple[float, float]:
    """Content and correlation by numpy's own least squares."""
    x, y = [row.x for row in made.rows], [row.y for row in made.rows]
    slope, intercept = np.polyfit(x, y, 1)
    return intercept / slope, float(np.corrcoef(x, y)[0, 1])


def test_a_loss_of_one_per_cent_in_each_vessel_looks_like_slope():
    """In the order of levels it shifts the content by five to six per cent with r = 0.99996."""
    content, r = fitted(transform(line(series(drift=lambda minute: fall(minute - 1.0))), Corrections()))
    assert 0.05 < content - 1.0 < 0.06
    assert round(r, 5) == 0.99996


@pytest.mark.parametrize("brackets", [(0.0, 5.0), (0.0, 2.5, 5.0), (0.0, 1.5, 2.5, 9.0)])
@pytest.mark.parametrize("background", [0.0, 0.07])
def test_between_brackets_it_is_corrected(brackets, background):
    known = Background(background, None, 0, 1, (), "A") if background else None
    made = solved(line(series(background)), marks(*brackets, background=background), known)
    content, r = fitted(made)
    assert content == pytest.approx(1.0, rel=1e-12)
    assert r == pytest.approx(1.0, abs=1e-12)
    assert made.corrected[1].startswith("The drift was corrected: every reading was divided by the sensitivity")
    assert "interpolated in time" in made.corrected[1]
    assert [point.signal for point in made.points] == pytest.approx([0.4 * (1.0 + x) for x in ADDED])


def test_the_sensitivity_is_relative_to_the_first_bracket_of_the_batch():
    """A bracket long before: signals come back to its height, the content stays."""
    made = solved(line(series()), marks(-40.0, 0.0, 5.0))
    assert fitted(made)[0] == pytest.approx(1.0, rel=1e-12)
    assert made.points[0].signal == pytest.approx(0.4 * fall(-40.0))


def test_a_background_that_stays_in_spoils_the_correction():
    """The drift acts on the sensitivity alone: of signals with their background it is not one factor."""
    wrong = fitted(solved(line(series(0.07)), marks(0.0, 5.0, background=0.07)))[0]
    assert abs(wrong - (1.0 + 0.07 / 0.4)) > 1e-3


def test_several_readings_of_one_visit_count_at_their_mean_time():
    brackets = marks(-0.4, -0.2, 0.0, 5.0, 5.3, named=False)
    assert fitted(solved(line(series()), brackets))[0] == pytest.approx(1.0, rel=1e-12)
    assert len(drift(line(series()), brackets).sensitivities) == 2


def test_every_reading_has_its_own_time():
    """Level 0 read again at the end is the same vessel."""
    vessels = list(series())
    again = read(0.4 * fall(4.9), 4.9, level="0")
    vessels[0] = replace(vessels[0], readings=(*vessels[0].readings, again))
    made = solved(line(vessels), marks(0.0, 5.0))
    assert fitted(made)[0] == pytest.approx(1.0, rel=1e-12)
    assert made.points[0].sd == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("with_drift", [True, False])
def test_the_shift_is_what_a_background_changes(with_drift):
    prepared, brackets = line(series(0.07)), marks(0.0, 2.5, 5.0, background=0.07)

    def made(mean):
        known = Background(mean, None, 0, 1, (), "A")
        return solved(prepared, brackets, known) if with_drift else transform(prepared, Corrections(background=known))

    up, down = made(0.07 + 1e-6), made(0.07 - 1e-6)
    slopes = [(low.y - high.y) / 2e-6 for high, low in zip(up.rows, down.rows, strict=True)]
    assert [row.shift for row in made(0.07).rows] == pytest.approx(slopes, rel=1e-7)
    if with_drift:
        assert slopes != pytest.approx([2.5] * 4, rel=1e-3)


def test_the_effect_of_the_background_is_that_of_refitting_everything():
    """The background is in vessels and brackets; both move together."""
    prepared = line(series(0.07, drift=lambda minute: fall(minute) + 0.003 * (minute == 2.0)))
    brackets = marks(0.0, 2.5, 5.0, background=0.07)

    def corrections(mean):
        known = Background(mean, 0.001, 9, 10, (), "A")
        return Corrections(background=known, drift=drift(prepared, brackets, known))

    (made,) = solve_lines([Job(prepared, corrections(0.07))], 0.95)
    up, down = (fitted(transform(prepared, corrections(0.07 + step)))[0] for step in (1e-6, -1e-6))
    assert made.background_effect == pytest.approx((up - down) / 2e-6, rel=1e-6)


@pytest.mark.parametrize(
    ("brackets", "words"),
    [
        ((), "no bracket of Cd 228.8 was measured"),
        ((2.5, 5.0), "no bracket was measured before S1-0"),
        ((0.0, 2.5), "no bracket was measured after S1-2"),
        ((0.0,), "no bracket was measured after S1-0"),
    ],
)
def test_a_series_outside_its_brackets_is_not_corrected_at_all(brackets, words):
    made = solved(line(series()), marks(*brackets))
    plain = transform(line(series()), Corrections())
    assert made.rows == plain.rows
    assert made.corrected[1] == f"The drift was not corrected: {words}."
    assert made.problem == ""


def test_an_excluded_vessel_needs_no_brackets():
    *others, last = series(minutes=(1.0, 2.0, 3.0, 9.0))
    made = solved(line([*others, replace(last, excluded="A. Muster, 2030-04-01: spilt")]), marks(0.0, 5.0))
    assert made.corrected[1].startswith("The drift was corrected")
    assert len(made.rows) == 3
    # it is shown, as it was read
    assert made.points[3].signal == last.readings[0].signal
    beside_a_bad_one = solved(line([*others, replace(last, excluded="spilt")]), marks(0.0, 5.0, 10.0)[:2] + [
        replace(marks(10.0)[0], signal=0.0)
    ])  # fmt: skip
    assert beside_a_bad_one.points[3].signal == last.readings[0].signal


@pytest.mark.parametrize(
    ("broken", "words"),
    [
        ({"signal": None, "qualifier": NOT_DETECTED}, "the bracket BR5 has no signal above zero that can be used"),
        ({"signal": 0.0}, "the bracket BR5 has no signal above zero that can be used"),
        ({"signal": -0.1}, "the bracket BR5 has no signal above zero that can be used"),
        ({"already": ("drift",)}, "the export says that the drift of the bracket BR0 was corrected already"),
        ({"already": ("blank",)}, "the blank is off only one of series and brackets"),
        ({"unit": "mA"}, "the brackets are in A and mA and the signals in A"),
        ({"measured_at": ""}, "without acquisition times, or an order within one file"),
    ],
)
def test_brackets_that_show_no_sensitivity(broken, words):
    first, last = marks(0.0, 5.0)
    made = solved(line(series()), [first, replace(last, **broken)])
    assert words in made.corrected[1]
    assert made.rows == transform(line(series()), Corrections()).rows


def test_a_bad_bracket_elsewhere_in_the_night_does_not_matter():
    made = solved(line(series()), [*marks(0.0, 5.0), *marks(50.0, height=0.0)])
    assert fitted(made)[0] == pytest.approx(1.0, rel=1e-12)


def test_what_the_export_corrected_is_not_corrected_again():
    prepared = line(series(already=("drift",)))
    made = solved(prepared, marks(0.0, 5.0))
    assert made.rows == transform(prepared, Corrections()).rows
    assert made.corrected[1] == "The drift was not corrected: the export had it corrected already."
    assert transform(prepared, Corrections()).corrected[1] == "The export had the drift corrected already."


def ordered(reading: Reading, order: int, path="night/run.csv") -> Reading:
    return replace(reading, measured_at="", order=order, path=path)


def in_order(path="night/run.csv"):
    vessels = [
        replace(one, readings=(ordered(one.readings[0], 10 + i),)) for i, one in enumerate(series(), 1)
    ]
    first, last = marks(0.0, 5.0)
    return line(vessels), [ordered(first, 10, path), ordered(last, 15, path)]


def test_without_times_the_declared_order_stands_for_them():
    made = solved(*in_order())
    assert fitted(made)[0] == pytest.approx(1.0, rel=1e-12)
    assert "in the declared order, since not every reading has a time" in made.corrected[1]


def test_the_order_of_two_files_is_no_order():
    assert "cannot be placed beside each other" in solved(*in_order("night/brackets.csv")).corrected[1]


def test_a_potential_is_not_divided():
    made = solved(line(series(), response="log"), marks(0.0, 5.0))
    assert "a potential has no sensitivity" in made.corrected[1]


# With an internal standard the ratio drifts


def internal_of(own, ratio):
    """The internal standard falls by 2 % a minute; what is left in the ratio is ``ratio``."""
    return replace(own, analyte="Rh", line="", signal=own.signal / ratio)


def with_internal(lost=()):
    vessels = [
        replace(one, internal=tuple(internal_of(r, 0.5 * (1.0 + x) * fall(m)) for r in one.readings))
        for one, x, m in zip(series(), ADDED, MINUTES, strict=True)
    ]
    own = marks(0.0, 2.5, 5.0)
    other = [internal_of(r, 2.0 * fall(m)) for r, m in zip(own, (0.0, 2.5, 5.0), strict=True) if m not in lost]
    return line(vessels, internal="Rh", entered="in_sample"), [*own, *other]


@pytest.mark.parametrize("background", [None, Background(0.0, None, 0, 1, (), "A")])
def test_with_an_internal_standard_the_ratio_of_the_brackets_counts(background):
    prepared, brackets = with_internal()
    made = solved(prepared, brackets, background)
    assert fitted(made)[0] == pytest.approx(1.0, rel=1e-12)
    assert [point.signal for point in made.points] == pytest.approx([0.5 * (1.0 + x) for x in ADDED])
    assert len(made.corrected) == 3


def test_a_bracket_without_its_internal_standard():
    made = solved(*with_internal(lost=(2.5,)))
    assert "not every reading of the brackets of Cd 228.8 has one of the internal standard Rh" in made.corrected[-1]


def test_the_shift_with_internal_standard_and_drift():
    prepared, brackets = with_internal()

    def made(mean):
        return solved(prepared, brackets, Background(mean, None, 0, 1, (), "A"))

    up, down = made(0.01 + 1e-6), made(0.01 - 1e-6)
    slopes = [(low.y - high.y) / 2e-6 for high, low in zip(up.rows, down.rows, strict=True)]
    assert [row.shift for row in made(0.01).rows] == pytest.approx(slopes, rel=1e-7)


@given(st.randoms(use_true_random=False), st.floats(-0.02, 0.02))
def test_neither_order_nor_company_of_readings_matters(random, rate):
    prepared = line(series(drift=lambda minute: math.exp(rate * minute)))
    brackets = marks(0.0, 0.2, 2.5, 5.0, drift=lambda minute: math.exp(rate * minute))
    company = [read(0.3, 1.5, replace(KEY, sample="S2"), "0"), read(7.0, 3.5, analyte="Pb", key=BRACKET)]
    readings = [*brackets, *company, *(one for v in prepared.vessels for one in v.readings)]
    straight = transform(prepared, Corrections(drift=drift(prepared, brackets)))
    random.shuffle(readings)
    mixed = drift_of(prepared, *visits(readings, {}), None)
    assert transform(prepared, Corrections(drift=mixed)) == straight
