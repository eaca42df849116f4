"""What people decided beside the data: a version that holds together is adopted once, in the ledger, and then stands.

A decisions file is a list, each entry naming what is decided, by whom, when and why:

    - {exclude: N1_07_A3, by: N. Invented, on: 2026-03-02, why: flask was cracked}
    - {prefer: exports/run2.csv, by: N. Invented, on: 2026-03-02, why: re-integrated}

A version that does not hold together is refused whole: the last good one stands, and the board says what is wrong.
"""

from __future__ import annotations

import datetime
import hashlib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from spikeward.daemon.disk import Disk
from spikeward.daemon.holdings import Holdings, Place
from spikeward.daemon.ledger import EventLog
from spikeward.daemon.names import shown
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.rule_file.yaml_text import Node, compose
from spikeward.daemon.station import Clock
from spikeward.rules.records import Decision

_LARGEST = 1 << 20
KINDS = ("exclude", "prefer")
_KEYS = ("by", "on", "why")
_UNKNOWN = "no solution and no file is named {}; the decision has no effect. Correct the name"


@dataclass(slots=True)
class DecisionBook:
    """The decisions in force, by the folder that their file lies in."""

    disk: Disk
    ledger: EventLog
    clock: Clock
    adopted: dict[Place, tuple[Decision, ...]] = field(default_factory=dict)
    refused: dict[Place, str] = field(default_factory=dict)
    _digests: dict[Place, str] = field(default_factory=dict)

    def take(self, event: Mapping[str, Any]) -> None:
        """Enter an adopted version from the ledger; events of other kinds change nothing."""
        if event["event"] == "decisions":
            place = (event["root"], event["path"])
            self._digests[place] = event["digest"]
            self.adopted[place] = tuple(read_decisions(event["text"], event["path"])[0])

    def of(self, root: str, folder: str) -> tuple[Decision, ...]:
        """The decisions that apply to an output folder: of its own file and of those in the folders above."""
        return tuple(
            decision
            for (where, path), decisions in sorted(self.adopted.items())
            if where == root and _covers(_folder(path), folder)
            for decision in decisions
        )

    def notices(self, holdings: Holdings) -> list[tuple[str, str, Notice]]:
        """Refused versions, and decisions about solutions or files that nobody knows, as (root, folder, notice)."""
        found = [
            (root, _folder(path), Notice("decision", shown(path), sentence))
            for (root, path), sentence in self.refused.items()
        ]
        for (root, path), decisions in self.adopted.items():
            if not decisions:
                continue
            known = {where for root_, where in holdings.contents if root_ == root} | {
                reading.solution
                for place, named in holdings.named.items()
                if place[0] == root
                for reading in named.readings
            }
            found += [
                (
                    root,
                    _folder(path),
                    Notice("decision", shown(path), f"line {each.line}: {_UNKNOWN.format(shown(each.target))}"),
                )
                for each in decisions
                if each.target not in known
            ]
        return found

    def see(self, place: Place, path: str) -> str | None:
        """Look at a decisions file; the folder that a newly adopted version applies to, or None."""
        try:
            data = self.disk.read(path, _LARGEST)
            text = data.decode("utf-8")
        except UnicodeDecodeError:
            self.refused[place] = f"{shown(place[1])} is not UTF-8; save it as UTF-8. The decisions before it stand"
            return None
        except OSError as error:
            self.refused[place] = f"{shown(place[1])}: {error.strerror}; make it readable and save it again"
            return None
        decisions, problems = read_decisions(text, place[1])
        if problems:
            self.refused[place] = f"{'; '.join(problems)}. The decisions before it stand"
            return None
        self.refused.pop(place, None)
        digest = hashlib.sha256(data).hexdigest()
        if self._digests.get(place) == digest:
            return None
        event = {
            "event": "decisions", "root": place[0], "path": place[1], "digest": digest, "text": text,
            "at": self.clock(),
        }  # fmt: skip
        self.ledger.append(event)
        self.take(event)
        return _folder(place[1])


def read_decisions(text: str, name: str) -> tuple[list[Decision], list[str]]:
    """The decisions of a file, and a sentence for everything that is wrong in it."""
    node, problems = compose(text, name)
    sentences = [problem.line_text() for problem in problems]
    if node is None or sentences:
        return [], sentences
    if node.kind != "list":
        return [], [f"{name}:{node.line}: decisions are a list; begin each with '- '"]
    decisions: list[Decision] = []
    for item in node.items:
        found = list(_wrong(item, name))
        if found:
            sentences += found
            continue
        values = {key: value.text for key, value in item.pairs()}
        kind = next(key for key in KINDS if key in values)
        decisions.append(Decision(kind, values[kind], values["by"], values["on"], values["why"], item.line))
    sentences += _contradictions(decisions, name)
    return decisions, sentences


def _wrong(item: Node, name: str) -> Iterator[str]:
    place = f"{name}:{item.line}"
    if item.kind != "map":
        yield f"{place}: a decision is written {{exclude: …, by: …, on: …, why: …}}"
        return
    keys = [key for key, _ in item.pairs()]
    for key, value in item.pairs():
        if key not in (*KINDS, *_KEYS):
            yield f"{place}: '{key}' is not known; a decision has exclude or prefer, and by, on, why"
        elif value.kind != "scalar" or not value.text.strip():
            yield f"{place}: '{key}' is empty; say {'the reason' if key == 'why' else 'it in a few words'}"
    if sum(kind in keys for kind in KINDS) != 1:
        yield f"{place}: a decision either excludes a solution or prefers a file"
    for key in _KEYS:
        if key not in keys:
            yield f"{place}: '{key}' is missing; a decision says who (by), when (on) and why"
    on = next((value.text for key, value in item.pairs() if key == "on"), "")
    if on and not _is_date(on):
        yield f"{place}: on: '{on}' is not a date such as 2026-03-02"


def _contradictions(decisions: list[Decision], name: str) -> Iterator[str]:
    seen: dict[tuple[str, str], int] = {}
    for decision in decisions:
        first = seen.setdefault((decision.kind, decision.target), decision.line)
        if first != decision.line:
            yield f"{name}:{decision.line}: {decision.target} is decided on in line {first}; keep one of the two"


def _is_date(text: str) -> bool:
    try:
        datetime.date.fromisoformat(text)
    except ValueError:
        return False
    return True


def _folder(path: str) -> str:
    return path.rsplit("/", 1)[0] if "/" in path else ""


def _covers(where: str, folder: str) -> bool:
    return where in ("", folder) or folder.startswith(where + "/")
