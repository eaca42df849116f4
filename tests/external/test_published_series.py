"""Published standard additions, through the solver. The source stands beside each; ``(from memory)`` where it was not
read again for this test. Tolerances against print: half a unit of the last printed digit, unless the line says more."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import pytest

from spikeward.rules.prepared import PreparedLine, PreparedVessel, WayBack
from spikeward.rules.records import Reading, SeriesKey
from spikeward.rules.solve.corrections import Corrections
from spikeward.rules.solve.job import Job
from spikeward.rules.solve.lines import solve_lines
from spikeward.rules.solve.solved import Solved

KEY = SeriesKey("", "", "B1", "sample", "S1")


def jobs(lines, backgrounds=None):
    """Each line with the background of its batch, as an evaluation would ask for them."""
    known = backgrounds or {}
    return [Job(one, Corrections(known.get((one.key.batch_key, one.analyte, one.line)))) for one in lines]


def reading(signal: float, level: str) -> Reading:
    return Reading(
        KEY, level, "", "", "", f"S1-{level}", "X", "", "", signal, str(signal), "", 1, None, "", "", None, (), (),
        "run.csv", 2 + int(level), "",
    )  # fmt: skip


def vessel(level: int, aliquot: float, addition: float, final: float, content: float, signal: float) -> PreparedVessel:
    """Volumes in mL; ``content`` of the standard in the unit of the answer."""
    name = str(level)
    return PreparedVessel(name, "", aliquot, addition, final, content * addition, (reading(signal, name),))


def solve(vessels: Sequence[PreparedVessel], unit: str = "mg/L", back: WayBack | None = None) -> Solved:
    line = PreparedLine(KEY, "X", "", "flasks", unit, "", tuple(vessels), back, "", "")
    return solve_lines(jobs([line]), 0.95)[0]


def content_of(solved: Solved) -> float:
    assert solved.no_number == ""
    assert solved.content is not None
    return solved.content.content


# one addition: vessels as (aliquot, addition, final volume in mL, signal), content of the standard, what is printed,
# and half a unit of its last digit
SINGLE = [
    pytest.param(
        [(1.00, 0, 5.00, 0.193), (1.00, 1.00e-3, 5.00, 0.419)], 1560, 1.33, 0.005,
        id="Harvey, Modern Analytical Chemistry (2000), example 5.4: lead in blood",
    ),
    pytest.param(
        [(5.00, 0, 5.00, 0.712), (5.00, 5.00e-3, 5.005, 1.546)], 1560, 1.33, 0.005,
        id="Harvey, Analytical Chemistry 2.1, chapter 5: lead, spiked into the sample (from memory)",
    ),
    pytest.param(
        [(95.0, 0, 95.0, 4.27), (95.0, 5.00, 100.0, 7.98)], 2.08, 0.113, 0.0005,
        id="Harris, Quantitative Chemical Analysis, section 5-3: sodium in serum, first reading undiluted",
    ),
    pytest.param(
        [(25.00, 0, 25.00, 2.36), (25.00, 0.500, 25.500, 3.79)], 28.7, 0.900, 0.0005,
        id="Harris, Quantitative Chemical Analysis: nickel by polarography (from memory)",
    ),
    pytest.param(
        [(5.00, 0, 10.0, 0.215), (5.00, 0.020, 10.0, 0.441)], 100.0, None, 0,
        id="exact arithmetic on an exercise: copper in pond water",
    ),
    pytest.param(
        [(20.00, 0, 100.0, 415), (20.00, 10.0, 100.0, 503)], 50, None, 0,
        id="exact arithmetic on Skoog's quinine tablet (printed answer not seen)",
    ),
    pytest.param(
        [(1.0, 0, 1.0, 0.203), (1.0, 1.0, 1.0, 0.491)], 5.00, 3.52, 0.005,
        id="exact arithmetic on an exercise: copper, one addition of 5.00 mg/L",
    ),
    pytest.param(
        [(1.0, 0, 5.0, 0.19), (1.0, 2.0e-3, 5.0, 0.4)], 1000, None, 0,
        id="exact arithmetic on an exercise: lead variant",
    ),
]  # fmt: skip


def exactly(flasks: Sequence[tuple[float, float, float, float]], standard: float) -> float:
    """x1 y0 / (y1 - y0) in whole numbers, from the decimal digits as printed."""
    (v0, _, vf0, s0), (v1, added, vf1, s1) = ([Fraction(str(value)) for value in flask] for flask in flasks)
    y0, y1 = s0 * vf0 / v0, s1 * vf1 / v1
    return float(Fraction(str(standard)) * added / v1 * y0 / (y1 - y0))


@pytest.mark.parametrize(("flasks", "standard", "printed", "tolerance"), SINGLE)
def test_one_addition(flasks, standard, printed, tolerance):
    solved = solve([vessel(i, v0, v, vf, standard, s) for i, (v0, v, vf, s) in enumerate(flasks)])
    assert content_of(solved) == pytest.approx(exactly(flasks, standard), rel=1e-12)
    if printed is not None:
        assert content_of(solved) == pytest.approx(printed, abs=tolerance)
    assert solved.degrees_of_freedom == 0
    assert solved.content.standard_uncertainty is None
    assert "one addition leaves no degree of freedom" in solved.content.reason


def test_a_misread_microlitre_is_a_thousandfold():
    """Copies of Harvey's example 5.4 print 1.00 mL for 1.00 uL, and then 1332 ppb."""
    solved = solve([vessel(0, 1.00, 0, 5.00, 1560, 0.193), vessel(1, 1.00, 1.00e-3, 5.00, 1560, 0.419)])
    assert content_of(solved) < 13.32


def test_a_small_spike_still_dilutes():
    """Wang, Analytical Electrochemistry, 2nd ed., example 3-5 prints 1.53 mM by neglecting 1 % of volume: 2.5 % off."""
    solved = solve([vessel(0, 10, 0, 10, 100, 13.0), vessel(1, 10, 0.1, 10.1, 100, 21.5)], "mmol/L")
    assert content_of(solved) == pytest.approx(1.4917, abs=5e-5)
    assert abs(content_of(solved) - 1.53) > 0.03


def test_a_perfect_line_does_not_break():
    """Wang, Analytical Electrochemistry, 2nd ed., example 3-4: 6, 9, 12 uA at 0, 2, 4 mM added; 4 mM."""
    solved = solve([vessel(i, 1, 1, 1, x, y) for i, (x, y) in enumerate([(0, 6), (2, 9), (4, 12)])], "mmol/L")
    assert content_of(solved) == 4.0
    assert solved.content.standard_uncertainty == 0.0
    assert "exactly on the line" in solved.content.reason


def test_a_given_regression_line_for_lead():
    """Harvey (from memory): S = 0.266 + 312 V(mL), 1.00 mL in 5.00 mL, 1560 ppb: 1.33 ppb, exactly 1.3300."""
    solved = solve([vessel(i, 1.00, v, 5.00, 1560, 0.266 + 312 * v) for i, v in enumerate([0, 1e-3, 2e-3])])
    assert content_of(solved) == pytest.approx(1.33, rel=1e-9)


def test_manganese_from_either_plot():
    """Harvey (line and answer from memory): S = 0.0854 V + 0.1478, 25.00 mL in 50.00 mL, 100.6 mg/L: 6.96 mg/L.

    Plotted against the volume added the line meets zero at -1.7307 mL, against the content in the flask at
    -3.4821 mg/L.
    """
    signals = [0.0854 * v + 0.1478 for v in range(6)]
    flasks = solve([vessel(i, 25.00, i, 50.00, 100.6, s) for i, s in enumerate(signals)])
    assert content_of(flasks) == pytest.approx(6.9642529, rel=1e-8)
    assert content_of(flasks) == pytest.approx(6.96, abs=0.005)
    by_volume = solve([vessel(i, 1, 1, 1, i, s) for i, s in enumerate(signals)])
    assert content_of(by_volume) == pytest.approx(1.7307, abs=5e-5)
    by_content = solve([vessel(i, 1, 1, 1, 100.6 * i / 50.00, s) for i, s in enumerate(signals)])
    assert content_of(by_content) == pytest.approx(3.4821, abs=5e-5)


def test_quinine_back_to_the_tablet():
    """Exact arithmetic on Skoog's quinine tablet: 3.925 g in 1.000 L, 3.0037638 %."""
    back = WayBack(1.0 / 3925 * 100, "%", "", 1000.0, 3.925, "3.925 g made up to 1000 mL")
    solved = solve([vessel(0, 20.00, 0, 100, 50, 415), vessel(1, 20.00, 10.0, 100, 50, 503)], "mg/L", back)
    assert solved.in_sample.content == pytest.approx(3.0037638, rel=1e-7)
    assert solved.in_sample.unit == "%"


@dataclass(frozen=True)
class Line:
    """A published series as x and y, with what a regression of it gives."""

    x: tuple[float, ...]
    y: tuple[float, ...]
    a: float
    b: float
    s: float
    s_a: float
    s_b: float
    r: float
    content: float
    u: float
    u_without_covariance: float
    u_with_a_reading: float
    fieller: tuple[float, float]


SILVER = Line(
    (0, 5, 10, 15, 20, 25, 30), (0.32, 0.41, 0.52, 0.60, 0.70, 0.77, 0.89),
    0.321785714286, 0.0186428571429, 0.0109217999563, 0.00744195223, 0.000412805236, 0.998776489,
    17.2605363985, 0.7478706360, 0.55265, 0.95001, (15.43696, 19.29383),
)  # fmt: skip
GOLD = Line(
    (0, 10, 20, 30, 40, 50, 60, 70), (0.257, 0.314, 0.364, 0.413, 0.468, 0.528, 0.574, 0.635),
    0.256916666667, 0.00534880952381, 0.00369389242803, 0.00238439731, 5.69979976e-5, 0.999659510,
    48.0324949922, 0.9178817169, 0.67875, 1.14867, (45.84154, 50.33644),
)  # fmt: skip
IRON = Line(
    (0, 5, 10, 15, 20), (0.240, 0.437, 0.621, 0.809, 1.009),
    0.2412, 0.0382, 0.00485798312, 0.00376297754, 0.000307245830, 0.999902977,
    6.31413612565, 0.1430111635, 0.11083, 0.19138, (5.86943, 6.78023),
)  # fmt: skip
ZINC = Line(
    (0, 4, 8, 12), (6.12, 11.16, 15.68, 20.64),
    6.188, 1.202, 0.154402072525, 0.129182042, 0.0172626765, 0.999793807,
    5.14808652246, 0.1725069036, 0.13045, 0.21508, (4.44593, 5.93570),
)  # fmt: skip
PALLADIUM = Line(
    (0, 5, 10, 15, 20, 25), (0.209, 0.329, 0.455, 0.581, 0.707, 0.833),
    0.206142857143, 0.0250285714286, 0.00207019667803, 0.00149829835, 9.89743319e-5, 0.999968726,
    8.23630136986, 0.0886812946, 0.06815, 0.12127, (7.99256, 8.48505),
)  # fmt: skip
ALUMINIUM = Line(
    (0, 0.1, 0.2, 0.3), (0.214, 0.386, 0.554, 0.728),
    0.214, 1.71, 0.00173205080757, 0.00144913767, 0.00774596669, 0.999979481,
    0.125146198830, 0.001345324890, 0.00101957, 0.00168399993, (0.119460, 0.131041),
)  # fmt: skip
VOLUMES = (0, 0.050, 0.250, 0.400, 0.550, 0.700, 0.850, 1.000, 1.150)
CURRENTS = (1.78, 2.00, 2.81, 3.35, 3.88, 4.37, 4.86, 5.33, 5.82)
ASCORBIC = Line(
    tuple(279 * v / 50.0 for v in VOLUMES),
    tuple(i * (50.0 + v) / 50.0 for i, v in zip(CURRENTS, VOLUMES, strict=True)),
    1.86870433665, 0.646299951854, 0.0644700701547, 0.0374180521, 0.00998094229, 0.999166320,
    2.89138863664, 0.0978691034, 0.07311, 0.13975, (2.66763, 3.13106),
)  # fmt: skip
LINES = [
    pytest.param(SILVER, id="Miller and Miller, chapter 5: silver (from memory)"),
    pytest.param(GOLD, id="Miller and Miller, chapter 5, exercise: gold in sea water"),
    pytest.param(IRON, id="Skoog: iron by thiocyanate"),
    pytest.param(ZINC, id="Skoog, Principles of Instrumental Analysis, 15-8: zinc"),
    pytest.param(PALLADIUM, id="Skoog, Fundamentals of Analytical Chemistry, 9th ed., 26-31: palladium"),
    pytest.param(ALUMINIUM, id="a course's worked example: aluminium in chewing gum"),
    pytest.param(ASCORBIC, id="Harris, figure 5-5: ascorbic acid, successive additions (from memory)"),
]


def solve_xy(line: Line) -> Solved:
    return solve([vessel(i, 1, 1, 1, x, y) for i, (x, y) in enumerate(zip(line.x, line.y, strict=True))])


@pytest.mark.parametrize("line", LINES)
def test_regression(line):
    solved = solve_xy(line)
    assert content_of(solved) == pytest.approx(line.content, rel=1e-9)
    assert solved.intercept == pytest.approx(line.a, rel=1e-9)
    assert solved.slope == pytest.approx(line.b, rel=1e-9)
    assert solved.residual_sd == pytest.approx(line.s, rel=1e-9)
    assert solved.intercept_uncertainty == pytest.approx(line.s_a, rel=1e-8)
    assert solved.slope_uncertainty == pytest.approx(line.s_b, rel=1e-8)
    assert solved.correlation == pytest.approx(line.r, abs=1e-9)
    assert solved.content.standard_uncertainty == pytest.approx(line.u, rel=1e-9)
    assert solved.content.interval == pytest.approx(line.fieller, rel=1e-5)
    assert solved.effective_degrees_of_freedom == len(line.x) - 2


@pytest.mark.parametrize("line", LINES)
def test_neither_of_the_two_wrong_formulas(line):
    u = solve_xy(line).content.standard_uncertainty
    assert u > 1.2 * line.u_without_covariance
    assert u < 0.85 * line.u_with_a_reading


def test_silver_as_printed():
    """Miller and Miller (from memory): 17.3 ± 1.9 ug/mL, s 0.01094, s_xE 0.749, from a rounded slope."""
    solved = solve_xy(SILVER)
    assert content_of(solved) == pytest.approx(17.3, abs=0.05)
    assert solved.residual_sd == pytest.approx(0.01094, abs=3e-5)
    assert solved.fit_uncertainty == pytest.approx(0.749, abs=0.003)
    lower, upper = solved.fit_half_widths
    assert upper > lower  # not centred: 15.44 .. 19.29
    assert solved.content.expanded_uncertainty == pytest.approx(1.9, abs=0.05)


def test_gold_as_printed():
    """Miller and Miller, exercise (answer from memory): 48.0 ng/mL, limits near 45.9 and 50.2."""
    solved = solve_xy(GOLD)
    assert content_of(solved) == pytest.approx(48.0, abs=0.05)
    assert solved.content.interval == pytest.approx((45.9, 50.2), abs=0.2)


def test_iron_in_the_sample():
    """Skoog (from memory): 7.01 ppm; u 0.16 in newer editions, 0.12 in older ones, which leave out the covariance."""
    signals = (0.240, 0.437, 0.621, 0.809, 1.009)
    solved = solve([vessel(i, 10.00, 5.0 * i, 50.00, 11.1, s) for i, s in enumerate(signals)])
    assert content_of(solved) == pytest.approx(7.0086911, rel=1e-8)
    assert content_of(solved) == pytest.approx(7.01, abs=0.005)
    assert solved.content.standard_uncertainty == pytest.approx(0.1587424, rel=1e-6)
    assert abs(solved.content.standard_uncertainty - 0.1230190) > 0.03


def test_zinc_in_the_sample():
    """Skoog, Principles of Instrumental Analysis, 15-8 (answer from memory): 1.13 ppm."""
    signals = (6.12, 11.16, 15.68, 20.64)
    solved = solve([vessel(i, 5.00, 4.0 * i, 25.0, 1.10, s) for i, s in enumerate(signals)])
    assert content_of(solved) == pytest.approx(1.1325790, rel=1e-7)
    assert content_of(solved) == pytest.approx(1.13, abs=0.005)
    assert solved.content.standard_uncertainty == pytest.approx(0.0379515, rel=1e-6)


def test_palladium_in_the_sample():
    """Skoog, Fundamentals of Analytical Chemistry, 9th ed., 26-31; no printed answer seen, arithmetic."""
    signals = (0.209, 0.329, 0.455, 0.581, 0.707, 0.833)
    solved = solve([vessel(i, 10.00, 5.0 * i, 50.00, 1.00e-5, s) for i, s in enumerate(signals)], "mol/L")
    assert content_of(solved) == pytest.approx(8.2363014e-6, rel=1e-8)
    assert solved.content.standard_uncertainty == pytest.approx(8.8681e-8, rel=1e-5)


def test_aluminium_in_the_gum():
    """A course's worked example prints 1.5018 ppm, 48.1332 ppm in the gum, ± 2.8 with a term that does not belong."""
    back = WayBack(100 / 3.12, "mg/kg", "", 100.0, 3.12, "3.12 g made up to 100 mL")
    signals = (0.214, 0.386, 0.554, 0.728)
    solved = solve([vessel(i, 25, 0.1 * i, 50, 300.0, s) for i, s in enumerate(signals)], "mg/L", back)
    assert content_of(solved) == pytest.approx(1.5018, abs=5e-5)
    assert solved.in_sample.content == pytest.approx(48.1332, abs=5e-5)
    assert solved.in_sample.expanded_uncertainty == pytest.approx(2.2263, abs=0.01)
    assert solved.in_sample.expanded_uncertainty < 2.5


def test_ascorbic_acid_in_one_vessel():
    """Harris, figure 5-5 (from memory): 2.89 mM, s 0.098 mM, ± 0.23 mM; on diluted contents it would be 2.9186.

    With equal weights 2.8914, with those of the growing volume 2.8884: both round to what is printed.
    """
    solved = solve(
        [vessel(i, 50.0, v, 50.0 + v, 279, c) for i, (v, c) in enumerate(zip(VOLUMES, CURRENTS, strict=True))], "mmol/L"
    )
    assert content_of(solved) == pytest.approx(2.8884, abs=5e-5)
    assert content_of(solved) == pytest.approx(2.89, abs=0.005)
    assert solved.content.standard_uncertainty == pytest.approx(0.098, abs=0.0005)
    assert solved.content.expanded_uncertainty == pytest.approx(0.23, abs=0.005)


def test_quenching_is_refused():
    """Skoog, Principles of Instrumental Analysis, 15-9 (signals from memory): fluoride by quenching falls."""
    signals = (68.2, 55.3, 41.3, 28.8)
    solved = solve([vessel(i, 1, 1, 1, float(i), s) for i, s in enumerate(signals)])
    assert solved.slope == pytest.approx(-13.22, rel=1e-9)
    assert solved.intercept == pytest.approx(68.23, rel=1e-9)
    assert solved.residual_sd == pytest.approx(0.4347413, rel=1e-6)
    assert solved.content is None
    assert "falls with the additions" in solved.no_number


def test_a_curved_series_shows_in_its_correlation():
    """Heinemann Chemistry 2, chapter 7, question 24: curved; about 16 ppm by hand, 29.7 from a line."""
    x, y = (0, 10, 20, 40, 60), (0.15, 0.25, 0.34, 0.44, 0.53)
    solved = solve([vessel(i, 1, 1, 1, a, b) for i, (a, b) in enumerate(zip(x, y, strict=True))])
    assert content_of(solved) == pytest.approx(29.719, abs=5e-4)
    assert solved.fit_uncertainty == pytest.approx(6.256, abs=5e-4)
    assert solved.correlation == pytest.approx(0.98394, abs=5e-6)  # a method that demands 0.995 stops it
    first_three = solve([vessel(i, 1, 1, 1, a, b) for i, (a, b) in enumerate(zip(x[:3], y[:3], strict=True))])
    assert content_of(first_three) == pytest.approx(15.965, abs=5e-4)
