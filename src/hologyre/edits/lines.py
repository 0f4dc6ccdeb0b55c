"""Edits as lines of JSON and back; whatever is not known is refused."""

from __future__ import annotations

import difflib
import json
from dataclasses import MISSING, dataclass, fields
from typing import Any, Literal, NamedTuple

from hologyre.edits.kinds import KINDS, Edit

VERSION = 1
"""Version of the lines; told by the first line of a log."""

HEADER = {"log": "hologyre edits", "version": VERSION}


class Entry(NamedTuple):
    """An edit and its number in the log, from 1, never used again."""

    number: int
    edit: Edit


@dataclass(frozen=True)
class Step:
    """An edit taken back, or done again."""

    step: Literal["undo", "redo"]
    number: int
    time: str
    author: str = ""


def header_line() -> str:
    """Return the first line of a log."""
    return json.dumps(HEADER)


def check_header(text: str) -> None:
    """Raise ValueError unless this is the first line of a log of this version."""
    found = _mapping(text)
    if found.get("log") != HEADER["log"]:
        raise ValueError("this is not a log of edits: its first line must name one")
    if found.get("version") != VERSION:
        raise ValueError(
            f"this log is of version {found.get('version')!r} and only {VERSION} can be read; use "
            "the hologyre it was written with, or a newer one"
        )
    _refuse_unknown(found, tuple(HEADER), "")


def line_of(entry: Entry | Step) -> str:
    """Return an entry or a step as one line of JSON, without the line's end."""
    if isinstance(entry, Step):
        line = {entry.step: entry.number, "time": entry.time, "author": entry.author}
        return _dumped({k: v for k, v in line.items() if v != ""})
    number, edit = entry
    line = {
        "edit": number,
        "kind": edit.kind,
        "time": edit.time,
        "author": edit.author,
        "frame": edit.frame,
    }
    parts: dict[str, dict[str, Any]] = {"": line, "before": {}, "after": {}}
    for name, place in edit.layout.items():
        part, _, key = place.rpartition(".")
        parts[part][key] = getattr(edit, name)
    line |= {"where": edit.where, "before": parts["before"], "after": parts["after"]}
    line["reason"] = edit.reason
    return _dumped({k: v for k, v in line.items() if v not in ("", {})})


def entry_of(text: str) -> Entry | Step:
    """Read one line.

    Raises
    ------
    ValueError
        If it is not JSON, of a kind that is not known, or has a field that is not known, is
        missing, or holds what it does not take.
    """
    line = _mapping(text)
    for name in ("undo", "redo"):
        if name in line:
            _refuse_unknown(line, (name, "time", "author"), "")
            step: Literal["undo", "redo"] = "undo" if name == "undo" else "redo"
            return Step(
                step, _number(line, name), _text(line, "time"), _text(line, "author", default="")
            )
    number = _number(line, "edit")
    kind = _text(line, "kind")
    if kind not in KINDS:
        near = difflib.get_close_matches(kind, KINDS, 1)
        known = f"did you mean {near[0]!r}?" if near else f"known: {', '.join(KINDS)}"
        raise ValueError(f"kind: unknown kind of edit {kind!r} ({known})")
    return Entry(number, _edit(KINDS[kind], line))


def is_broken_off(raw: bytes) -> bool:
    """Tell whether a line is no whole piece of JSON."""
    try:
        json.loads(raw)
    except ValueError:
        return True
    return False


def _edit(kind: type[Edit], line: dict[str, Any]) -> Edit:
    common = ("edit", "kind", "time", "author", "frame", "where", "reason")
    inner: dict[str, dict[str, str]] = {"": {}, "before": {}, "after": {}}
    for name, place in kind.layout.items():
        part, _, key = place.rpartition(".")
        inner[part][key] = name
    parts = tuple(part for part in ("before", "after") if inner[part])
    _refuse_unknown(line, (*common, *inner[""], *parts), "")
    for name in ("time", "frame", "where"):
        if name not in line:
            raise ValueError(f"{name}: is missing")
    values: dict[str, Any] = {"where": line["where"]}
    values |= {name: line[name] for name in ("time", "author", "reason", "frame") if name in line}
    optional = {one.name for one in fields(kind) if one.default is not MISSING}
    for part, known in inner.items():
        held = line.get(part, {}) if part else line
        prefix = part and f"{part}."
        if not isinstance(held, dict):
            raise ValueError(f"{part}: expected a table, got {held!r}")
        if part:
            _refuse_unknown(held, tuple(known), prefix)
        for key, name in known.items():
            if key in held:
                values[name] = held[key]
            elif name not in optional:
                raise ValueError(f"{prefix}{key}: is missing")
    return kind(**values)


def _mapping(text: str) -> dict[str, Any]:
    try:
        line = json.loads(text, object_pairs_hook=_once)
    except json.JSONDecodeError as error:
        raise ValueError(f"this is not JSON ({error.msg} at character {error.colno})") from error
    if not isinstance(line, dict):
        raise ValueError(f"expected a table {{...}}, got {text[:40]!r}")
    return line


def _once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    held = dict(pairs)
    if len(held) != len(pairs):
        names = [name for name, _ in pairs]
        twice = next(name for name in names if names.count(name) > 1)
        raise ValueError(f"{twice}: is given twice")
    return held


def _refuse_unknown(held: dict[str, Any], known: tuple[str, ...], prefix: str) -> None:
    unknown = [name for name in held if name not in known]
    if unknown:
        raise ValueError(f"{prefix}{unknown[0]}: unknown field (known: {', '.join(known)})")


def _number(line: dict[str, Any], name: str) -> int:
    value = line.get(name)
    if not isinstance(value, int) or isinstance(value, bool) or value < 1:
        raise ValueError(f"{name}: expected the number of an edit, from 1, got {value!r}")
    return value


def _text(line: dict[str, Any], name: str, default: str | None = None) -> str:
    value = line.get(name, default)
    if not isinstance(value, str):
        raise ValueError(f"{name}: expected a text, got {value!r}")
    return value


def _dumped(line: dict[str, Any]) -> str:
    return json.dumps(line, ensure_ascii=False, allow_nan=False)
