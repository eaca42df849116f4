"""Checks of the points and the straight line through them."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from scipy import special

from spikeward.rules.checks.subject import (
    BLANK_ROLES,
    Subject,
    as_percent,
    capital,
    graded,
    near_limits,
    not_evaluated,
    not_straight,
    number,
    plain,
    source_of,
)
from spikeward.rules.outcomes import FAIL, PASS, WARN, Check, Estimate, Point
from spikeward.rules.rounding import figure, percent
from spikeward.rules.rulebook import Limits
from spikeward.rules.solve.vessel_signal import unusable, vessel_name, why_unusable
from spikeward.rules.words import counted


def fitted_points(subject: Subject) -> tuple[Point, ...]:
    """The vessels that the line was fitted to."""
    return tuple(point for point in subject.solved.points if not point.excluded)


def covers_zero(estimate: Estimate) -> bool:
    """Whether a content cannot be told from zero by its own interval."""
    return estimate.interval is not None and estimate.interval[0] <= 0


def near_zero(subject: Subject) -> str:
    """Why a ratio to the content would mean nothing, or an empty text."""
    content = subject.solved.content
    if subject.role in BLANK_ROLES:
        return f"a {subject.role.replace('_', ' ')} is expected near zero"
    if content is None:
        return "there is no content"
    if content.content <= 0 or covers_zero(content):
        return "the content cannot be told from zero"
    return ""


def no_line(subject: Subject) -> bool:
    """Whether no line was drawn, so that nothing can be said about it."""
    return subject.solved.slope is None


def no_straight_line(subject: Subject) -> str:
    """Why the points cannot be held against one straight line, or an empty text."""
    if why := not_straight(subject):
        return why
    runs = {point.block for point in fitted_points(subject)}
    if len(runs) > 1:
        return f"the series was measured in {len(runs)} runs, each with a line of its own"
    return "there is no line" if no_line(subject) else ""


def unread_vessel(subject: Subject) -> bool:
    """Whether there is no number because a vessel that counts has no measured signal."""
    kept = [vessel for vessel in subject.solved.prepared.vessels if not vessel.excluded and vessel.readings]
    without = [reading for vessel in kept if (reading := unusable(vessel.readings)) is not None]
    return any(subject.solved.no_number.endswith(why_unusable(reading)) for reading in without)


def solved(subject: Subject, limits: Limits) -> Check:
    """Whether the line gives a number at all."""
    if subject.solved.no_number:
        remedy = "Look at the vessels of this series; repeat it if nothing explains them"
        reason = subject.solved.no_number.rstrip(".")
        if unread_vessel(subject):
            # the vessel's own advice, so that no other stands beside it
            reason, _, advice = reason.rpartition(": ")
            remedy = capital(advice)
        sentence = f"There is no number: {reason}." if ": " not in reason else f"There is no number. {capital(reason)}."
        return plain("solved", FAIL, sentence, remedy, "theory")
    return plain("solved", PASS, "The line gives a content.")


def levels(subject: Subject, limits: Limits) -> Check:
    """Vessels that carry the line; below what the design needs it fails whatever the rules say."""
    if unread_vessel(subject):
        return not_evaluated("levels", "there is no line")
    points = fitted_points(subject)
    additions = len({point.x for point in points})
    told = f"{counted(len(points), 'vessel')} with {counted(additions, 'different addition')} carry the line"
    single = subject.solved.prepared.design == "single"
    needed = 2 if single else 3
    remedy = "Measure the missing levels"
    if not single and len(points) == additions == 2 and min(point.x for point in points) == 0:
        # Only such a pair is a single addition, as the rule file understands it.
        remedy += ", or declare the design single"
    if len(points) < needed:
        told = f"{told}; the design needs at least {needed}."
        return Check("levels", FAIL, told, float(len(points)), "vessels", f"at least {needed}", "the design", remedy)
    if single:
        return plain("levels", PASS, f"One addition, as the design says: {told}.", source="the design")
    return graded("levels", float(len(points)), limits, told, remedy, unit="vessels")


def response(subject: Subject, limits: Limits) -> Check:
    """Whether the signal answers to the additions: g = t² u(b)² / b², the slope's relative half-width squared."""
    g, slope = subject.solved.g, subject.solved.slope
    remedy = "Add more standard, or measure more vessels; look for a lost addition or a dead signal"
    if why := not_straight(subject):
        return not_evaluated("response", f"{why}, which has no one slope")
    if slope is not None and slope <= 0:
        return plain("response", FAIL, "The signal does not rise with the additions.", remedy, "theory")
    if g is None or slope is None:
        if no_line(subject):
            return not_evaluated("response", "there is no line")
        return not_evaluated(
            "response", "the scatter about the line is not known", "Four or more vessels show the scatter"
        )
    unbounded = number(limits, "fail_above")
    sentence = f"The slope is known to ± {percent(math.sqrt(g))} (g {figure(g, 2)})"
    if unbounded is not None and g >= unbounded:
        told = f"fails from g {figure(unbounded)}"
        return Check(
            "response", FAIL, f"{sentence}: it does not differ from zero ({told}).", g, "1", told,
            source_of(limits, "fail_above", "response"), remedy,
        )  # fmt: skip
    return graded("response", g, limits, sentence, remedy)


def correlation(subject: Subject, limits: Limits) -> Check:
    """The correlation coefficient, where a method demands one; it is no proof of a straight line."""
    r = subject.solved.correlation
    if why := no_straight_line(subject):
        return not_evaluated("correlation", why)
    if r is None or subject.solved.degrees_of_freedom < 1:
        return not_evaluated("correlation", "two points always lie on a line", "Measure more levels")
    show = f"r is {r:.5f} over {len(fitted_points(subject))} vessels"
    remedy = "Find the vessel that lies off the line, or the curvature; repeat the series"
    return graded("correlation", r, limits, show, remedy)


def residual(subject: Subject, limits: Limits) -> Check:
    """The largest residual over the fitted signal.

    Small signals are held against ``floor`` times the largest fitted signal, so that the noise at a content near zero
    is not taken for a slip.
    """
    points = [point for point in fitted_points(subject) if point.fitted is not None]
    if subject.solved.prepared.response == "log":
        return not_evaluated("residual", f"{not_straight(subject)}, and a share of a potential means nothing")
    if no_line(subject) and not points:
        return not_evaluated("residual", "there is no line")
    if subject.solved.degrees_of_freedom < 1 or not points:
        return not_evaluated("residual", "no degree of freedom is left for residuals", "Measure more levels")
    fitted = [abs(_fitted(point)) / point.factor for point in points]  # as signals, before the volumes
    floor = (number(limits, "floor") or 0.0) * max(fitted)
    scale = [max(one, floor) for one in fitted]
    if min(scale) == 0:
        return not_evaluated("residual", "the fitted signal of a vessel is zero")
    sizes = [abs(point.y - _fitted(point)) / point.factor / size for point, size in zip(points, scale, strict=True)]
    largest = max(sizes)
    where = _vessel(points[sizes.index(largest)])
    against = "its fitted signal"
    if floor > fitted[sizes.index(largest)]:
        against = f"{percent(number(limits, 'floor') or 0.0)} of the largest fitted signal"
    sentence = f"The largest residual, of {where}, is {near_limits(largest, limits)} of {against}"
    remedy = f"Look for a pipetting slip, first in {where}; prepare and measure it again"
    return graded("residual", largest, limits, sentence, remedy, show=as_percent)


def studentised(subject: Subject, limits: Limits) -> Check:
    """The largest internally studentised residual against its critical value at two levels of significance.

    With n vessels it cannot exceed sqrt(n - 2). Critical value by Bonferroni's bound (Cook and Weisberg, Residuals and
    Influence in Regression, 1982, 2.2.2): t sqrt((n-2)/(n-3+t²)) with t at p/(2n) and n-3 degrees of freedom. With the
    weights w of the line the leverage is w (1/Sw + (x - xbar)²/Sxx) and the residual counts sqrt(w) times. The scatter
    is always that of the residuals themselves, also where the uncertainty comes from elsewhere.
    """
    if why := no_straight_line(subject):
        return not_evaluated("studentised", why)
    points = [point for point in fitted_points(subject) if point.fitted is not None]
    n, needed = len(points), int(number(limits, "needs_vessels") or 5)
    scattered = n >= max(needed, 4) and subject.solved.residual_sd
    ratios = _studentised_ratios(points) if scattered else None
    if ratios is None:
        bound = f"; with {n} it cannot exceed {math.sqrt(n - 2):.2f}" if n > 2 else ""
        return not_evaluated(
            "studentised", f"no power below {needed} vessels{bound}" if n < needed else "there is no scatter",
            f"{needed} or more vessels",
        )  # fmt: skip
    largest = max(ratios)
    where = _vessel(points[ratios.index(largest)])
    sentence = f"The largest studentised residual is {largest:.3f}, of {where}"
    return _significance(
        "studentised", largest, limits, sentence, f"Look for a slip in {where}; prepare and measure it again",
        lambda p: _studentised_critical(p, n),
    )  # fmt: skip


def _studentised_ratios(points: Sequence[Point]) -> list[float] | None:
    """Internally studentised residuals without their sign; None where there is no scatter."""
    w = [point.weight for point in points]
    total = math.fsum(w)
    x_mean = math.fsum(v * point.x for v, point in zip(w, points, strict=True)) / total
    sxx = math.fsum(v * (point.x - x_mean) ** 2 for v, point in zip(w, points, strict=True))
    left = [math.sqrt(v) * abs(point.y - _fitted(point)) for v, point in zip(w, points, strict=True)]
    s = math.hypot(*left) / math.sqrt(len(points) - 2)
    if not s > 0.0 or not sxx > 0.0:
        return None
    leverages = [v * (1 / total + (point.x - x_mean) ** 2 / sxx) for v, point in zip(w, points, strict=True)]
    return [one / (s * math.sqrt(max(1 - leverage, 1e-12))) for one, leverage in zip(left, leverages, strict=True)]


def _studentised_critical(p: float, n: int) -> float:
    t = -float(special.stdtrit(n - 3, p / (2 * n)))
    return t * math.sqrt((n - 2) / (n - 3 + t * t))


def _significance(
    name: str, observed: float, limits: Limits, sentence: str, remedy: str, critical: Callable[[float], float]
) -> Check:
    """Warn and fail at the critical values of ``warn_p`` and ``fail_p``."""
    at = {limit: p for limit in ("fail_p", "warn_p") if (p := number(limits, limit)) is not None}
    values = {limit: critical(p) for limit, p in at.items()}
    broken = [limit for limit in at if observed > values[limit]]
    told = "; ".join(f"{limit[:4]}s above {values[limit]:.3f}" for limit in sorted(at, reverse=True))
    verdict = PASS if not broken else FAIL if broken[0] == "fail_p" else WARN
    source = source_of(limits, broken[0] if broken else "warn_p", name)
    return Check(
        name, verdict, f"{sentence} ({told}).", observed, "1", told, source, "" if verdict == PASS else remedy
    )


def span(subject: Subject, limits: Limits) -> Check:
    """The top addition over the content: too little extrapolates far, too much crowds the content into a corner.

    The content is that of the test solution, blank included: it decides how far the line is extrapolated.
    """
    content, points = subject.solved.content, fitted_points(subject)
    if subject.solved.prepared.response == "log":
        return not_evaluated("span", f"{not_straight(subject)}; its steps are judged in mV")
    if why := near_zero(subject):
        return not_evaluated("span", why)
    if content is None or not points:
        return not_evaluated("span", "there is no content")
    ratio = max(point.x for point in points) / content.content
    low, high = "Repeat with larger additions", "Repeat with smaller additions, or with more test solution"
    sentence = f"The top addition is {figure(ratio)} times the content of the test solution"
    return graded("span", ratio, limits, sentence, low if ratio < 1 else high)


def matrix_spread(subject: Subject, limits: Limits) -> Check:
    """How much the share of test solution differs between vessels: volumes are corrected for, the matrix is not."""
    shares = [point.matrix_share for point in fitted_points(subject)]
    if subject.solved.prepared.response == "log":
        why = f"{not_straight(subject)}, and its buffer is what holds the matrix"
        return not_evaluated("matrix_spread", why)
    if len(shares) < 2:
        return not_evaluated("matrix_spread", "fewer than two vessels are known")
    spread = max(shares) / min(shares) - 1
    sentence = f"The share of test solution differs by {near_limits(spread, limits)} between vessels"
    if spread == 0:
        sentence = "Every vessel holds the same share of test solution"
    return graded(
        "matrix_spread", spread, limits, sentence,
        "Take equal aliquots and make every vessel up to one volume, so that all hold the same matrix",
        show=as_percent,
    )  # fmt: skip


def _vessel(point: Point) -> str:
    return vessel_name(point.level, point.vessel, point.block)


def _fitted(point: Point) -> float:
    return point.fitted if point.fitted is not None else 0.0
