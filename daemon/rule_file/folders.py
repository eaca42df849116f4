"""Folders of a rule file: every watched folder and every output folder lies apart from all others.

Paths are compared as they are written, relative to the folder of the rule file; nothing is looked up on a disk.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from spikeward.daemon.names import ignored, is_ours
from spikeward.daemon.rule_file.build import folder_of
from spikeward.daemon.rule_file.walk import Walker


def contains(outer: str, inner: str) -> bool:
    """Whether one folder is, or lies above, another; false where the texts alone cannot tell."""
    if outer.startswith("/") != inner.startswith("/"):
        return False
    ups, names = _parts(outer)
    inner_ups, inner_names = _parts(inner)
    if ups != inner_ups:
        return ups > inner_ups and not names
    return inner_names[: len(names)] == names


def _parts(folder: str) -> tuple[int, list[str]]:
    names = [part for part in folder_of(folder).split("/") if part not in ("", ".")]
    ups = sum(part == ".." for part in names)
    return ups, names[ups:]


def check_folders(value: Mapping[str, Any], walker: Walker) -> None:
    """Watched twice, nested in another, output inside a watched folder, state inside one."""
    known: list[tuple[str, str]] = []  # folder, path of its key
    for number, watch in enumerate(value["watch"] or ()):
        if watch is None or not watch["folder"]:
            continue
        base = f"watch[{number}]"
        _apart(watch["folder"], f"{base}.folder", known, walker)
        if watch["output"] and watch["output"] != "beside":
            _apart(watch["output"], f"{base}.output", known, walker)
        elif watch["spans_folders"]:
            hint = "name a folder outside every watched folder"
            walker.at(f"{base}.spans_folders", "R031", "a series across folders has no place beside the data",
                      "an output folder", hint)  # fmt: skip
    if value["state"]:
        _check_state(value["state"], known, walker)


def _apart(folder: str, path: str, known: list[tuple[str, str]], walker: Walker) -> None:
    for other, other_path in known:
        inside = contains(other, folder)
        if not inside and not contains(folder, other):
            continue
        line = walker.places[other_path].line
        if inside and contains(folder, other):
            told = f"the folder '{folder}' stands in line {line} already"
        else:
            relation = "lies inside" if inside else "holds"
            told = f"the folder '{folder}' {relation} '{other}' of line {line}"
        hint = "name a folder outside, or say beside" if path.endswith("output") else "keep one of the two"
        walker.at(path, "R032", told, "folders that lie apart", hint)
        break
    known.append((folder, path))


def _check_state(state: str, known: list[tuple[str, str]], walker: Walker) -> None:
    for folder, _ in known:
        hidden = any(part.startswith(".") and part.strip(".") for part in folder_of(state).split("/"))
        if contains(folder, state) and (not hidden or contains(state, folder)):
            told = f"the state folder '{state}' lies inside '{folder}'"
            walker.at("state", "R032", told, "", "leave state out, or name a folder outside")
            return


def check_decisions(name: str | None, walker: Walker) -> None:
    """The decisions file is one that lies beside the data and is looked at."""
    if name is None:
        return
    reason = "a path" if "/" in name or "\\" in name else ignored(name) or ("our own" if is_ours(name) else "")
    if reason:
        found = f"'{name}' would never be read ({reason})"
        walker.at("decisions", "R017", found, "a file name such as decisions.yaml")
