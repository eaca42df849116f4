"""The example rule file and the reference page, written from the schema by ``python -m`` and this module's name."""

from __future__ import annotations

import sys
import textwrap
from collections.abc import Iterator
from pathlib import Path

from spikeward.daemon.rule_file.checks import PackLimit, read_pack, shipped_packs
from spikeward.daemon.rule_file.problems import CODES
from spikeward.rules.naming import GROUPS
from spikeward.rules.quantities import UNITS
from spikeward.rules.schema import RULE_FILE
from spikeward.rules.schema_kinds import Scalar
from spikeward.rules.schema_shapes import WITH_ITS_DEFAULTS, Block, Field, Limits, ListOf, MapOf, Shape, kind_of

_WIDTH = 120
_COMMENT_AT = 48  # column of a comment beside its key
_HEAD = """\
# A complete rule file: every key once, with what it means. Keys that do not go with the others are commented out.
# A first rule file needs a fifth of this: watch, readers, names, standards and one preparation.
# Scenario and names are invented: cadmium and lead in estuary mud digests.
"""


def example_text() -> str:
    """The example rule file."""
    return _HEAD + "".join(f"\n{part}" for part in _top_parts())


def _top_parts() -> Iterator[str]:
    small: list[str] = []
    for field in RULE_FILE.fields:
        lines = list(_field_lines(field, 0))
        if isinstance(field.shape, Scalar):
            small += lines
            continue
        if small:
            yield "\n".join(small) + "\n"
            small = []
        yield "\n".join(lines) + "\n"
    if small:
        yield "\n".join(small) + "\n"


def _field_lines(field: Field, indent: int) -> Iterator[str]:
    pad = " " * indent
    mark = "# " if field.hidden else ""
    if field.example and "\n" not in field.example:
        yield from _with_comment(f"{pad}{mark}{field.name}: {field.example}", _told(field), pad)
        return
    yield from _with_comment(f"{pad}{mark}{field.name}:", _told(field), pad)
    if field.example:
        yield from (f"{pad}  {line}" for line in field.example.strip().split("\n"))
    else:
        yield from _shape_lines(field.shape, indent + 2)


def _shape_lines(shape: Shape, indent: int) -> Iterator[str]:
    pad = " " * indent
    if isinstance(shape, Block):
        for field in shape.fields:
            yield from _field_lines(field, indent)
    elif isinstance(shape, MapOf):
        yield f"{pad}{shape.example}:"
        yield from _shape_lines(shape.item, indent + 2)
    elif isinstance(shape, ListOf):
        lines = list(_shape_lines(shape.item, indent + 2))
        first = next(number for number, line in enumerate(lines) if not line.lstrip().startswith("#"))
        # A comment above the first key goes above the dash.
        yield from (line[2:] for line in lines[:first])
        yield f"{pad}- {lines[first].lstrip()}"
        yield from lines[first + 1 :]


def _with_comment(line: str, comment: str, pad: str) -> Iterator[str]:
    beside = f"{line.ljust(_COMMENT_AT - 2)}  # {comment}"
    if len(beside) <= _WIDTH:
        yield beside
        return
    yield from textwrap.wrap(comment, _WIDTH, initial_indent=f"{pad}# ", subsequent_indent=f"{pad}# ")
    yield line


def _told(field: Field) -> str:
    default = _default_text(field)
    return field.description + (f" Default: {default}." if default else "")


def _default_text(field: Field) -> str:
    if isinstance(field.default, tuple):
        return ", ".join(field.default)
    return "" if field.default in (None, WITH_ITS_DEFAULTS) else str(field.default)


_PAGE = """\
# The rule file, key by key

This page is written from the schema by `python -m spikeward.daemon.rule_file.reference`; do not edit it.

A rule file is YAML. Every quantity carries its unit, every text stays as it is written, and a key that is not known is
an error. Tags, anchors, aliases, merge keys, tabs before keys, duplicate keys and several documents are refused.
`[]` stands for each entry of a list, `NAME` for a name of your own.
"""


def reference_text() -> str:
    """The reference page."""
    parts = [_PAGE]
    for field in RULE_FILE.fields:
        default = _default_text(field)
        more = " Required." if field.required else f" Default: `{default}`." if default else ""
        parts.append(f"\n## {field.name}\n\n{field.description}{more}\n")
        rows = list(_rows(field.shape, field.name))
        if rows:
            parts.append(
                "\n| key | what stands there | default | meaning |\n| --- | --- | --- | --- |\n"
                + "\n".join(rows)
                + "\n"
            )
        elif isinstance(field.shape, Scalar):
            parts.append(f"\nExpected: {field.shape.expected}.\n")
    return "".join((*parts, _patterns_part(), _units_part(), _checks_part(), _codes_part()))


def _rows(shape: Shape, path: str) -> Iterator[str]:
    if isinstance(shape, ListOf) and not isinstance(shape.item, Scalar):
        yield from _rows(shape.item, f"{path}[]")
    elif isinstance(shape, MapOf) and not isinstance(shape.item, (Scalar, Limits)):
        yield from _rows(shape.item, f"{path}.NAME")
    elif isinstance(shape, Block):
        for field in shape.fields:
            inner = list(_rows(field.shape, f"{path}.{field.name}"))
            default = "required" if field.required else _default_text(field)
            told = "" if inner and isinstance(field.shape, Block) else kind_of(field.shape)
            cells = (f"`{path}.{field.name}`", told, default, field.description)
            yield "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |"
            yield from inner
        if shape.others is not None:
            yield from _rows(shape.others, path)


_PATTERNS = """
## Patterns

A pattern must match the whole name. Write it in single quotes. Groups name what the parts mean, such as
`(?P<sample>\\d+)`; `(?:…)` is a group without meaning. Possible are
{groups}.

Patterns run on an engine that never takes long, whatever the name. It knows no look-ahead, no look-behind and no
reference back to a group. Instead of "a name that does not begin with QC", write a rule for names with QC above the
general one: the first rule that takes a name wins.
"""


def _patterns_part() -> str:
    return _PATTERNS.format(groups=textwrap.fill(", ".join(GROUPS), _WIDTH))


def _units_part() -> str:
    by_dimension: dict[str, list[str]] = {}
    for code, (dimension, _) in UNITS.items():
        by_dimension.setdefault(dimension, []).append(code)
    rows = "".join(f"| {dimension} | {', '.join(codes)} |\n" for dimension, codes in by_dimension.items())
    return (
        "\n## Units\n\nCommon other spellings are understood (`µL`, `ml`, `mg L-1`, `mg·L⁻¹`, `mM`). "
        "`ppm`, `ppb` and `ppt` do\n"
        "not say whether they are per volume or per mass: they are refused unless `units` says it. So is a decimal "
        "comma.\n\n"
        f"| measures | units |\n| --- | --- |\n{rows}"
    )


def _checks_part() -> str:
    parts = [
        "\n## Limits of the shipped packs\n\nA percentage may be written for a fraction; `none` asks for no limit.\n"
    ]
    for name, text in shipped_packs().items():
        parts.append(f"\n### pack:{name}\n\n| limit | value | source |\n| --- | --- | --- |\n")
        for check, limits in read_pack(text, name).items():
            parts += [f"| `{check}.{key}` | {shown_limit(limit)} | {limit.source} |\n" for key, limit in limits.items()]
            parts += [] if limits else [f"| `{check}` | no limits | |\n"]
    return "".join(parts)


def shown_limit(limit: PackLimit) -> str:
    """The value of a limit as a rule file would say it."""
    if limit.value is None:
        return "none"
    return f"[{limit.value[0]:g}, {limit.value[1]:g}]" if isinstance(limit.value, tuple) else f"{limit.value:g}"


def _codes_part() -> str:
    rows = "".join(f"| {code} | {meaning} |\n" for code, meaning in CODES.items())
    head = "\n## Codes of problems\n\nR04x are warnings; all others are errors.\n\n| code | meaning |\n| --- | --- |\n"
    return head + rows


def main() -> int:
    """Write both files into the source tree that this module belongs to."""
    root = Path(__file__).resolve().parents[2]
    (root / "config.example.yaml").write_text(example_text(), encoding="utf-8", newline="\n")
    (root / "daemon" / "guide" / "reference.md").write_text(reference_text(), encoding="utf-8", newline="\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
