from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hologyre.edits.kinds import Delete, Edit
from hologyre.edits.log import NAME, Log, LogError, load_log

WHEN = "2026-03-01T09:30:00Z"


def deletion(frame: int) -> Delete:
    return Delete(frame=frame, where=(1.0, 2.0), charge=1, time=WHEN)


def written(path: Path, count: int) -> Log:
    log = Log(path)
    for frame in range(count):
        log.append(deletion(frame))
    return log


def test_a_log_reads_back_what_was_appended(tmp_path: Path, one_of_each: list[Edit]) -> None:
    log = Log(tmp_path / NAME)
    for edit in one_of_each:
        log.append(edit)
    assert Log(tmp_path / NAME).edits == tuple(one_of_each)


def test_the_file_is_made_by_the_first_edit(tmp_path: Path) -> None:
    path = tmp_path / "stack.hologyre" / NAME
    log = Log(path)
    assert not path.exists()
    log.append(deletion(0))
    assert path.read_text(encoding="utf-8").count("\n") == 2


def test_an_edit_is_on_the_disk_before_append_returns(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    synced: list[int] = []
    path = tmp_path / NAME
    monkeypatch.setattr(os, "fsync", lambda _: synced.append(path.stat().st_size))
    log = Log(path)
    for frame in range(3):
        log.append(deletion(frame))
    log.undo()
    assert len(synced) == 4
    assert synced[-1] == path.stat().st_size


@given(st.lists(st.sampled_from(["edit", "undo", "redo"]), max_size=60))
def test_undo_and_redo_go_as_far_as_there_are_edits(steps: list[str]) -> None:
    log = Log()
    done: list[int] = []
    undone: list[int] = []
    for count, step in enumerate(steps):
        if step == "edit":
            log.append(deletion(count))
            done.append(count)
            undone.clear()
        elif step == "undo":
            assert bool(log.undo()) == bool(done)
            if done:
                undone.append(done.pop())
        else:
            assert bool(log.redo()) == bool(undone)
            if undone:
                done.append(undone.pop())
        assert [edit.frame for edit in log.edits] == done
        assert [entry.edit.frame for entry in log.undone] == undone


@given(steps=st.lists(st.sampled_from(["edit", "undo", "redo"]), max_size=25))
def test_a_file_tells_what_stands_and_what_is_undone(
    tmp_path_factory: pytest.TempPathFactory, steps: list[str]
) -> None:
    path = tmp_path_factory.mktemp("log") / NAME
    log = Log(path)
    for count, step in enumerate(steps):
        if step == "edit":
            log.append(deletion(count))
        else:
            (log.undo if step == "undo" else log.redo)()
    again = Log(path)
    assert again.standing == log.standing
    assert again.undone == log.undone
    assert again.next_number == log.next_number


def test_undo_takes_nothing_out_of_the_file(tmp_path: Path) -> None:
    log = written(tmp_path / NAME, 2)
    before = (tmp_path / NAME).read_bytes()
    log.undo()
    assert (tmp_path / NAME).read_bytes().startswith(before)


def test_numbers_are_never_used_again() -> None:
    log = Log()
    log.append(deletion(0))
    log.undo()
    assert log.append(deletion(1)).number == 2


def test_nothing_to_undo_is_false_and_says_so() -> None:
    nothing = Log().undo()
    assert not nothing
    assert getattr(nothing, "reason", "") == "There is nothing to undo."


def test_a_file_broken_anywhere_in_its_last_line_keeps_the_lines_before(tmp_path: Path) -> None:
    path = tmp_path / NAME
    log = written(path, 3)
    whole = path.read_bytes()
    start = whole.rindex(b"\n", 0, len(whole) - 1) + 1
    for cut in range(start + 1, len(whole) - 1):
        path.write_bytes(whole[:cut])
        torn = Log(path)
        assert torn.edits == log.edits[:2]
        assert torn.warnings == (
            f"{path}, line 4: this last line is broken off after {cut - start} bytes and was left "
            "out; all lines before it are kept.",
        )


def test_a_broken_last_line_gives_way_to_the_next_edit(tmp_path: Path) -> None:
    path = tmp_path / NAME
    written(path, 2)
    path.write_bytes(path.read_bytes()[:-20])
    log = Log(path)
    log.append(deletion(7))
    again = Log(path)
    assert not again.warnings
    assert [edit.frame for edit in again.edits] == [0, 7]


def test_a_last_line_that_lacks_only_its_end_is_kept(tmp_path: Path) -> None:
    path = tmp_path / NAME
    written(path, 2)
    path.write_bytes(path.read_bytes()[:-1])
    log = Log(path)
    assert not log.warnings
    log.append(deletion(7))
    assert [edit.frame for edit in Log(path).edits] == [0, 1, 7]


def test_a_first_line_broken_off_is_an_empty_log(tmp_path: Path) -> None:
    path = tmp_path / NAME
    path.write_bytes(b'{"log": "holog')
    log = Log(path)
    assert len(log.warnings) == 1
    log.append(deletion(0))
    assert Log(path).edits == (deletion(0),)


def test_a_fault_is_told_with_file_and_line(tmp_path: Path) -> None:
    path = tmp_path / NAME
    written(path, 1)
    with path.open("a", encoding="utf-8") as file:
        file.write('{"edit": 2, "kind": "explode", "time": "2026-03-01T09:30:00Z"}\n')
    with pytest.raises(LogError, match=r"edits\.jsonl, line 3: kind: unknown kind of edit 'expl"):
        Log(path)


def test_a_line_broken_in_the_middle_of_the_file_is_a_fault(tmp_path: Path) -> None:
    path = tmp_path / NAME
    written(path, 3)
    lines = path.read_bytes().split(b"\n")
    lines[2] = lines[2][:30]
    path.write_bytes(b"\n".join(lines))
    with pytest.raises(LogError, match="line 3: this is not JSON"):
        Log(path)


def test_a_whole_last_line_that_is_not_understood_is_a_fault(tmp_path: Path) -> None:
    path = tmp_path / NAME
    written(path, 1)
    with path.open("ab") as file:
        file.write(b'{"edit": 2, "kind": "explode"}')
    with pytest.raises(LogError, match="line 3: kind"):
        Log(path)


def test_an_undo_out_of_turn_is_a_fault(tmp_path: Path) -> None:
    path = tmp_path / NAME
    written(path, 2)
    with path.open("a", encoding="utf-8") as file:
        file.write('{"undo": 1, "time": "2026-03-01T09:30:00Z"}\n')
    with pytest.raises(LogError, match=r"line 4: undo: edit 1 is not next in turn \(edit 2 is\)"):
        Log(path)


def test_two_who_write_one_log_are_told(tmp_path: Path) -> None:
    path = tmp_path / NAME
    first = written(path, 1)
    Log(path).append(deletion(1))
    with pytest.raises(LogError, match="another program has changed this log"):
        first.append(deletion(2))
    assert [edit.frame for edit in Log(path).edits] == [0, 1]
    assert [edit.frame for edit in first.edits] == [0]


def test_a_log_that_cannot_be_written_says_so_and_keeps_its_state(tmp_path: Path) -> None:
    log = Log(tmp_path / "folder" / NAME)
    (tmp_path / "folder").write_text("in the way")
    with pytest.raises(LogError, match=r"the edit could not be saved: .*; it was not made"):
        log.append(deletion(0))
    assert log.edits == ()


def test_a_log_that_is_asked_for_must_be_there(tmp_path: Path) -> None:
    with pytest.raises(LogError, match=r"there is no such log; name the edits\.jsonl that lies in"):
        load_log(tmp_path / NAME)
    written(tmp_path / NAME, 2)
    assert len(load_log(tmp_path / NAME).edits) == 2
