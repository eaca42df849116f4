"""Pages from templates: every text escaped, one style sheet inside, no script, nothing fetched from anywhere."""

from __future__ import annotations

import base64
import hashlib
import math
from functools import cache
from importlib.resources import files

from jinja2 import Environment, FunctionLoader, StrictUndefined
from markupsafe import Markup

from spikeward.daemon.pages.numbers import coverage_shown, interval_shown, shown, typeset, value_shown, with_unit
from spikeward.daemon.pages.text import visible
from spikeward.rules.checks.registry import REGISTRY
from spikeward.rules.outcomes import FAIL, NOT_EVALUATED, PASS, WAITING, WARN, Check
from spikeward.rules.rounding import percent
from spikeward.rules.words import line_words, unit_words

_ATTENTION = {FAIL: 0, WARN: 1, WAITING: 2, NOT_EVALUATED: 3, PASS: 4}


def page(template: str, **view: object) -> bytes:
    """Fill one of the templates beside this module; the style sheet and its digest for the security policy come along.

    Parameters
    ----------
    view : what the template names; a name that is missing raises ``jinja2.UndefinedError``
    """
    style = _resource("page.css")
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    return _environment().get_template(template).render(style=Markup(style), style_digest=digest, **view).encode()


def attention(verdict: str) -> int:
    """Sort key: what a person should look at comes first."""
    return _ATTENTION.get(verdict, 0)


def _checks_in_order(checks: tuple[Check, ...]) -> list[Check]:
    return sorted(checks, key=lambda check: attention(check.verdict))


def _words(name: str) -> str:
    """A name of the rule file as words: ``matrix_spread`` as ``matrix spread``."""
    return name.replace("_", " ")


def _says(check: Check) -> str:
    """The sentence without the words that already stand before it as the verdict."""
    return _capital(check.sentence.removeprefix("Not evaluated: "))


def _capital(text: str) -> str:
    """The first letter as a capital, the others as they are."""
    return text[:1].upper() + text[1:]


def _observed(check: Check) -> str:
    if check.observed is None:
        return ""
    registered = REGISTRY.get(check.name)
    if registered is not None and registered.in_percent and check.unit == "1" and math.isfinite(check.observed):
        return typeset(percent(check.observed, 3))
    return with_unit(shown(check.observed), check.unit)


@cache
def _resource(name: str) -> str:
    return files("spikeward.daemon.pages").joinpath(name).read_text(encoding="utf-8")


@cache
def _environment() -> Environment:
    environment = Environment(
        loader=FunctionLoader(_resource),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        finalize=lambda value: visible(value) if type(value) is str else value,
    )
    environment.filters |= {
        "in_order": _checks_in_order,
        "words": _words,
        "capital": _capital,
        "says": _says,
        "observed": _observed,
        "shown": shown,
        "unit": unit_words,
        "line": line_words,
        "value": value_shown,
        "interval": interval_shown,
        "coverage": coverage_shown,
    }
    return environment
