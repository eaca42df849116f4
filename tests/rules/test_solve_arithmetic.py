"""The arithmetic of lines: against published fits, against another program, and bit for bit in any company."""

from __future__ import annotations

import ast
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st

import spikeward.rules.records
from spikeward.rules.solve.line import Fit, Fits, fit_lines

RULES = Path(spikeward.rules.records.__file__).parent
# their last digit depends on the shape of the array and on the processor
FORBIDDEN = {
    "sum", "nansum", "mean", "average", "dot", "vdot", "inner", "matmul", "einsum", "tensordot", "std", "var", "cov",
    "corrcoef", "polyfit", "lstsq", "prod", "cumsum", "trapezoid",
}  # fmt: skip


def one(x, y) -> Fit:
    """A single line, fitted alone."""
    columns = [np.array(values, dtype=float).reshape(-1, 1) for values in (x, y)]
    ones = np.ones_like(columns[0])
    return fit_lines(columns[0], columns[1], ones, ones).of(0)


def test_norris():
    """NIST StRD, Norris (linear regression, lower level of difficulty): certified values."""
    text = (files("scipy.stats") / "tests/data/nist_linregress/Norris.dat").read_text(encoding="utf-8")
    numbers = [tuple(map(float, row.split())) for row in text.splitlines()[60:] if row.strip()]
    assert len(numbers) == 36
    fit = one([x for _, x in numbers], [y for y, _ in numbers])
    assert fit.intercept == pytest.approx(-0.262323073774029, rel=1e-10)
    assert fit.intercept_uncertainty == pytest.approx(0.232818234301152, rel=1e-10)
    assert fit.slope == pytest.approx(1.00211681802045, rel=1e-10)
    assert fit.slope_uncertainty == pytest.approx(0.429796848199937e-3, rel=1e-10)
    assert fit.residual_sd == pytest.approx(0.884796396144373, rel=1e-10)
    assert fit.correlation**2 == pytest.approx(0.999993745883712, rel=1e-10)


def test_cadmium_calibration():
    """EURACHEM/CITAC Guide QUAM, example A5: B1 0.2410 (0.0050), B0 0.0087 (0.0029), S 0.005486, r 0.997."""
    y = [
        *(0.028, 0.029, 0.029), *(0.084, 0.083, 0.081), *(0.135, 0.131, 0.133), *(0.180, 0.181, 0.183),
        *(0.215, 0.230, 0.216),
    ]  # fmt: skip
    fit = one([x for x in (0.1, 0.3, 0.5, 0.7, 0.9) for _ in range(3)], y)
    assert fit.slope == pytest.approx(0.2410, abs=5e-5)
    assert fit.slope_uncertainty == pytest.approx(0.00500769, rel=1e-6)
    assert fit.intercept == pytest.approx(0.0087, abs=5e-5)
    assert fit.intercept_uncertainty == pytest.approx(0.00287670, abs=5e-9)
    assert fit.residual_sd == pytest.approx(0.00548564560, rel=1e-8)
    assert fit.correlation == pytest.approx(0.99720533, abs=5e-9)
    assert fit.sxx == pytest.approx(1.2, rel=1e-14)
    # -xbar / sqrt(mean of x²): the guide's -0.870
    correlated = fit.covariance / (fit.slope_uncertainty * fit.intercept_uncertainty)
    assert correlated == pytest.approx(-0.5 / 0.33**0.5, rel=1e-10)


def test_fluorescein():
    """Miller and Miller, chapter 5, fluorescein: b 1.93, a 1.52, s 0.4329, s_b 0.0409, s_a 0.2950, r 0.9989."""
    fit = one(range(0, 14, 2), [2.1, 5.0, 9.0, 12.6, 17.3, 21.0, 24.7])
    assert (fit.slope, fit.intercept) == pytest.approx((1.93, 1.52), abs=0.005)
    assert fit.residual_sd == pytest.approx(0.4329, abs=1e-4)  # the book carries a rounded slope
    assert fit.slope_uncertainty == pytest.approx(0.0409, abs=5e-5)
    assert fit.intercept_uncertainty == pytest.approx(0.2950, abs=1e-4)
    assert fit.correlation == pytest.approx(0.9989, abs=5e-5)


DESIGNS = [(0.5, 3.016, 2.082), (1, 1.839, 1.291), (2, 1.263, 0.913), (3, 1.076, 0.793), (5, 0.931, 0.702),
           (10, 0.825, 0.638)]  # fmt: skip


@pytest.mark.parametrize(("top", "spaced", "ends"), DESIGNS)
def test_replicates_at_both_ends_beat_equal_spacing(top, spaced, ends):
    """u(C0) in units of s/b for six vessels, top addition against content; design of Ellison and Thompson, Analyst 133
    (2008) 992; figures by arithmetic."""
    for x, expected in ((np.linspace(0, top, 6), spaced), (np.repeat([0.0, top], 3), ends)):
        design = np.column_stack([np.ones(6), x])
        scatter = np.array([1.0, -2.0, 0.5, 1.5, -0.7, 0.3])
        residuals = scatter - design @ np.linalg.lstsq(design, scatter, rcond=None)[0]
        fit = one(x, 1.0 + x + 0.01 * residuals)  # content 1, slope 1 whatever the scatter
        assert fit.content == pytest.approx(1.0, rel=1e-10)
        assert fit.fit_uncertainty / fit.residual_sd == pytest.approx(expected, abs=5.01e-4)


def random_series(rng: np.random.Generator, vessels: int) -> tuple[np.ndarray, np.ndarray]:
    x = np.concatenate(([0.0], rng.uniform(0.5, 8.0, vessels - 1)))
    return x, rng.uniform(0.01, 5.0) * (rng.uniform(0.1, 5.0) + x) + rng.normal(0.0, 0.02, vessels)


def test_agrees_with_statsmodels():
    rng = np.random.default_rng(20)
    for _ in range(60):
        x, y = random_series(rng, int(rng.integers(3, 12)))
        fit, other = one(x, y), sm.OLS(y, sm.add_constant(x)).fit()
        assert (fit.intercept, fit.slope) == pytest.approx(tuple(other.params), rel=1e-9)
        assert (fit.intercept_uncertainty, fit.slope_uncertainty) == pytest.approx(tuple(other.bse), rel=1e-9)
        assert fit.covariance == pytest.approx(other.cov_params()[0, 1], rel=1e-9)
        assert fit.correlation**2 == pytest.approx(other.rsquared, rel=1e-9)


def packed(series: list[tuple[np.ndarray, np.ndarray]]) -> Fits:
    deepest = max(len(x) for x, _ in series)
    arrays = np.zeros((4, deepest, len(series)))
    for column, (x, y) in enumerate(series):
        arrays[0, : len(x), column], arrays[1, : len(x), column] = x, y
        arrays[2, : len(x), column] = 1.0
        arrays[3, : len(x), column] = 1.0 + 0.1 * np.arange(len(x))
    return fit_lines(*arrays)


@pytest.mark.parametrize("vessels", [3, 4, 8, 130])
def test_company_leaves_every_bit(vessels):
    rng = np.random.default_rng(vessels)
    series = [random_series(rng, vessels) for _ in range(300)]
    company = [random_series(rng, n) for n in (2, 3, 5, 131)]
    together = packed(series + company)
    for block in (1, 7, 64):
        for start in range(0, 300, block):
            part = packed(series[start : start + block])
            for column in range(min(block, 300 - start)):
                assert part.of(column) == together.of(start + column)
    backwards = packed(series[::-1])
    assert all(backwards.of(299 - i) == together.of(i) for i in range(300))


numbers = st.floats(0.01, 100, allow_nan=False)


@given(st.lists(st.tuples(numbers, numbers), min_size=3, max_size=12))
def test_the_covariance_makes_the_difference(points):
    """u1² = u2² + 2 C0 xbar s²/(b² Sxx), u2 without covariance (Bruce and Gill, J. Chem. Educ. 76 (1999) 805)."""
    fit = one([0.0, *(x for x, _ in points)], [1.0, *(y for _, y in points)])
    if fit.one_x or fit.exact or abs(fit.slope) * fit.spread < 1e-6 or abs(fit.content) < 1e-6:
        return
    a, b = fit.intercept_uncertainty / fit.intercept, fit.slope_uncertainty / fit.slope
    without = fit.content**2 * (a * a + b * b)
    between = 2 * fit.content * fit.x_mean * fit.residual_sd**2 / (fit.slope**2 * fit.sxx)
    assert fit.fit_uncertainty**2 == pytest.approx(without + between, rel=1e-8, abs=1e-9 * without)


@given(st.integers(-500, 500), st.integers(-400, 400))
def test_a_power_of_two_changes_no_digit(x_power, y_power):
    x, y = np.array([0.0, 1, 2, 3]), np.array([0.31, 0.44, 0.62, 0.75])
    plain, scaled = one(x, y), one(np.ldexp(x, x_power), np.ldexp(y, y_power))
    assert scaled.content == np.ldexp(plain.content, x_power)
    assert scaled.fit_uncertainty == np.ldexp(plain.fit_uncertainty, x_power)
    assert scaled.residual_sd == np.ldexp(plain.residual_sd, y_power)
    assert scaled.correlation == plain.correlation


@pytest.mark.parametrize("factor", [1e-12, 1e-3, 1e9, 1e150, 1e-150, 1e-310])
def test_a_common_factor_of_signals_cancels(factor):
    """A factor on every signal, suppression included, leaves the content: that is what standard addition is for."""
    x, y = np.array([0.0, 1, 2, 3]), np.array([0.31, 0.44, 0.62, 0.75])
    plain, scaled = one(x, y), one(x, y * factor)
    tolerance = 1e-11 if factor > 1e-300 else 1e-9  # numbers that small carry fewer digits
    assert scaled.content == pytest.approx(plain.content, rel=tolerance)
    assert scaled.fit_uncertainty == pytest.approx(plain.fit_uncertainty, rel=tolerance)


@pytest.mark.parametrize(
    ("x", "y"),
    [
        ([0, 0, 0], [1, 2, 3]),
        ([0, 1, 2], [1, 1, 1]),
        ([0, 1, 2], [np.inf, 1, 2]),
        ([0, np.nan, 2], [1, 2, 3]),
        ([0, 1e308, 1.7e308], [1e308, 1.2e308, 1.7e308]),
        ([0, 5e-324, 1e-323], [5e-324, 1e-323, 1.5e-323]),
        ([1], [1]),
        ([], []),
    ],
)
def test_nothing_warns_and_neighbours_stay(x, y):
    good = (np.array([0.0, 1, 2, 3]), np.array([0.31, 0.44, 0.62, 0.75]))
    both = packed([good, (np.array(x, dtype=float), np.array(y, dtype=float))])
    assert both.of(0) == packed([good]).of(0)


def company_dependent(source: str) -> list[str]:
    found = []
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Attribute) and node.func.attr in FORBIDDEN:
            if isinstance(node.func.value, ast.Name) and node.func.value.id == "math":
                continue  # plain numbers, one after another
            found.append(node.func.attr)
        if isinstance(node, (ast.BinOp, ast.AugAssign)) and isinstance(node.op, ast.MatMult):
            found.append("@")
        if isinstance(node, ast.Attribute) and node.attr == "linalg":
            found.append("linalg")
        if isinstance(node, ast.ImportFrom) and node.module in ("numpy.linalg", "scipy.linalg", "scipy.stats"):
            found.append(node.module)
    return found


@pytest.mark.parametrize("path", sorted(RULES.rglob("*.py")), ids=lambda path: str(path.relative_to(RULES)))
def test_no_arithmetic_that_depends_on_company(path):
    """In ``rules`` vessels are added one after another: numpy's reductions change digits with shape and processor."""
    assert company_dependent(path.read_text(encoding="utf-8")) == []


def test_such_arithmetic_would_be_seen():
    source = "from numpy.linalg import solve\na = x.sum() + np.mean(x)\nb = x @ y\nc = np.linalg.det(x)\n"
    assert sorted(company_dependent(source)) == ["@", "linalg", "mean", "numpy.linalg", "sum"]


def test_no_built_in_sum_of_measurements():
    """The built-in sum rounds differently from one version of the language to the next; ``math.fsum`` does not."""
    for folder in ("solve", "uncertainty"):
        for path in sorted((RULES / folder).glob("*.py")):
            for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
                called = isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "sum"
                assert not called, f"{path.name}:{getattr(node, 'lineno', 0)}"
