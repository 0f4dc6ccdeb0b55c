"""The stretches between neighbouring frames, each with the frames that tell its field."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hologyre.grid import Field, Window
from hologyre.motion.slices import Slice, common_phase, slice_of
from hologyre.motion.tempo import (
    LAGS,
    Memory,
    fit_memory,
    frame_weights,
    interpolator,
    slope_weights,
)

FRAMES = 10
"""Frames that tell the field between two of them."""

# what was measured this many frames ago counts half: motion may slow down or speed up
_FORGETTING = 0.5 ** (1 / 40)


@dataclass(frozen=True, eq=False)
class Slab:
    """The field between two slices, as `hologyre.motion.trace` takes it.

    Parameters
    ----------
    samples : (y, x, slice) complex128 array
        The slices it is interpolated from.
    series : (degree + 1, slice) array
        Chebyshev coefficients of their weights.
    unit : (2,) array
        Lengths over which the field changes: samples, and shares of the slab.
    frame : Slice
        Any of the slices, for turning px into samples.
    before, after : float
        The two slices: frame numbers, or depths.
    miss : float
        Expected relative error halfway between them.
    slope : (2, slice) array
        Weights of the slices for the rate of change at the two slices, noise averaged down.
    slope_miss : (2,) array
        Root mean square error of that rate, in field units.
    """

    samples: NDArray[np.complex128]
    series: NDArray[np.float64]
    unit: NDArray[np.float64]
    frame: Slice
    before: float
    after: float
    miss: float
    slope: NDArray[np.float64]
    slope_miss: NDArray[np.float64]


def slabs(
    fields: Iterable[Field],
    frames: Iterable[int] | None = None,
    *,
    noise: Callable[[int, Slice], float] | None = None,
    margin_px: float = 0.0,
) -> Iterator[Slab]:
    """Yield the slab between each frame and the next, holding no more than `FRAMES` of them.

    Parameters
    ----------
    fields : iterable of Field
        One 2-D field a frame, all of one shape and grid.
    frames : iterable of int, optional
        Their numbers, increasing; 0, 1, 2, ... without it.
    noise : callable, optional
        Tells the mean square of the noise of a frame, by its number and slice, in field units
        squared, or NaN; it is averaged down over the frames at hand. Without it the frames
        themselves are met.
    margin_px : float
        Rim along the border that zeros are not followed into.

    Notes
    -----
    The common phase of each frame is taken out by its overlap with the one before; what is
    left is stationary, and its memory is learnt on the way from pairs of frames at hand.
    """
    held: list[Slice] = []
    numbers: list[int] = []
    learnt = _Learnt()
    joint = _Joint()
    tilt = (0.0, 0.0)
    window: Window | None = None
    interval = 0
    for field, number in _numbered(fields, frames):
        if window is None:
            valid = field.grid.valid
            window = Window(
                valid.y_min + margin_px,
                valid.y_max - margin_px,
                valid.x_min + margin_px,
                valid.x_max - margin_px,
            )
            tilt = field.tilt_per_px
        new = slice_of(field, window=window, tilt_per_px=tilt)
        if held:
            if new.samples.shape != held[-1].samples.shape:
                msg = (
                    f"fields: frame {number} has {new.samples.shape} samples in the window, "
                    f"those before it {held[-1].samples.shape}"
                )
                raise ValueError(msg)
            new = new.turned(common_phase(held[-1], new))
        held.append(new)
        numbers.append(number)
        learnt.add(held, numbers)
        if noise is not None:
            learnt.hear(noise(number, new) / max(new.power, 1e-300))
        if len(held) > FRAMES:
            del held[0], numbers[0]
            interval -= 1
        while len(held) == FRAMES and interval < FRAMES // 2:
            yield _slab(held, numbers, interval, learnt.memory(), joint)
            interval += 1
    for rest in range(interval, len(held) - 1):
        yield _slab(held, numbers, rest, learnt.memory(), joint)


class _Joint:
    """Weights of the frame in which two slabs meet: the same for both."""

    def __init__(self) -> None:
        self._known: dict[int, float] = {}
        self._frame: int | None = None

    def weights(self, memory: Memory, numbers: list[int], index: int) -> NDArray[np.float64]:
        """Return the weights of the frames at `numbers` for the one at `index`."""
        if self._frame != numbers[index]:
            half = (FRAMES - 1) // 2
            first = max(0, min(index - half, len(numbers) - 2 * half - 1))
            near = numbers[first : first + 2 * half + 1]
            weights = frame_weights(memory, np.array(near, dtype=np.float64), index - first)
            self._frame = numbers[index]
            self._known = dict(zip(near, weights.tolist(), strict=True))
        return np.array([self._known.get(n, 0.0) for n in numbers])


def _slab(
    held: list[Slice], numbers: list[int], interval: int, memory: Memory, joint: _Joint
) -> Slab:
    before, after = numbers[interval], numbers[interval + 1]
    times = np.array(numbers, dtype=np.float64)
    ends = [joint.weights(memory, numbers, interval + k) for k in (0, 1)]
    between = interpolator(memory, times, interval, *ends)
    slopes = [slope_weights(memory, times, float(t)) for t in (before, after)]
    frame = held[interval]
    size = np.sqrt([held[interval].power, held[interval + 1].power])
    rate = np.hypot(memory.pace, np.sqrt(memory.fresh)) * (after - before)
    unit = np.array([frame.reach_px / np.mean(frame.step_px), 1.0 / max(rate, 1e-3)])
    samples = np.stack([s.samples for s in held], axis=-1)
    return Slab(
        samples,
        between.series,
        unit,
        frame,
        before,
        after,
        between.miss,
        np.stack([weights for weights, _ in slopes]),
        np.array([error for _, error in slopes]) * size,
    )


def _numbered(fields: Iterable[Field], frames: Iterable[int] | None) -> Iterator[tuple[Field, int]]:
    """Pair fields with their numbers, which must not run out and must increase."""
    numbers = itertools.count() if frames is None else iter(frames)
    previous: int | None = None
    for field in fields:
        number = next(numbers, None)
        if number is None:
            raise ValueError("frames: fewer numbers than fields")
        if previous is not None and number <= previous:
            raise ValueError(f"frames: expected increasing numbers, got {number} after {previous}")
        yield field, number
        previous = number


class _Learnt:
    """Correlation in time, gathered from pairs of frames; old ones fade."""

    def __init__(self) -> None:
        self._noise: float | None = None
        self._overlap = np.zeros(LAGS + 1)
        self._power = np.zeros(LAGS + 1)

    def add(self, held: list[Slice], numbers: list[int]) -> None:
        """Take in the last frame held, with all those before it."""
        self._overlap *= _FORGETTING
        self._power *= _FORGETTING
        new = held[-1].inside
        strength = float(np.vdot(new, new).real)
        for old, number in zip(held, numbers, strict=True):
            lag = numbers[-1] - number
            if lag <= LAGS:
                power = np.sqrt(strength * float(np.vdot(old.inside, old.inside).real))
                self._overlap[lag] += float(np.vdot(old.inside, new).real)
                self._power[lag] += power

    def hear(self, share: float) -> None:
        """Take in a frame's share of noise; NaN tells nothing."""
        if np.isfinite(share):
            old = share if self._noise is None else self._noise
            self._noise = _FORGETTING * old + (1.0 - _FORGETTING) * share

    def memory(self) -> Memory:
        """Fit the memory to what was gathered."""
        known = self._power > 0
        correlation = np.full(LAGS + 1, np.nan)
        correlation[known] = self._overlap[known] / self._power[known]
        return fit_memory(correlation, self._noise or 0.0)
