"""``SERIES.summary.html``: everything that stands behind one verdict, on one page that needs nothing else."""

from __future__ import annotations

from collections.abc import Sequence

from spikeward.daemon.pages.cautions import CAUTIONS
from spikeward.daemon.pages.chart import addition_plot, caption
from spikeward.daemon.pages.facts import Revision
from spikeward.daemon.pages.flag import result_name
from spikeward.daemon.pages.history_marks import HISTORY_ENDS, HISTORY_STARTS
from spikeward.daemon.pages.template import page
from spikeward.rules.outcomes import Outcome
from spikeward.rules.records import MEASURED, Reading


def render_summary(outcome: Outcome, history: Sequence[Revision], station: str) -> bytes:
    """The page of one series: verdict first, then results, checks, vessels, readings, and its history last.

    Parameters
    ----------
    history : published revisions, oldest first; the only part that may differ between two trees of the same files
    station : the name that the rule file gives
    """
    return page(
        "summary.html.jinja",
        outcome=outcome,
        results=[
            (result, result_name(result), addition_plot(result, f"plot-{number}"), caption(result))
            for number, result in enumerate(outcome.results, 1)
        ],
        readings=[
            (f"{vessel.level}{vessel.vessel}", reading) for vessel in outcome.vessels for reading in vessel.readings
        ],
        context=[(reading.series.role, reading) for reading in outcome.context],
        signal=_signal,
        cautions=CAUTIONS,
        history=sorted(history, key=lambda revision: revision.number, reverse=True),
        history_marks=(HISTORY_STARTS, HISTORY_ENDS),
        station=station,
    )


def _signal(reading: Reading) -> str:
    """A cell as the export wrote it, with its unit, and what it is where it is no measured number."""
    text = f"{reading.text} {reading.unit}".strip()
    return text if reading.qualifier == MEASURED else f"{text} ({reading.qualifier})"
