"""A rule file edited while the daemon runs: a good edit is adopted, a bad one leaves the last good rules in force."""

from __future__ import annotations

from spikeward.daemon.log import Log
from spikeward.daemon.pages.facts import Notice
from spikeward.daemon.pipeline import Pipeline
from spikeward.daemon.settle import Stamp
from spikeward.daemon.station import RuleFile, read_rule_file
from spikeward.daemon.trouble import Trouble

LOOK_EVERY = 1.0  # s
PAUSE = 10.0  # s until rules that the disk refused to keep are tried again


class RuleEdits:
    """Looks at the rule file now and then; a half-saved file is looked at again when it stops changing."""

    def __init__(self, rule_file: RuleFile, pipeline: Pipeline, log: Log) -> None:
        self._path = rule_file.path
        self._pipeline = pipeline
        self._log = log
        self._text = rule_file.text
        self._stamp = self._look()
        self._due = 0.0

    def look(self, now: float) -> bool:
        """Whether a version of the rule file was adopted or refused at this look."""
        if now < self._due:
            return False
        self._due = now + LOOK_EVERY
        stamp = self._look()
        if stamp == self._stamp:
            return False
        self._stamp = stamp
        try:
            edited = read_rule_file(self._path)
        except Trouble as trouble:
            self._text = ""  # when it is back as it was, it is in force again and nothing is wrong with it
            self._refuse(str(trouble))
            return True
        if edited.text == self._text:
            return False
        if edited.rules is None or edited.errors:
            self._text = edited.text
            self._refuse("; ".join(problem.line_text() for problem in edited.errors))
            return True
        try:
            self._pipeline.adopt(edited.rules, edited.text)
        except OSError as error:
            self._stamp, self._due = None, now + PAUSE
            self._refuse(f"It cannot be kept now ({error.strerror or error}); tried again in {PAUSE:.0f} s")
            return False
        self._text = edited.text
        self._pipeline.rules_notice = None
        self._log.info("rules", note="a new version of the rule file is in force", digest=edited.rules.digest)
        for remedy in self._pipeline.remedies():
            self._log.info("rules", note=remedy)
        return True

    def _refuse(self, why: str) -> None:
        sentence = f"the edited rule file cannot be used; the last good rules stay in force. {why}"
        self._pipeline.rules_notice = Notice("rules", self._path.name, sentence)
        self._log.warning("rules", note=sentence)

    def _look(self) -> Stamp | None:
        found = self._pipeline.disk.look(str(self._path))
        return Stamp(found.size, found.mtime_ns, found.inode) if found else None
