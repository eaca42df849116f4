"""Facts that only the daemon knows and pages show: a series' revisions, and what stands on a board."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Revision:
    """One published revision of a series.

    ``at`` is ISO 8601 text with a zone; ``why`` says what arrived or was decided; ``changed`` names the parts of the
    result whose content changed, one sentence each.
    """

    number: int
    at: str
    verdict: str
    inputs_digest: str
    why: str
    changed: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Notice:
    """Something on a board that a person should know and that belongs to no single result.

    ``kind`` is a word or two: unnamed, unread, share away, source missing, decision, rules, warning, duplicate.
    ``subject`` is the file, folder or name that it is about; ``since`` is ISO 8601 text, or empty.
    """

    kind: str
    subject: str
    sentence: str
    since: str = ""
