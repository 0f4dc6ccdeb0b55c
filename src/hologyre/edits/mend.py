"""Tracks and events mended around an edit, by one fixed rule and nowhere else.

Links were made once, from what was found. An edit changes the tracks it touches and no
other: a singularity put in joins the ends that lie nearest by the prices links are made with,
one taken out leaves its neighbours joined if the gap may be bridged.
"""

from __future__ import annotations

from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from hologyre.edits.state import Happened, State, Tip

_PAIRED = {"end": "pair_death", "start": "pair_birth"}
_CROSSED = {"end": "exit", "start": "entry"}


def attach(state: State, a: int, b: int, link: str) -> None:
    """Join the last row of a track to the first of another, which takes its number."""
    loosen(state, (a, "end"), (b, "start"))
    track = state[a].track
    state.drop(state.by_track, state[b].track)
    state.set(a, following=b)
    state.set(b, previous=a, link=link)
    _number(state, b, track)


def detach(state: State, a: int, b: int) -> None:
    """Cut a track between two rows; what follows gets a new number."""
    state.set(a, following=-1)
    state.set(b, previous=-1, link="")
    track = state.number("track")
    _number(state, b, track)
    state.put(state.by_track, track, b)


def take_out(state: State, row: int) -> None:
    """Take a row out of its track, and join what is left where the gap may be bridged."""
    own = state[row]
    if own.track < 0:
        return
    before, after = own.previous, own.following
    loosen(state, (row, "end"), (row, "start"))
    if before < 0:
        if after < 0:
            state.drop(state.by_track, own.track)
        else:
            state.put(state.by_track, own.track, after)
            state.set(after, previous=-1, link="")
    elif after < 0:
        state.set(before, following=-1)
    elif _bridgeable(state, before, after):
        state.set(before, following=after)
        state.set(after, previous=before, link="bridged")
    else:
        state.set(before, following=-1)
        state.set(after, previous=-1, link="")
        track = state.number("track")
        _number(state, after, track)
        state.put(state.by_track, track, after)
    state.set(row, previous=-1, following=-1, link="", track=-1)
    if before >= 0 and state[before].following < 0:
        settle(state, (before, "end"))
    if after >= 0 and state[after].previous < 0:
        settle(state, (after, "start"))


def take_out_track(state: State, head: int) -> list[int]:
    """Take a whole track out; return its rows."""
    rows = list(state.chain(head))
    state.drop(state.by_track, state[head].track)
    for row in rows:
        state.set(row, previous=-1, following=-1, link="", track=-1, kept=False)
    loosen(state, (rows[-1], "end"), (rows[0], "start"))
    return rows


def put_in(state: State, row: int) -> None:
    """Join a row that has no track to the tracks near it, or begin one with it."""
    if not state.found.linked:
        return
    choice = _neighbours(state, row)
    if choice.opens:
        detach(state, choice.before, choice.after)
    track = state.number("track")
    state.set(row, track=track)
    state.put(state.by_track, track, row)
    if choice.after >= 0:
        _join(state, row, choice.after)
    if choice.before >= 0:
        _join(state, choice.before, row)
    elif choice.after >= 0:
        # a track that begins earlier than it did keeps its number
        rename(state, state[row].track, choice.track)
    if choice.before < 0:
        settle(state, (row, "start"))
    if choice.after < 0:
        settle(state, (row, "end"))


def rename(state: State, track: int, new: int) -> None:
    """Give a track a number; the track that has it, if any, takes the old one."""
    if track == new:
        return
    head, other = state.by_track[track], state.by_track.get(new)
    _number(state, head, new)
    if other is None:
        state.drop(state.by_track, track)
    else:
        _number(state, other, track)
        state.put(state.by_track, track, other)
    state.put(state.by_track, new, head)
    if new >= state.next["track"]:
        state.put(state.next, "track", new + 1)


def loosen(state: State, *tips: Tip) -> None:
    """Take ends or starts of tracks out of their events; the others are settled anew."""
    left: list[Tip] = []
    for tip in tips:
        number = state.event_of.get(tip)
        if number is None:
            continue
        concerned = state.events[number].tips
        state.drop(state.events, number)
        for one in concerned:
            state.drop(state.event_of, one)
        left += [one for one in concerned if one not in tips]
    for one in left:
        settle(state, one)


def settle(state: State, tip: Tip) -> None:
    """Say how a track ended, or began: in a pair, over the border, or unexplained.

    Nothing is said at the first and the last frame, nor beside a hole in the frames that is
    too long to be bridged.
    """
    around = frames_around(state, tip)
    if around is None:
        return
    row, side = tip
    partner = _partner(state, tip, around)
    if partner is not None:
        loosen(state, partner)
        happen(state, _PAIRED[side], around, (tip, partner))
        return
    law, own = state.found.law, state[row]
    border = state.found.border
    to_border = min(
        own.y_px - border.y_min, border.y_max - own.y_px,
        own.x_px - border.x_min, border.x_max - own.x_px,
    )  # fmt: skip
    crossing = float(law.crossing(np.array(to_border), 1.0))
    crossed = crossing < state.found.price_alone
    happen(state, _CROSSED[side] if crossed else "unexplained", around, (tip,))


def pair(state: State, a: Tip, b: Tip, kind: str, around: tuple[int, int]) -> None:
    """Enter two ends, or two starts, as a pair, whatever was said of them before."""
    loosen(state, a, b)
    happen(state, kind, around, (a, b))


def happen(state: State, kind: str, around: tuple[int, int], tips: tuple[Tip, ...]) -> None:
    """Enter an event in the middle of its singularities."""
    places = [(state[row].y_px, state[row].x_px) for row, _ in tips]
    y, x = (float(np.mean(v)) for v in zip(*places, strict=True))
    number = state.number("event")
    state.put(state.events, number, Happened(kind, *around, y, x, tips, -1))
    for tip in tips:
        state.put(state.event_of, tip, number)


def frames_around(state: State, tip: Tip) -> tuple[int, int] | None:
    """Return the last frame before an end or a start and the first after it, if there are both."""
    row, side = tip
    searched, frame = state.found.searched, state.frame_of(row)
    place = int(np.searchsorted(searched, frame))
    first, last = (place, place + 1) if side == "end" else (place - 1, place)
    if first < 0 or last >= len(searched):
        return None
    around = int(searched[first]), int(searched[last])
    return around if around[1] - around[0] <= state.found.max_gap + 1 else None


def _number(state: State, row: int, track: int) -> None:
    for one in list(state.chain(row)):
        state.set(one, track=track)


def _join(state: State, a: int, b: int) -> None:
    """Join two rows because they lie well for it."""
    adjacent = state.frame_of(b) - state.frame_of(a) == 1
    attach(state, a, b, "assigned" if adjacent else "bridged")


class _Choice(NamedTuple):
    before: int
    after: int
    opens: bool
    track: int


def _neighbours(state: State, row: int) -> _Choice:
    """Choose the rows to join a new row to: the cheapest of all that are free in its frame."""
    found, own, frame = state.found, state[row], state.frame_of(row)
    alone = found.price_alone
    earlier, later = _candidates(state, row, -1), _candidates(state, row, 1)
    best_price, best = 0.0, (-1, -1, False)
    for a, b, opens in _pairings(state, earlier, later):
        price = 0.0
        for one, span in ((a, frame - state.frame_of(a)), (b, state.frame_of(b) - frame)):
            if one >= 0:
                distance = np.hypot(state[one].y_px - own.y_px, state[one].x_px - own.x_px)
                missed = (span - 1) * alone
                price += float(found.law.link(distance, float(span))) + missed - 2 * alone
        if opens:
            span = state.frame_of(b) - state.frame_of(a)
            distance = np.hypot(state[a].y_px - state[b].y_px, state[a].x_px - state[b].x_px)
            price -= float(found.law.link(distance, float(span))) + (span - 1) * alone - 2 * alone
        if price < best_price:
            best_price, best = price, (a, b, opens)
    before, after, opens = best
    return _Choice(before, after, opens, state[after].track if after >= 0 else -1)


def _pairings(state: State, earlier: list[int], later: list[int]) -> list[tuple[int, int, bool]]:
    """Return what may be joined on both sides: free ends and starts, or a bridge to be opened."""
    ends = [-1, *(a for a in earlier if state[a].following < 0)]
    starts = [-1, *(b for b in later if state[b].previous < 0)]
    bridges = [(a, state[a].following, True) for a in earlier if state[a].following in later]
    return [(a, b, False) for a in ends for b in starts] + bridges


def _candidates(state: State, row: int, direction: Literal[-1, 1]) -> list[int]:
    """Return rows of like charge within reach that no row of this frame is joined over."""
    found, own, frame = state.found, state[row], state.frame_of(row)
    nearest: list[tuple[float, int]] = []
    for span in range(1, found.max_gap + 2):
        other = state.in_frame(frame + direction * span)
        distance = np.hypot(other.y_px - own.y_px, other.x_px - own.x_px)
        near = (distance <= found.reach_px * span) & (other.charge == own.charge)
        beyond = other.following if direction < 0 else other.previous
        for k in _first_few(distance, near):
            far = int(beyond[k])
            clear = far < 0 or (state.frame_of(far) - frame) * direction < 0
            if clear and int(other.row[k]) != row:
                nearest.append((float(distance[k]) / span, int(other.row[k])))
    return [one for _, one in sorted(nearest)]


def _first_few(distance: NDArray[np.float64], near: NDArray[np.bool_]) -> list[int]:
    index = np.flatnonzero(near)
    return index[np.argsort(distance[index], kind="stable")[:8]].tolist()


def _bridgeable(state: State, a: int, b: int) -> bool:
    span = state.frame_of(b) - state.frame_of(a)
    distance = np.hypot(state[a].y_px - state[b].y_px, state[a].x_px - state[b].x_px)
    return span <= state.found.max_gap + 1 and bool(distance <= state.found.reach_px * span)


def _partner(state: State, tip: Tip, around: tuple[int, int]) -> Tip | None:
    """Return the unexplained end or start of opposite charge that makes a pair with this one."""
    row, side = tip
    found, own = state.found, state[row]
    other = state.in_frame(state.frame_of(row))
    beyond = other.following if side == "end" else other.previous
    distance = np.hypot(other.y_px - own.y_px, other.x_px - own.x_px)
    hole = around[1] - around[0]
    near = (distance <= found.reach_px * hole) & (other.charge == -own.charge) & (beyond < 0)
    for k in _first_few(distance, near):
        mate: Tip = (int(other.row[k]), side)
        number = state.event_of.get(mate)
        if number is None or state.events[number].kind != "unexplained":
            continue
        if float(found.law.pair(distance[k], float(hole))) < 2 * found.price_alone:
            return mate
    return None
