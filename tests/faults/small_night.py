"""A small made-up night: series of four levels, one file for each vessel, signals that scatter little."""

from __future__ import annotations

from collections.abc import Mapping

from spikeward.daemon.demo.chance import Chance

HEAD = "Solution,Element,Signal,Unit,Measured,Exported\n"

RULES = r"""station: Made-up bench
watch:
  - {folder: inbox, settle: 1 s, events: poll}
readers:
  counts:
    files: "*.csv"
    header_contains: [Solution, Signal]
    columns: {solution: Solution, analyte: Element, signal: Signal, unit: Unit, measured_at: Measured,
              processed_at: Exported}
    time_zone: Europe/Berlin
names:
  - {role: bracket, match: '(?P<batch>N\d+)_BR(?P<sample>\d+)'}
  - {role: sample, match: '(?P<batch>N\d+)_(?P<sample>\d+)_A(?P<level>\d+)(?P<vessel>[a-z])?'}
series:
  lapses_after: 60 min
  closes_with: []
standards:
  Mix: {contents: {Cd: 10 mg/L, Pb: 10 mg/L}}
preparations:
  - design: flasks
    aliquot: 5 mL
    final: 25 mL
    additions: {standard: Mix, levels: {0: 0 mL, 1: 0.5 mL, 2: 1 mL, 3: 1.5 mL}}
checks:
  use: pack:general
"""
CLOSING = RULES.replace("closes_with: []", "closes_with: [bracket]").replace(
    "checks:\n", "brackets:\n  contents: {Cd: 0.2 mg/L, Pb: 0.2 mg/L}\nchecks:\n"
)
"""The same, but a batch waits for a bracket later than every vessel."""

SPANNING = RULES.replace("{folder: inbox,", "{folder: inbox, output: results, spans_folders: yes,")
"""The same, but series may come from several sub-folders; results stand apart."""

LEVELS = (0, 1, 2, 3)


def row(solution: str, signal: float, minute: int, exported: int | None = None, element: str = "Cd") -> str:
    """One reading; minutes of the night."""
    times = [
        f"2031-03-02T{20 + at // 60:02d}:{at % 60:02d}:00" for at in (minute, minute if exported is None else exported)
    ]
    return f"{solution},{element},{signal:.5g},cps,{times[0]},{times[1]}\n"


def vessel(batch: str, sample: int, level: int, content: float = 0.08, slip: float = 1.0, again: int = 0) -> bytes:
    """The export of one vessel: ``slip`` is a factor of its signal; exported ``again`` minutes after measuring."""
    chance = Chance(1000 * sample + level)
    signal = 20000.0 * (content + 0.2 * level) * chance.noise(0.002) * slip
    minute = 10 + 8 * (sample % 20) + level
    return (HEAD + row(f"{batch}_{sample:02d}_A{level}", signal, minute, minute + again)).encode()


def bracket(batch: str, number: int, minute: int) -> bytes:
    """The export of one bracket."""
    return (HEAD + row(f"{batch}_BR{number}", 4000.0 + number, minute)).encode()


def series(batch: str, sample: int, folder: str = "", **changes: float) -> dict[str, bytes]:
    """The files of one series."""
    below = f"{folder}/" if folder else ""
    return {f"{below}{batch}_{sample:02d}_A{level}.csv": vessel(batch, sample, level, **changes) for level in LEVELS}


def batch(name: str, samples: int, folder: str = "", brackets: bool = False) -> dict[str, bytes]:
    """The files of one batch."""
    below = f"{folder}/" if folder else ""
    files: dict[str, bytes] = {}
    if brackets:
        files[f"{below}{name}_BR1.csv"] = bracket(name, 1, 1)
    for sample in range(1, samples + 1):
        files |= series(name, sample, folder)
    if brackets:
        files[f"{below}{name}_BR2.csv"] = bracket(name, 2, 200)
    return files


def renamed(files: Mapping[str, bytes], folder: str) -> dict[str, bytes]:
    """The same files in another folder."""
    return {f"{folder}/{path}": content for path, content in files.items()}
