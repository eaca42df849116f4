"""The reagent blank: declared or measured, in the unit of the line, and what it does to the content."""

from __future__ import annotations

import math
from dataclasses import replace
from decimal import Decimal
from itertools import permutations

import pytest

from spikeward.rules.outcomes import Estimate
from spikeward.rules.prepared import PreparedLine, PreparedVessel
from spikeward.rules.quantities import parse_quantity
from spikeward.rules.records import SeriesKey
from spikeward.rules.rulebook import BlankRule, Known
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.reagent_blank import reagent_of
from spikeward.rules.solve.solved import Solved

KEY = SeriesKey("", "", "B1", "sample", "S1")
OWN = replace(KEY, role="reagent_blank", sample="R1")


def line(unit="mg/L", aliquot_unit="mL", key=KEY, aliquots=(10.0,) * 4) -> PreparedLine:
    vessels = tuple(PreparedVessel(str(i), "", v0, 0.0, 25.0, 0.0, ()) for i, v0 in enumerate(aliquots))
    made = PreparedLine(key, "Cd", "", "flasks", unit, "A", vessels, None, "mix", "")
    return replace(made, aliquot_unit=aliquot_unit)


def blank(content, sample="R1", u=None, dof=2, **changes) -> Solved:
    prepared = line(key=replace(OWN, sample=sample), **changes)
    return Solved(
        prepared, (), content=Estimate(content, prepared.unit), fit_uncertainty=u,
        scatter_degrees_of_freedom=dof if u is not None else 0,
    )  # fmt: skip


@pytest.fixture
def rules(bench):
    def made(amount="", uncertainty=None, molar_mass="112.414 g/mol", asked=True):
        declared = {"Cd": Known(parse_quantity(amount), uncertainty)} if amount else {}
        masses = {"Cd": parse_quantity(molar_mass)} if molar_mass else {}
        return bench.rulebook(blanks=BlankRule(reagent=asked, reagent_amounts=declared), molar_masses=masses)

    return made


@pytest.mark.parametrize(
    ("amount", "unit", "aliquot_unit", "expected"),
    [
        ("0.5 ng", "ug/L", "mL", 0.5),  # µg/L x mL is ng
        ("0.5 ug", "mg/L", "mL", 0.5),
        ("500 ng", "mg/L", "mL", 0.5),
        ("0.5 ug", "mg/kg", "g", 0.5),  # mg/kg x g is µg
        ("0.5 ng", "ng/g", "g", 0.5),
        ("3 nmol", "umol/L", "mL", 3.0),
        ("3 nmol", "nmol/g", "g", 3.0),
        ("112.414 ng", "umol/L", "mL", 1.0),  # by the molar mass
        ("1 nmol", "ug/L", "mL", 112.414),
    ],
)
def test_a_declared_amount_in_the_unit_of_the_line(rules, amount, unit, aliquot_unit, expected):
    found = reagent_of([], line(unit, aliquot_unit), rules(amount, 0.1))
    assert found.amount == pytest.approx(expected, rel=1e-12)
    scale = expected / float(Decimal(amount.split()[0]))
    assert found.standard_uncertainty == pytest.approx(0.1 * scale, rel=1e-12)
    assert math.isinf(found.degrees_of_freedom)
    assert found.problem == ""
    assert found.note == f"Reagents bring {amount} into every vessel, as declared; it was counted with the additions"


def test_without_an_uncertainty_it_says_so(rules):
    found = reagent_of([], line(), rules("0.5 ug"))
    assert found.standard_uncertainty is None
    assert found.note.endswith("and how well it is known is not in the uncertainty")


@pytest.mark.parametrize(
    ("unit", "aliquot_unit", "molar_mass"), [("umol/L", "mL", ""), ("mg/L", "g", "112 g/mol"), ("", "mL", "")]
)
def test_an_amount_that_does_not_go_with_the_contents(rules, unit, aliquot_unit, molar_mass):
    found = reagent_of([], line(unit, aliquot_unit), rules("0.5 ug", molar_mass=molar_mass))
    assert "give it in a unit that goes with them, or the molar mass" in found.problem
    assert found.amount == 0.0


def test_several_blanks_give_their_mean(rules):
    """Contents 0.04, 0.05, 0.06 mg/L in aliquots of 10 mL: 0.4, 0.5 and 0.6 µg, s/sqrt(3) of a common value."""
    found = reagent_of([blank(c, f"R{c}", u=0.001) for c in (0.05, 0.06, 0.04)], line(), rules())
    assert found.amount == pytest.approx(0.5, rel=1e-12)
    assert found.standard_uncertainty == pytest.approx(0.1 / math.sqrt(3), rel=1e-12)
    assert found.degrees_of_freedom == 2
    assert found.note.startswith("Reagents bring 500 ng into every vessel, the mean of 3 reagent blanks; ")


def test_blanks_that_agree_by_chance_are_known_as_their_fits_say(rules):
    found = reagent_of([blank(0.05, "R1", u=0.01), blank(0.05, "R2", u=0.01)], line(), rules())
    assert found.standard_uncertainty == pytest.approx(0.1 / math.sqrt(2), rel=1e-12)
    assert found.degrees_of_freedom == 4


def test_the_only_blank_has_the_uncertainty_of_its_fit(rules):
    found = reagent_of([blank(0.05, u=0.002, dof=3)], line(), rules())
    assert (found.amount, found.standard_uncertainty, found.degrees_of_freedom) == (
        pytest.approx(0.5), pytest.approx(0.02), 3,
    )  # fmt: skip
    bare = reagent_of([blank(0.05)], line(), rules())
    assert bare.standard_uncertainty is None
    assert "how well it is known" in bare.note


def test_a_blank_in_other_units_and_aliquots(rules):
    """0.5 µg in each: 5 mL at 100 µg/L are 0.5 µg of a sample in mg/L; by the molar mass for one in µmol/L."""
    other = blank(100.0, unit="ug/L", aliquots=(5.0,) * 4)
    assert reagent_of([other], line(), rules()).amount == pytest.approx(0.5, rel=1e-12)
    assert reagent_of([other], line("umol/L"), rules()).amount == pytest.approx(500.0 / 112.414, rel=1e-12)


@pytest.mark.parametrize(
    ("given", "words"),
    [
        ([], "No reagent blank was subtracted: the batch has none that is solved"),
        ([replace(blank(0.05), content=None, no_number="the slope is zero")], "R1 gives no number (the slope is zero)"),
        ([blank(0.05, aliquots=(10.0, 5.0))], "the aliquots of reagent blank R1 differ"),
        ([blank(0.05, unit="umol/L")], "reagent blank R1 is in µmol/L and the sample in mg/L"),
    ],
)
def test_blanks_that_cannot_be_used_are_named(rules, given, words):
    found = reagent_of(given, line(), rules(molar_mass=""))
    assert words in found.note
    assert (found.amount, found.standard_uncertainty, found.problem) == (0.0, None, "")
    if given:
        beside = reagent_of([*given, blank(0.06, "R2")], line(), rules(molar_mass=""))
        assert beside.amount == pytest.approx(0.6)
        assert words in beside.note


def test_where_nothing_is_asked_for_nothing_is_taken_off(rules):
    assert reagent_of([blank(0.05)], line(), rules(asked=False)) is None
    assert reagent_of([blank(0.05)], line(key=OWN), rules()) is None
    assert reagent_of([blank(0.05)], line(key=replace(KEY, role="process_blank")), rules()) is not None


@pytest.mark.parametrize("order", [*permutations(range(4))][1:])
def test_the_order_of_blanks_does_not_matter(rules, order):
    blanks = [blank(0.1 + 0.07 * i / 3, f"R{i}", u=0.01 * (i + 1)) for i in range(4)]
    assert reagent_of([blanks[i] for i in order], line(), rules()) == reagent_of(blanks, line(), rules())


# Through the solver


def measured(bench, content, amount, v0, key, response=0.4):
    """Vessels of ``content`` mg/L with ``amount`` µg of the reagents in each, and additions of 2.5 µg."""
    signals = [response * (content * v0 + amount + 2.5 * i) / 25.0 + e for i, e in enumerate(bench.NOISE)]
    vessels = tuple(
        PreparedVessel(
            str(i), "", v0, 0.0, 25.0, 2.5 * i, (bench.Night().read(key.role, key.sample, str(i), signal),)
        )
        for i, signal in enumerate(signals)
    )
    return replace(line(key=key), vessels=vessels)


def test_a_blank_series_takes_its_amount_off_a_suppressed_sample(bench, rules):
    """Reagents with 0.5 µg in a vessel; the sample halves the response, so that signals could not be subtracted."""
    own = measured(bench, 0.0, 0.5, 10.0, OWN, response=0.8)
    (solved,) = solve_lines([Job(own)], 0.95)
    assert solved.content.content == pytest.approx(0.05, abs=0.01)
    prepared = measured(bench, 0.3, 0.5, 8.0, KEY)
    reagent = reagent_of([solved], prepared, rules())
    (plain, less) = solve_lines([Job(prepared), Job(prepared, Corrections(reagent=reagent))], 0.95)
    assert plain.content.content - less.content.content == pytest.approx(reagent.amount / 8.0, rel=1e-9)
    assert less.reagent_effect == pytest.approx(-1.0 / 8.0, rel=1e-9)
    wider = math.hypot(plain.content.standard_uncertainty, reagent.standard_uncertainty / 8.0)
    assert less.content.standard_uncertainty == pytest.approx(wider, rel=1e-9)
