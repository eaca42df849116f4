"""What stops a command: one sentence for the person who gave it."""

from __future__ import annotations


class Trouble(Exception):
    """The command cannot run. The message says what is wrong, where, and what to do."""
