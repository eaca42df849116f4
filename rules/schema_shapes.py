"""The shapes that a rule file is built of: single values, lists, maps of free names, and blocks of known keys."""

from __future__ import annotations

from dataclasses import dataclass

from spikeward.rules.schema_kinds import Scalar, one_of


@dataclass(frozen=True, slots=True)
class ListOf:
    """Several values; with ``single`` one may stand without brackets."""

    item: Shape
    single: bool = False


@dataclass(frozen=True, slots=True)
class MapOf:
    """Values under names that the laboratory chooses, or under some of the ``keys``.

    ``called`` says what such a name stands for, ``example`` is one. With ``listed`` a list of names stands for a map of
    each name to itself.
    """

    item: Shape
    called: str
    example: str = ""
    keys: tuple[str, ...] = ()
    listed: bool = False


@dataclass(frozen=True, slots=True)
class Block:
    """Known keys. ``short`` is the key that a single value alone stands for; ``others`` the shape of further names."""

    fields: tuple[Field, ...]
    short: str = ""
    others: MapOf | None = None


@dataclass(frozen=True, slots=True)
class Limits:
    """The limits of one check, whose names and kinds the rule pack gives, or ``off``."""


Shape = Scalar | ListOf | MapOf | Block | Limits

WITH_ITS_DEFAULTS = "{}"
"""The default of a block that is always there, filled with the defaults of its keys."""


@dataclass(frozen=True, slots=True)
class Field:
    """One key of a rule file.

    Parameters
    ----------
    default : as the file would say it; None where nothing stands for a key that is left out
    example : as the file would say it, in one line or several; empty for blocks that are built from their keys
    hidden : the example file shows the key commented out, because it does not go with the others
    """

    name: str
    shape: Shape
    description: str
    default: str | tuple[str, ...] | None = None
    required: bool = False
    example: str = ""
    hidden: bool = False


def kind_of(shape: Shape) -> str:
    """What a shape is, for a sentence."""
    if isinstance(shape, Scalar):
        return shape.expected
    if isinstance(shape, ListOf):
        item = kind_of(shape.item)
        return f"{item}, or a list of such" if shape.single else f"a list, each entry {item}"
    if isinstance(shape, MapOf):
        return f"a map from {one_of(shape.keys) if shape.keys else shape.called} to {kind_of(shape.item)}"
    if isinstance(shape, Limits):
        return "a map of limits such as {warn_above: 10 %}, or off"
    keys = ", ".join(field.name for field in shape.fields)
    alone = "".join(f"{kind_of(field.shape)}, or " for field in shape.fields if field.name == shape.short)
    return f"{alone}a map with the keys {keys}" + (f" and {shape.others.called}" if shape.others else "")
