"""`demo`: an invented night is played into a folder while the daemon watches it; at the end the batches are closed."""

from __future__ import annotations

import shutil
import threading
import time
from collections import Counter
from collections.abc import Sequence
from pathlib import Path

from spikeward.daemon.demo.night import Night, night, play
from spikeward.daemon.names import BOARD, SUMMARY, batch_stem, series_stem
from spikeward.daemon.opening import open_station
from spikeward.daemon.solving import Solved
from spikeward.daemon.sweep import Pauses, sweep
from spikeward.daemon.trouble import Trouble
from spikeward.daemon.watch import Watching, stopping
from spikeward.daemon.workers import Readers
from spikeward.rules.outcomes import FAIL

_QUIET = 3.0  # s without anything to do, after the last file


def demo(folder: str, pace: float, seed: int) -> int:
    """Play the night; the exit code.

    Raises
    ------
    Trouble : the folder is not empty, or cannot be made
    """
    home = Path(folder)
    if not folder:
        raise Trouble("the demo needs a folder; give the name of a new one")
    if home.exists() and (not home.is_dir() or any(home.iterdir())):
        raise Trouble(f"{folder} is not an empty folder; give the name of a new one")
    invented = night(seed)
    try:
        (home / "inbox").mkdir(parents=True)
        (home / "rules.yaml").write_text(invented.rules, encoding="utf-8")
    except OSError as error:
        raise Trouble(f"{folder}: {error.strerror}; give a folder that can be written") from None
    minutes = invented.deliveries[-1].minute
    told = f"about {minutes / pace:.0f} s" if pace else "all at once"
    print(
        f"An invented night of {len(invented.deliveries)} deliveries is played into {home / 'inbox'} ({told}).",
        flush=True,
    )
    with Readers(1) as readers:
        _watch(home, invented, pace, readers)
        with open_station(str(home / "rules.yaml")) as opened:
            solved = sweep(opened.pipeline, readers, Pauses(time.monotonic, time.sleep), close=True)
    for line in _where_to_look(home, solved):
        print(line)
    return 0


def _watch(home: Path, invented: Night, pace: float, readers: Readers) -> None:
    """The daemon in this thread, the instruments in another; ends when all is delivered and nothing is left to do."""
    stop, delivered = threading.Event(), threading.Event()

    def deliver() -> None:
        play(invented, home / "inbox", pace, lambda seconds: stop.wait(seconds))
        delivered.set()

    with open_station(str(home / "rules.yaml")) as opened, stopping(stop, opened.journal.hurry):
        watching = Watching(opened, readers, time.monotonic)
        player = threading.Thread(target=deliver, name="instruments", daemon=True)
        player.start()
        ender = threading.Thread(target=_end, args=(watching, delivered, stop), daemon=True)
        ender.start()
        watching.run(stop)
        player.join(5.0)


def _end(watching: Watching, delivered: threading.Event, stop: threading.Event) -> None:
    delivered.wait()
    quiet_since = time.monotonic()
    while time.monotonic() - quiet_since < _QUIET and not stop.wait(0.1):
        if watching.busy:
            quiet_since = time.monotonic()
    stop.set()


def _where_to_look(home: Path, solved: Sequence[Solved]) -> list[str]:
    width = shutil.get_terminal_size().columns
    lines = ["The night is over. Where to look:"]
    for one in solved[:4]:
        counts = Counter(outcome.verdict for outcome in one.outcome.outcomes)
        told = ", ".join(f"{number} {verdict}" for verdict, number in sorted(counts.items()))
        folder = home / one.batch.key.root / one.batch.key.folder
        lines.append(f"  {folder / (batch_stem(one.batch.key) + BOARD)}   {told}")
    failed = next((outcome for one in solved for outcome in one.outcome.outcomes if outcome.verdict == FAIL), None)
    if failed is not None:
        folder = home / failed.key.root / failed.key.folder
        lines.append(f"  {folder / (series_stem(failed.key) + SUMMARY)}   why a series failed"[: max(width, 80)])
    lines.append(f"  {home / 'inbox'}   a flag, a result and a summary beside the data of every series")
    lines.append(
        f"  {home / 'rules.yaml'}   the rule file of this laboratory; try: spikeward vet {home / 'rules.yaml'}"
    )
    return lines[:10]
