"""Each kind of edit applied to the tables, or the reason why it no longer fits."""

from __future__ import annotations

from dataclasses import dataclass
from functools import singledispatch
from typing import Literal

import numpy as np

from hologyre.edits import mend
from hologyre.edits.kinds import (
    Barrier,
    Bridge,
    Confirm,
    CutTrack,
    Delete,
    DeleteTrack,
    Edit,
    FlipCharge,
    JoinTracks,
    MarkPair,
    Move,
    Place,
    Point,
    Region,
    Reject,
    RenameTrack,
)
from hologyre.edits.lines import Entry
from hologyre.edits.state import Row, Side, State, Tip

_SURE = 0.5
"""A singularity is told from the next nearest if it is closer than this times its distance."""


@dataclass(frozen=True)
class Misfit:
    """An edit that does not fit the tables, and why; falsy.

    Parameters
    ----------
    edit : Edit
    reason : str
    needs_reason : bool
        It would fit, but contradicts the measured winding and gives no reason.
    number : int
        Its number in the log, 0 if it is not there.
    """

    edit: Edit
    reason: str
    needs_reason: bool = False
    number: int = 0

    def __bool__(self) -> Literal[False]:
        return False


class _NoFitError(Exception):
    """Ends the application of one edit; never leaves this module."""


def apply(state: State, entry: Entry) -> Misfit | None:
    """Apply one edit; where it does not fit, leave the state as it was and say why."""
    before = state.take_changes()
    if before:
        raise ValueError("state: expected no changes that were not taken")
    try:
        contradiction = _apply(entry.edit, state, entry.number)
    except _NoFitError as error:
        state.take_back(state.take_changes())
        return Misfit(entry.edit, str(error), number=entry.number)
    if contradiction and not entry.edit.reason.strip():
        state.take_back(state.take_changes())
        reason = f"{contradiction}; an edit against the measurement needs a reason."
        return Misfit(entry.edit, reason, True, entry.number)
    if contradiction:
        state.put(state.contradictions, entry.number, (entry.edit, f"{contradiction}."))
    return None


def _reattached(state: State, frame: int | None, place: Point, charge: int) -> int:
    """Return the row an edit's place stands for: of its charge, within a gate, and no other near.

    Raises
    ------
    _NoFitError
        If there is none.
    """
    if frame is None or frame not in state.found.searched:
        raise _NoFitError(f"Frame {frame} is not among the frames that were measured.")
    rows = state.in_frame(frame)
    distance = np.hypot(rows.y_px - place[0], rows.x_px - place[1])
    distance[rows.charge != charge] = np.inf
    where = f"(y={place[0]:.1f}, x={place[1]:.1f}) px in frame {frame}"
    order = np.argsort(distance)[:2]
    least = float(distance[order[0]]) if len(order) else np.inf
    if not np.isfinite(least):
        raise _NoFitError(f"No singularity of charge {charge:+d} is left near {where}.")
    row = int(rows.row[order[0]])
    gate = state.found.gate_px(row)
    if least > gate:
        raise _NoFitError(
            f"No singularity of charge {charge:+d} lies within {gate:.2g} px of {where}; the "
            f"nearest is {least:.2g} px away."
        )
    if len(order) > 1 and least > _SURE * distance[order[1]]:
        raise _NoFitError(
            f"Two singularities of charge {charge:+d} lie about as near to {where}: "
            f"{least:.2g} and {distance[order[1]]:.2g} px away."
        )
    return row


@singledispatch
def _apply(edit: Edit, state: State, number: int) -> str:
    """Apply an edit; return how it contradicts the measured winding, or an empty text."""
    raise TypeError(f"edit: expected one of the kinds of edit, got {type(edit).__name__}")


@_apply.register
def _(edit: Place, state: State, number: int) -> str:
    frame = edit.frame
    if frame is None or frame not in state.found.searched:
        raise _NoFitError(f"Frame {frame} is not among the frames that were measured.")
    rows = state.in_frame(frame)
    distance = np.hypot(rows.y_px - edit.where[0], rows.x_px - edit.where[1])
    distance[rows.charge != edit.charge] = np.inf
    if len(distance):
        k = int(np.argmin(distance))
        if distance[k] < 0.5 * state.found.gate_px(int(rows.row[k])):
            raise _NoFitError(
                f"A singularity of charge {edit.charge:+d} is listed {distance[k]:.2g} px from "
                f"{_at(edit.where)} in frame {frame} already."
            )
    row = state.add(
        frame,
        int(state.found.singularity.max(initial=-1)) + number,
        Row(*edit.where, edit.charge, edit.winding, "placed", True, -1, -1, "", -1),
    )
    mend.put_in(state, row)
    if edit.charge == edit.winding:
        return ""
    return f"{edit.charge:+d} is placed where the winding is {edit.winding:+d}"


@_apply.register
def _(edit: Move, state: State, number: int) -> str:
    row = _row(edit, state)
    own = state[row]
    origin = "placed" if own.origin == "placed" else "moved"
    y_px, x_px = edit.to
    state.set(row, y_px=y_px, x_px=x_px, winding=edit.winding, origin=origin)
    if edit.winding == own.charge:
        return ""
    return f"{own.charge:+d} is moved to where the winding is {edit.winding:+d}"


@_apply.register
def _(edit: FlipCharge, state: State, number: int) -> str:
    row = _row(edit, state)
    own = state[row]
    mend.take_out(state, row)
    state.set(row, charge=-own.charge)
    mend.put_in(state, row)
    if own.winding == -own.charge:
        return ""
    return f"{own.charge:+d} is turned into {-own.charge:+d} where the winding is {own.winding:+d}"


@_apply.register(Delete)
@_apply.register(Reject)
def _(edit: Delete | Reject, state: State, number: int) -> str:
    row = _row(edit, state)
    own = state[row]
    mend.take_out(state, row)
    state.set(row, kept=False)
    if own.winding != own.charge:
        return ""
    return f"{own.charge:+d} is taken out where the winding is {own.winding:+d}"


@_apply.register
def _(edit: Confirm, state: State, number: int) -> str:
    if edit.what != "event":
        _row(edit, state)
        return ""
    gate = 0.5 * state.found.spacing_px
    y, x = edit.where
    for event in state.events.values():
        if event.frame_before == edit.frame and np.hypot(event.y_px - y, event.x_px - x) <= gate:
            return ""
    raise _NoFitError(f"No event lies within {gate:.2g} px of {_at(edit.where)} after frame "
                      f"{edit.frame}.")  # fmt: skip


@_apply.register
def _(edit: CutTrack, state: State, number: int) -> str:
    a, b = _two_rows(edit, state)
    if state[a].following != b:
        raise _NoFitError(f"The two singularities of {_both(edit)} do not follow each other.")
    mend.detach(state, a, b)
    mend.settle(state, (a, "end"))
    mend.settle(state, (b, "start"))
    return ""


@_apply.register
def _(edit: JoinTracks, state: State, number: int) -> str:
    a, b = _two_rows(edit, state)
    if state[a].following == b:
        state.set(b, link="hand")
        return ""
    if state[a].following >= 0:
        raise _NoFitError(f"The track of {_at(edit.where[0])} goes on after frame {edit.frame}.")
    if state[b].previous >= 0:
        raise _NoFitError(
            f"The track of {_at(edit.where[1])} begins before frame {edit.later_frame}."
        )
    mend.attach(state, a, b, "hand")
    return ""


@_apply.register
def _(edit: DeleteTrack, state: State, number: int) -> str:
    row = _linked_row(edit, state)
    rows = mend.take_out_track(state, state.head(row))
    real = sum(state[one].winding == state[one].charge for one in rows)
    if not real:
        return ""
    return f"{real} of {len(rows)} singularities are taken out where the winding is their charge"


@_apply.register
def _(edit: RenameTrack, state: State, number: int) -> str:
    mend.rename(state, state[_linked_row(edit, state)].track, edit.new_track)
    return ""


@_apply.register
def _(edit: MarkPair, state: State, number: int) -> str:
    side: Side = "end" if edit.event == "pair_death" else "start"
    tips: list[Tip] = []
    for place, charge in zip(edit.where, (1, -1), strict=True):
        row = _checked_linked(state, _reattached(state, edit.frame, place, charge))
        if (state[row].following if side == "end" else state[row].previous) >= 0:
            word = "goes on after" if side == "end" else "begins before"
            raise _NoFitError(f"The track of {_at(place)} {word} frame {edit.frame}.")
        tips.append((row, side))
    around = mend.frames_around(state, tips[0])
    if around is None:
        raise _NoFitError(f"Nothing was measured on the other side of frame {edit.frame}.")
    number_before = state.event_of.get(tips[0])
    if number_before is not None and number_before == state.event_of.get(tips[1]):
        return ""
    mend.pair(state, tips[0], tips[1], edit.event, around)
    return ""


@_apply.register(Barrier)
@_apply.register(Bridge)
@_apply.register(Region)
def _(edit: Barrier | Bridge | Region, state: State, number: int) -> str:
    if edit.frame is not None and edit.frame not in state.found.searched:
        raise _NoFitError(f"Frame {edit.frame} is not among the frames that were measured.")
    state.put(state.drawn, number, edit)
    return ""


_Single = Move | FlipCharge | Delete | Reject | Confirm | DeleteTrack | RenameTrack


def _row(edit: _Single, state: State) -> int:
    return _reattached(state, edit.frame, edit.where, edit.charge)


def _linked_row(edit: _Single, state: State) -> int:
    return _checked_linked(state, _row(edit, state))


def _two_rows(edit: CutTrack | JoinTracks, state: State) -> tuple[int, int]:
    a = _reattached(state, edit.frame, edit.where[0], edit.charge)
    b = _reattached(state, edit.later_frame, edit.where[1], edit.charge)
    return _checked_linked(state, a), _checked_linked(state, b)


def _checked_linked(state: State, row: int) -> int:
    if state[row].track < 0:
        raise _NoFitError("There are no tracks yet.")
    return row


def _at(place: Point) -> str:
    return f"(y={place[0]:.1f}, x={place[1]:.1f}) px"


def _both(edit: CutTrack) -> str:
    return f"frames {edit.frame} and {edit.later_frame}"
