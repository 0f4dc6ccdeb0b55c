"""Following the zeros of a wave through space and time, round births and deaths.

In (y, x, t) the zeros of a complex field are lines along ``grad Re E x grad Im E``, whose time
component is the Jacobian, so the charge: a line climbs while its zero has the charge it began
with and turns back in time where two opposite zeros meet. Stepping along the line's length
therefore passes births and deaths without trouble.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from hologyre.grid import Window
from hologyre.simulate.wave import ComplexArray, FloatArray, Wave

# A step is taken again at half its length if the line turns more than this (cosine) or the
# corrector moves it by more than this part of the step.
_STRAIGHT = 0.95
_NEAR = 0.2
_CORRECTIONS = 3
# Step limits, in finest lengths.
_LONGEST = 1 / 16
_SHORTEST = 1e-7
# A line this far outside the window, in finest lengths, is not followed further.
_AWAY = 2.0
_ROUNDS = 5000


class Fate(IntEnum):
    """How a line ended."""

    LOST = 0
    ARRIVED = 1
    RETURNED = 2
    AWAY = 3


@dataclass(frozen=True, eq=False)
class Ends:
    """Where lines ended; arrays with one entry a line.

    Attributes
    ----------
    y, x : float arrays
        Position at the end, px.
    fate : int array of `Fate`
        ARRIVED at the other time, RETURNED to its own, AWAY from the window, or LOST.
    turn : (n, 3) float array
        (y, x, t) of the turning point farthest in time; NaN without one.
    crossing : (n, 3) float array
        (y, x, t) where the line first crossed the window's border; NaN if it did not.
    """

    y: FloatArray
    x: FloatArray
    fate: NDArray[np.int64]
    turn: FloatArray
    crossing: FloatArray


@dataclass(frozen=True)
class _Space:
    """Space-time with the time axis in px, `pace` px a frame from `start`."""

    wave: Wave
    start: float
    pace: float

    def jet(self, p: FloatArray) -> tuple[ComplexArray, ComplexArray]:
        """Return the field and its gradient (n, 3) along y, x and scaled time."""
        jet = self.wave.jet(p[:, 0], p[:, 1], self.time(p[:, 2]))
        return jet.value, np.stack([jet.dy, jet.dx, jet.dt / self.pace], axis=1)

    def time(self, scaled: FloatArray) -> FloatArray:
        """Return the time in frames."""
        return self.start + scaled / self.pace

    def tangent(self, gradient: ComplexArray) -> FloatArray:
        """Return the unit tangents (y, x, time); climbing where the charge is positive."""
        re, im = gradient.real, gradient.imag
        # Axes in the order x, y, time are right-handed; y, x, time needs the other sign.
        tangent = -np.cross(re, im)
        length = np.linalg.norm(tangent, axis=1, keepdims=True)
        return tangent / np.where(length == 0, 1.0, length)

    def to_line(self, p: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the nearest points on the lines and how far they were moved."""
        here = p.copy()
        for _ in range(_CORRECTIONS):
            value, gradient = self.jet(here)
            here += _least_step(value, gradient)
        return here, np.linalg.norm(here - p, axis=1)

    def to_plane(self, p: FloatArray, axis: int, level: FloatArray) -> FloatArray:
        """Return where the lines near p meet the planes coordinate `axis` = level."""
        here = p.copy()
        here[:, axis] = level
        free = [i for i in range(3) if i != axis]
        for _ in range(12):
            value, gradient = self.jet(here)
            a, b = gradient[:, free[0]], gradient[:, free[1]]
            det = a.real * b.imag - b.real * a.imag
            det = np.where(det == 0, np.inf, det)
            here[:, free[0]] -= (value.real * b.imag - b.real * value.imag) / det
            here[:, free[1]] -= (a.real * value.imag - value.real * a.imag) / det
        return here


def follow(
    wave: Wave,
    window: Window,
    y: FloatArray,
    x: FloatArray,
    t_from: float,
    t_to: float,
    *,
    refine: int = 0,
) -> Ends:
    """Follow the lines of zeros from simple zeros at one time towards another.

    Parameters
    ----------
    wave : Wave
        The wave.
    window : Window
        Where lines are of interest, px.
    y, x : (n,) float arrays
        Zeros at `t_from`.
    t_from, t_to : float
        Times, frames; `t_to` may be earlier.
    refine : int
        Halve the longest step this many times.

    Returns
    -------
    Ends
        The line's end for every zero.
    """
    count = y.size
    space = _Space(wave, t_from, _pace(wave, y, x, t_from))
    goal = (t_to - t_from) * space.pace
    ahead = 1.0 if goal > 0 else -1.0
    longest = wave.finest_px * _LONGEST / 2**refine
    end = np.full((count, 3), np.nan)
    fate = np.full(count, Fate.LOST, dtype=np.int64)
    turn = np.full((count, 3), np.nan)
    crossing = np.full((count, 3), np.nan)

    active = np.arange(count)
    p = np.stack([y, x, np.zeros(count)], axis=1)
    along = space.tangent(space.jet(p)[1])
    sense = ahead * np.sign(along[:, 2])
    step = np.full(count, min(longest, abs(goal) / 2))
    climbed = np.zeros(count, dtype=bool)
    for _ in range(_ROUNDS):
        if active.size == 0:
            break
        now, heading = p[active], along[active] * sense[active, np.newaxis]
        there, moved = space.to_line(now + step[active, np.newaxis] * heading)
        tangent = space.tangent(space.jet(there)[1])
        new_heading = tangent * sense[active, np.newaxis]
        good = (np.sum(new_heading * heading, axis=1) > _STRAIGHT) & (moved < _NEAR * step[active])
        step[active] *= np.where(good, 1.4, 0.5)
        np.minimum(step, longest, out=step)

        went = active[good]
        old, new = now[good], there[good]
        _mark_crossings(space, window, old, new, went, crossing)
        turned = heading[good, 2] * new_heading[good, 2] < 0
        _mark_turns(space, old[turned], new[turned], went[turned], ahead, turn)
        p[went], along[went] = new, tangent[good]

        arrived = ahead * (new[:, 2] - goal) >= 0
        returned = climbed[went] & (ahead * new[:, 2] <= 0)
        climbed[went] |= ahead * new[:, 2] > 0
        away = ~window.contains(new[:, 0], new[:, 1], -_AWAY * wave.finest_px)
        for which, level, name in ((arrived, goal, Fate.ARRIVED), (returned, 0.0, Fate.RETURNED)):
            if which.any():
                span = new[which, 2] - old[which, 2]
                part = np.clip((level - old[which, 2]) / np.where(span == 0, 1, span), 0, 1)
                guess = old[which] + part[:, np.newaxis] * (new[which] - old[which])
                end[went[which]] = space.to_plane(guess, 2, np.full(len(guess), level))
                fate[went[which]] = name
        fate[went[away & ~arrived & ~returned]] = Fate.AWAY
        finished = fate != Fate.LOST
        stuck = step < _SHORTEST * wave.finest_px
        active = active[~finished[active] & ~stuck[active]]
    for marks in (turn, crossing):
        marks[:, 2] = space.time(marks[:, 2])
    return Ends(end[:, 0], end[:, 1], fate, turn, crossing)


def _pace(wave: Wave, y: FloatArray, x: FloatArray, t: float) -> float:
    """Return the px a frame is worth: the median speed of the zeros, within reason."""
    slowest = 1e-3 * wave.finest_px
    if y.size == 0:
        return slowest
    jet = wave.jet(y, x, t)
    jacobian = jet.dx.real * jet.dy.imag - jet.dy.real * jet.dx.imag
    vx = jet.dt.real * jet.dy.imag - jet.dt.imag * jet.dy.real
    vy = jet.dt.imag * jet.dx.real - jet.dt.real * jet.dx.imag
    with np.errstate(divide="ignore", invalid="ignore"):
        speed = np.hypot(vx, vy) / np.abs(jacobian)
    speed = speed[np.isfinite(speed)]
    return max(slowest, float(np.median(speed)) if speed.size else 0.0)


def _least_step(value: ComplexArray, gradient: ComplexArray) -> FloatArray:
    """Return the shortest step (n, 3) that undoes the field to first order."""
    re, im = gradient.real, gradient.imag
    aa, bb = np.sum(re * re, axis=1), np.sum(im * im, axis=1)
    ab = np.sum(re * im, axis=1)
    det = aa * bb - ab**2
    det = np.where(det == 0, np.inf, det)
    on_re = (bb * value.real - ab * value.imag) / det
    on_im = (aa * value.imag - ab * value.real) / det
    step: FloatArray = -(on_re[:, np.newaxis] * re + on_im[:, np.newaxis] * im)
    return step


def _mark_crossings(
    space: _Space,
    window: Window,
    old: FloatArray,
    new: FloatArray,
    lines: NDArray[np.int64],
    crossing: FloatArray,
) -> None:
    """Note where lines that had not done so yet cross the window's border."""
    was_in = window.contains(old[:, 0], old[:, 1])
    is_in = window.contains(new[:, 0], new[:, 1])
    sides = (
        (0, window.y_min, -1.0),
        (0, window.y_max, 1.0),
        (1, window.x_min, -1.0),
        (1, window.x_max, 1.0),
    )
    for axis, level, outward in sides:
        beyond = (outward * (old[:, axis] - level) > 0) != (outward * (new[:, axis] - level) > 0)
        which = (was_in != is_in) & beyond & np.isnan(crossing[lines, 0])
        if which.any():
            a, b = old[which], new[which]
            part = (level - a[:, axis]) / (b[:, axis] - a[:, axis])
            guess = a + part[:, np.newaxis] * (b - a)
            crossing[lines[which]] = space.to_plane(guess, axis, np.full(len(guess), level))


def _mark_turns(
    space: _Space,
    old: FloatArray,
    new: FloatArray,
    lines: NDArray[np.int64],
    ahead: float,
    turn: FloatArray,
) -> None:
    """Note where lines turn in time, keeping the turn farthest ahead."""
    if lines.size == 0:
        return
    low, high = old.copy(), new.copy()
    began = np.sign(space.tangent(space.jet(old)[1])[:, 2])
    for _ in range(30):
        middle, _ = space.to_line((low + high) / 2)
        turned = (np.sign(space.tangent(space.jet(middle)[1])[:, 2]) != began)[:, np.newaxis]
        low = np.where(turned, low, middle)
        high = np.where(turned, middle, high)
    known = ahead * turn[lines, 2]
    farther = np.isnan(known) | (ahead * middle[:, 2] > known)
    turn[lines[farther]] = middle[farther]
