"""A station: one rule file, one state folder, one lock; what every command that publishes opens first."""

from __future__ import annotations

import os
import stat
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from spikeward.daemon.names import shown
from spikeward.daemon.rule_file.load import load_rules
from spikeward.daemon.rule_file.problems import Problem
from spikeward.daemon.rule_file.yaml_text import LARGEST
from spikeward.daemon.trouble import Trouble
from spikeward.rules.rulebook import Rulebook, Watch


@dataclass(frozen=True, slots=True)
class RuleFile:
    """A rule file as it was last read: its text, what it means, and what is wrong with it."""

    path: Path
    text: str
    rules: Rulebook | None
    problems: tuple[Problem, ...]

    @property
    def errors(self) -> tuple[Problem, ...]:
        """The problems that keep the file from being used."""
        return tuple(problem for problem in self.problems if problem.severity == "error")


def read_rule_file(path: str | Path) -> RuleFile:
    """Read a rule file.

    Raises
    ------
    Trouble : the file cannot be opened or is not text
    """
    place, name = Path(path), shown(str(path))
    try:
        if not stat.S_ISREG(place.stat().st_mode):
            raise Trouble(f"{name}: this is not a file; give the path of a YAML file")
        with place.open("rb") as file:
            text = file.read(LARGEST + 1).decode("utf-8")
    except FileNotFoundError:
        raise Trouble(f"{name}: there is no such rule file; give the path of a YAML file") from None
    except UnicodeDecodeError as error:
        raise Trouble(f"{name}: byte {error.start + 1} is not UTF-8; save the rule file as UTF-8") from None
    except OSError as error:
        raise Trouble(f"{name}: {error.strerror}; give the path of a rule file that can be read") from None
    except ValueError as error:
        raise Trouble(f"{name}: {error}; give the path of a YAML file") from None
    rules, problems = load_rules(text, place.name)
    return RuleFile(place, text, rules, problems)


def usable(rule_file: RuleFile) -> Rulebook:
    """The rules, or the trouble that they are not usable.

    Raises
    ------
    Trouble : with every problem on a line of its own
    """
    if rule_file.rules is None or rule_file.errors:
        lines = "\n".join(problem.line_text() for problem in rule_file.errors)
        raise Trouble(f"{rule_file.path} cannot be used:\n{lines}")
    return rule_file.rules


def rules_from(text: str | None) -> Rulebook | None:
    """Rules from a text that was kept; None where it is gone or no longer understood."""
    return None if text is None else load_rules(text, "kept rules")[0]


@dataclass(frozen=True, slots=True)
class Places:
    """Where things lie: relative folders of the rule file are beside it."""

    base: Path
    rule_file: str = "CONFIG"  # as the person named it, for remedies

    def inputs(self, watch: Watch) -> str:
        """The watched folder."""
        return os.path.join(self.base, watch.folder)

    def outputs(self, watch: Watch) -> str:
        """Where results of a watched folder go: beside the data, or into the folder that mirrors it."""
        return os.path.join(self.base, watch.output or watch.folder)

    def state(self, rules: Rulebook) -> Path:
        """The state folder."""
        return self.base / rules.state


def wall_clock() -> str:
    """The time of day for logs and history, never for results."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


Clock = Callable[[], str]
