from __future__ import annotations

import json

import pytest

from hologyre.edits.kinds import Edit, Move
from hologyre.edits.lines import Entry, Step, check_header, entry_of, header_line, line_of

DELETE = {
    "edit": 1,
    "kind": "delete",
    "time": "2026-03-01T09:30:00Z",
    "frame": 3,
    "where": [10, 20.5],
    "before": {"charge": 1},
}


def test_every_kind_reads_back_as_it_was_written(one_of_each: list[Edit]) -> None:
    for number, edit in enumerate(one_of_each, start=1):
        assert entry_of(line_of(Entry(number, edit))) == Entry(number, edit)


@pytest.mark.parametrize("step", ["undo", "redo"])
def test_steps_read_back_as_they_were_written(step: str) -> None:
    taken = Step("undo" if step == "undo" else "redo", 4, "2026-03-01T09:30:00Z", "Ada")
    assert entry_of(line_of(taken)) == taken


def test_a_line_says_when_where_what_before_and_after() -> None:
    edit = Move(
        frame=3, where=(10.25, 20.5), charge=-1, to=(11.0, 21.75), winding=-1,
        time="2026-03-01T09:30:00Z", author="Ada", reason="drifted",
    )  # fmt: skip
    assert line_of(Entry(12, edit)) == (
        '{"edit": 12, "kind": "move", "time": "2026-03-01T09:30:00Z", "author": "Ada", "frame": 3, '
        '"where": [10.25, 20.5], "before": {"charge": -1}, '
        '"after": {"where": [11.0, 21.75], "winding": -1}, "reason": "drifted"}'
    )


def test_positions_read_back_bit_for_bit() -> None:
    edit = Move(frame=0, where=(1 / 3, 2**0.5), charge=1, to=(1e-9, 1023.7), winding=1)
    read = entry_of(line_of(Entry(1, edit)))
    assert isinstance(read, Entry)
    assert read.edit == edit


def test_whole_numbers_are_taken_as_places() -> None:
    read = entry_of(json.dumps(DELETE))
    assert isinstance(read, Entry)
    assert read.edit.where == (10.0, 20.5)


@pytest.mark.parametrize(
    ("change", "told"),
    [
        ({"kind": "deleet"}, r"kind: unknown kind of edit 'deleet' \(did you mean 'delete'\?\)"),
        ({"kind": "annihilate everything"}, r"unknown kind .*known: place, move, delete"),
        ({"colour": "red"}, "colour: unknown field"),
        ({"before": {"charge": 1, "track": 3}}, r"before\.track: unknown field \(known: charge\)"),
        ({"before": {}}, r"before\.charge: is missing"),
        ({"before": 3}, "before: expected a table, got 3"),
        ({"edit": 0}, "edit: expected the number of an edit, from 1, got 0"),
        ({"where": [1]}, r"where: expected a place \(y, x\) in px"),
        ({"where": [1, "2"]}, r"where: expected a place \(y, x\) in px"),
        ({"frame": True}, "frame: expected a frame number, got True"),
        ({"time": 7}, "time: expected ISO 8601 in UTC, got 7"),
    ],
)
def test_what_is_not_understood_is_refused(change: dict[str, object], told: str) -> None:
    with pytest.raises(ValueError, match=told):
        entry_of(json.dumps(DELETE | change))


@pytest.mark.parametrize("name", ["time", "frame", "where", "kind", "edit", "before"])
def test_what_is_missing_is_named(name: str) -> None:
    line = {key: value for key, value in DELETE.items() if key != name}
    with pytest.raises(ValueError, match=name):
        entry_of(json.dumps(line))


def test_a_field_given_twice_is_refused() -> None:
    with pytest.raises(ValueError, match="undo: is given twice"):
        entry_of('{"undo": 1, "undo": 2, "time": "2026-03-01T09:30:00Z"}')


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ('{"log": "hologyre edits", "version": 2}', "this log is of version 2 and only 1"),
        ('{"name": "something else"}', "this is not a log of edits"),
        ("[1, 2]", "expected a table"),
        ("frame,y_px", "this is not JSON"),
        ('{"log": "hologyre edits", "version": 1, "x": 0}', "x: unknown field"),
    ],
)
def test_another_file_is_not_taken_for_a_log(text: str, told: str) -> None:
    with pytest.raises(ValueError, match=told):
        check_header(text)


def test_the_header_is_its_own() -> None:
    check_header(header_line())
