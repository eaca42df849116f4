"""Invented outcomes for the pages, ugly cases first. Nothing here is calculated by the solver."""

from __future__ import annotations

import hashlib
import math
from dataclasses import replace

from spikeward.daemon.pages.facts import Notice, Revision
from spikeward.rules.outcomes import BatchOutcome, Check, Estimate, Outcome, Point, Result, VesselReport
from spikeward.rules.records import NOT_DETECTED, OVER_RANGE, BatchKey, Reading, SeriesKey

STATION = "Estuary bench, atomic absorption"
ROOT, FOLDER, BATCH = "inbox", "2031/week 07", "MD12"
HOSTILE = "</style><script>document.title='x'</script>\"'><img src=x onerror=alert(1)>&amp;"
TURNED = "07\u202etxt.exe\x07\nline two\t\x00\udcff {{ 7*7 }} {% raw %}"

PASSED = Check(
    "response", "pass", "The slope is 31 times its uncertainty (fails at g 1 and above).", 0.0193, "1",
    "warns above 0.1; fails above 1", "theory",
)  # fmt: skip
WARNED = Check(
    "residual", "warn", "Vessel 2b lies 6.2 % off the line (warns above 5 %; fails above 10 %).", 0.0621, "1",
    "warns above 5 %; fails above 10 %", "common practice", "Read vessel 2b again",
)  # fmt: skip
FAILED = Check(
    "linear_top", "fail", "Vessel 3 reads 1.12 Abs, above the linear top 0.80 Abs.", 1.12, "Abs",
    "fails above 0.80 Abs", "rule file", "Dilute the digest 1 + 1 and run the series again",
)  # fmt: skip
SILENT = Check(
    "curvature", "not evaluated", "Not evaluated: 4 vessels leave 2 degrees of freedom, too few to show curvature.",
    remedy="6 or more vessels give it power",
)  # fmt: skip
COMPLETE = Check("completeness", "pass", "Every level, reading and bench value is there.")


def digest_of(text: str) -> str:
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def series_key(sample: str, role: str = "sample") -> SeriesKey:
    return SeriesKey(ROOT, FOLDER, BATCH, role, sample)


def reading(key: SeriesKey, level: str, vessel: str, signal: float | None, number: int, **more: object) -> Reading:
    known = {
        "series": key, "level": level, "vessel": vessel, "injection": "", "reading": str(number),
        "solution": f"{key.batch}_{key.sample}_A{level}{vessel}_r{number}", "analyte": "Cd", "line": "Cd 226.5",
        "unit": "Abs", "signal": signal, "text": "n.d." if signal is None else f"{signal:.4f}", "qualifier": "",
        "readings": 1, "sd": None, "measured_at": f"2031-02-11T22:1{number}:00Z", "processed_at": "", "order": None,
        "values": (), "already": (), "path": f"aas/{key.batch}.csv", "row": 11 + number,
        "digest": digest_of(f"{key.sample}{level}{vessel}{number}"),
    }  # fmt: skip
    return Reading(**(known | more))  # type: ignore[arg-type]


def straight(xs: list[float], ys: list[float]) -> tuple[float, float]:
    x_mean, y_mean = math.fsum(xs) / len(xs), math.fsum(ys) / len(ys)
    slope = math.fsum((x - x_mean) * (y - y_mean) for x, y in zip(xs, ys, strict=True))
    slope /= math.fsum((x - x_mean) ** 2 for x in xs)
    return slope, y_mean - slope * x_mean


def cadmium(xs: list[float], ys: list[float], vessels: str = "", excluded: str = "", **more: object) -> Result:
    """A line through the points; the last one is left out where ``excluded`` says who did so."""
    kept = len(xs) - bool(excluded)
    slope, intercept = straight(xs[:kept], ys[:kept])
    content = intercept / slope
    points = tuple(
        Point(
            str(place),
            vessels[place : place + 1],
            x,
            y,
            None if place >= kept else intercept + slope * x,
            y / 2.5,
            2,
            0.0012,
            0.4,
            excluded if place >= kept else "",
        )  # fmt: skip
        for place, (x, y) in enumerate(zip(xs, ys, strict=True))
    )
    made = Result(
        "Cd", "Cd 226.5", "pass",
        Estimate(content, "ug/L", content * 0.033, content * 0.078, 2.4, (content * 0.925, content * 1.081)),
        Estimate(content * 0.1, "mg/kg", content * 0.0033, content * 0.0078, 2.4, (content * 0.0925, content * 0.1081)),
        "", "Abs", "ug/L", "dry matter", slope, abs(slope) * 0.02, intercept, abs(intercept) * 0.03, 0.0031, 0.99942,
        kept - 2, points, (PASSED, SILENT), 0.0021, 0.03, "0.5012 g made up to 50 mL; dry matter 94.2 %",
        "Cd 226.5 content told in one sentence.",
    )  # fmt: skip
    return replace(made, **more)  # type: ignore[arg-type]


def outcome(sample: str, verdict: str, *results: Result, role: str = "sample", **more: object) -> Outcome:
    key = series_key(sample, role)
    vessels = tuple(
        VesselReport(
            str(level),
            "",
            10.0,
            0.25 * level,
            25.0,
            "Cd 10",
            tuple(reading(key, str(level), "", 0.1 + 0.105 * level + 0.001 * number, number) for number in (1, 2)),
        )  # fmt: skip
        for level in range(4)
    )
    made = Outcome(
        key, verdict, verdict, True, (), "flasks", f"{verdict.upper()}. {BATCH}-{sample} in one sentence.", results,
        (COMPLETE,), vessels, (reading(series_key("1", "background"), "", "", 0.0021, 1),), (),
        digest_of(sample), digest_of("rules"),
    )  # fmt: skip
    return replace(made, **more)  # type: ignore[arg-type]


def _plain() -> Outcome:
    return outcome("07", "pass", cadmium([0.0, 10.0, 20.0, 30.0], [0.246, 0.349, 0.457, 0.559]))


def _waiting() -> Outcome:
    withheld = "the series is not complete; it lacks level 3"
    result = replace(
        cadmium([0.0, 10.0, 20.0], [0.246, 0.349, 0.457], checks=(WARNED,)), verdict="waiting", content=None,
        in_sample=None, no_number=withheld, blank=None,
    )  # fmt: skip
    return outcome(
        "08", "waiting", result, so_far="warn", final=False,
        waiting_for=("level 3", "a closing bracket later than every vessel"),
    )  # fmt: skip


def _failed() -> Outcome:
    failed = cadmium(
        [0.0, 10.0, 10.0, 20.0, 20.0, 30.0], [0.246, 0.352, 0.346, 0.441, 0.447, 1.12], " abab", verdict="fail",
        excluded="R. Example, 2031-02-12: spilled", checks=(FAILED, WARNED, PASSED, SILENT),
    )  # fmt: skip
    lead = Result(
        "Pb", "Pb 283.3", "fail", None, None, "the slope does not differ from zero", "Abs", "ug/L", "", 1e-6, 1e-5,
        0.02, 0.001, 0.001, 0.1, 1, checks=(SILENT,), points=cadmium([0.0, 1.0, 2.0], [0.02, 0.023, 0.021]).points,
        sentence="Pb 283.3: no number, because the slope does not differ from zero.",
    )  # fmt: skip
    return outcome("09", "fail", failed, lead, notes=("level 3 is excluded by decision (R. Example)",))


def _bare() -> Outcome:
    """A single addition: no uncertainty, no way back, nothing known about volumes."""
    result = replace(
        cadmium([0.0, 10.0], [0.2, 0.3]), in_sample=None, basis="", preparation="", blank=None, background=None,
        content=Estimate(20.0, "ug/L", reason="one addition leaves no degree of freedom"), slope_uncertainty=None,
        intercept_uncertainty=None, residual_sd=None, correlation=None, degrees_of_freedom=0, line="", checks=(),
    )  # fmt: skip
    return outcome("10", "warn", result, vessels=(), context=(), checks=(), design="")


def _empty() -> Outcome:
    key = series_key("11")
    vessel = VesselReport(
        "0", "", None, None, None, "",
        (
            reading(key, "0", "", None, 1, qualifier=NOT_DETECTED),
            reading(key, "0", "", None, 2, qualifier=OVER_RANGE, text="OVER", measured_at=""),
        ),
    )  # fmt: skip
    return outcome("11", "fail", vessels=(vessel,), context=(), so_far="fail", final=False, waiting_for=("level 1",))


def _hostile() -> Outcome:
    check = Check(
        HOSTILE, "warn", HOSTILE, math.nan, HOSTILE, HOSTILE, HOSTILE, HOSTILE,
    )  # fmt: skip
    result = replace(
        cadmium([0.0, 10.0, 20.0], [0.1, 0.2, 0.3], HOSTILE, excluded=HOSTILE), analyte=HOSTILE, line=TURNED,
        basis=HOSTILE, signal_unit=HOSTILE, preparation=HOSTILE, sentence=TURNED, checks=(check,), slope=math.inf,
        in_sample=Estimate(math.nan, HOSTILE, math.inf, math.inf, math.nan, (-math.inf, math.inf), 0.95, HOSTILE),
    )  # fmt: skip
    key = SeriesKey(ROOT, f"../{HOSTILE}", f"={TURNED}", "sample", f"@{HOSTILE}{TURNED}")
    read = reading(key, HOSTILE, TURNED, 1e-310, 1, solution=TURNED, path=f"{HOSTILE}/{TURNED}", unit=HOSTILE)
    read = replace(read, analyte=HOSTILE, line="", text="=cmd|' /C calc'!A0", measured_at=HOSTILE)
    vessel = VesselReport(HOSTILE, TURNED, math.nan, math.inf, -math.inf, HOSTILE, (read,), HOSTILE)
    return outcome(
        "x", "warn", result, key=key, checks=(check,), vessels=(vessel,), context=(read,), notes=(HOSTILE, TURNED),
        waiting_for=(HOSTILE,), final=False, sentence=f"{HOSTILE}{TURNED}", design=HOSTILE, inputs_digest=HOSTILE,
    )  # fmt: skip


def _extreme() -> Outcome:
    tiny = cadmium([0.0, 1e-12, 2e-12, 3e-12], [2e-9, 3.02e-9, 3.97e-9, 5e-9], " ab")
    huge = replace(cadmium([0.0, 1e9, 2e9], [4e12, 5e12, 6.1e12]), analyte="Na", line="")
    wide = cadmium([0.0, 1.0, 2.0], [0.30, 0.33, 0.40])
    wide = replace(wide, analyte="Cu", line="", content=Estimate(6.0, "ug/L", 2.0, 30.0, 15.0, (-2.0, 58.0)))
    return outcome("12", "pass", tiny, huge, wide)


OUTCOMES: dict[str, Outcome] = {
    "hostile": _hostile(),
    "failed": _failed(),
    "waiting": _waiting(),
    "empty": _empty(),
    "bare": _bare(),
    "extreme": _extreme(),
    "plain": _plain(),
}

HISTORY = (
    Revision(1, "2031-02-11T22:20:05Z", "pass", digest_of("one"), "the series became complete"),
    Revision(
        2, "2031-02-12T06:02:41Z", "fail", digest_of("two"), f"inbox/{HOSTILE} arrived", ("level 3 is new", TURNED)
    ),
)
NOTICES = (
    Notice(
        "unread", "aas/night.csv", "row 14, column Signal: '0,4.1' can be read both ways; declare the decimal sign."
    ),
    Notice("unnamed", TURNED, "no naming rule takes this solution; add a rule under names", "2031-02-11T23:00:00Z"),
    Notice("source missing", HOSTILE, "restore the file, or delete the result's files", "2031-02-12T01:00:00Z"),
)
BATCH_OUTCOME = BatchOutcome(
    BatchKey(ROOT, FOLDER, BATCH), False, ("a closing bracket later than every vessel",), tuple(OUTCOMES.values()),
    (
        Check("brackets", "pass", "The brackets of the batch agree within 2.1 % (warns above 5 %).", 0.021, "1", "5 %"),
        Check("reference", "not evaluated", "Not evaluated: no reference was measured."),
    ),
)  # fmt: skip
LINKS = {
    one.key: f"MD12_{name}.summary.html" if name != "hostile" else 'javascript:alert(1)//%2E#?<">.summary.html'
    for name, one in OUTCOMES.items()
    if name != "empty"
}
