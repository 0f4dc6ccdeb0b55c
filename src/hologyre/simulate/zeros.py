"""Zeros of a wave known in closed form, found on the formula itself and checked."""

from __future__ import annotations

import numpy as np
import pandas as pd
from scipy.ndimage import maximum_filter
from scipy.spatial import cKDTree

from hologyre.grid import Window
from hologyre.simulate.wave import ComplexArray, FloatArray, Wave

# Lattice cells per finest length at first; halved until two lattices agree.
_CELLS = 10
_REFINEMENTS = 4
_NEWTON_STEPS = 60
# Newton's first step from the lattice point next to a zero, in cells, at most; and the
# 2 s1 s2 / (s1^2 + s2^2) of the slopes below which that step is not trusted.
_REACH = 1.1
_PARALLEL = 0.3
# After this many steps starts that came this close together, in finest lengths, go on as one.
_MERGE_AFTER = 4
_MERGED = 1e-5
# Two ends of Newton's method closer than this share of the finest length are one zero.
_SAME = 1e-6
# Below this 2 s1 s2 / (s1^2 + s2^2) of the Jacobian, or after this many Newton steps (linear
# convergence: a zero of higher order), the charge is counted round a circle.
_FLAT = 1e-3
_SLOW = 14


class TruthError(RuntimeError):
    """The zeros found do not add up; the wave is degenerate or too wild for the lattice."""


def find_zeros(wave: Wave, window: Window, t: float = 0.0) -> pd.DataFrame:
    """Find every zero of a wave in a window at one time.

    Newton's method on the analytic value and gradient starts from each lattice cell that could
    hold a zero; the lattice is refined until the set stays the same and its charge equals the
    winding along the window's border. Charges are the sign of the analytic Jacobian, or a winding
    round a small circle for zeros of higher order.

    Parameters
    ----------
    wave : Wave
        The wave.
    window : Window
        Where to look, px, borders included.
    t : float
        Time, frames.

    Returns
    -------
    DataFrame
        Columns y_px, x_px, charge; sorted by y, then x.

    Raises
    ------
    TruthError
        If the zeros do not add up to the border's winding on the finest lattice, or a zero lies
        on the border.
    """
    winding = border_winding(wave, window, t)
    step = wave.finest_px / _CELLS
    before: FloatArray | None = None
    for _ in range(_REFINEMENTS):
        y, x, taken = _newton(wave, *_candidates(wave, window, t, step), t)
        y, x, taken = _distinct(y, x, taken, window, wave.finest_px)
        charge = _charges(wave, y, x, t, taken)
        stable = before is not None and before.size == charge.size
        if stable and charge.sum() == winding:
            order = np.lexsort((x, y))
            return pd.DataFrame(
                {"y_px": y[order], "x_px": x[order], "charge": charge[order].astype(np.int64)}
            )
        before = charge
        step /= 2
    raise TruthError(
        f"{charge.size} zeros of total charge {int(charge.sum()):+d} found at t = {t:g}, "
        f"but the phase winds {winding:+d} times along the border"
    )


def border_winding(wave: Wave, window: Window, t: float = 0.0) -> int:
    """Return how often the phase turns along a window's border, from +x to +y.

    Raises
    ------
    TruthError
        If a zero lies on the border.
    """
    corners = [
        (window.y_min, window.x_min),
        (window.y_min, window.x_max),
        (window.y_max, window.x_max),
        (window.y_max, window.x_min),
    ]
    y, x = [], []
    for (y0, x0), (y1, x1) in zip(corners, corners[1:] + corners[:1], strict=True):
        count = int(np.ceil(np.hypot(y1 - y0, x1 - x0) / wave.finest_px * 8)) + 2
        along = np.arange(count) / count
        y.append(y0 + along * (y1 - y0))
        x.append(x0 + along * (x1 - x0))
    return _winding(wave, np.concatenate(y), np.concatenate(x), t)


def _winding(wave: Wave, y: FloatArray, x: FloatArray, t: float) -> int:
    """Return the turns of the phase along a closed polygon, refined where the phase is steep."""
    for _ in range(40):
        value = wave.field(y, x, t)
        turn = np.angle(np.roll(value, -1) * np.conj(value))
        steep = np.flatnonzero((np.abs(turn) >= np.pi / 3) | (value == 0))
        if steep.size == 0:
            return int(np.rint(turn.sum() / (2 * np.pi)))
        y = np.insert(y, steep + 1, ((y + np.roll(y, -1)) / 2)[steep])
        x = np.insert(x, steep + 1, ((x + np.roll(x, -1)) / 2)[steep])
    raise TruthError(f"a zero lies on the closed line at t = {t:g}: its winding has no value")


def _candidates(wave: Wave, window: Window, t: float, step: float) -> tuple[FloatArray, FloatArray]:
    """Return the lattice points whose neighbourhood could hold a zero by value and slope."""
    y = np.arange(window.y_min - step, window.y_max + 2 * step, step)
    x = np.arange(window.x_min - step, window.x_max + 2 * step, step)
    value = wave.on_grid(y, x, t)
    slope_y: ComplexArray = np.gradient(value, axis=0)
    slope_x: ComplexArray = np.gradient(value, axis=1)
    square = np.abs(slope_y) ** 2 + np.abs(slope_x) ** 2
    # The largest slope nearby bounds how far the modulus can fall within the cell.
    near = np.abs(value) <= 0.75 * np.sqrt(maximum_filter(square, size=3))
    # Newton's first step says which lattice points are next to the zero, unless the slopes along
    # both axes are nearly parallel and it cannot be trusted.
    step_y, step_x, jacobian = solve_step(value, slope_y, slope_x)
    near &= (np.maximum(np.abs(step_y), np.abs(step_x)) < _REACH) | (
        2 * np.abs(jacobian) < _PARALLEL * square
    )
    row, column = np.nonzero(near)
    return y[row], x[column]


def _newton(
    wave: Wave, y: FloatArray, x: FloatArray, t: float
) -> tuple[FloatArray, FloatArray, np.ndarray]:
    """Return where Newton's method ends and in how many steps; -1 where it does not end."""
    y, x = y.copy(), x.copy()
    start_y, start_x = y.copy(), x.copy()
    taken = np.full(y.shape, -1)
    active = np.arange(y.size)
    longest = wave.finest_px / 8
    for step in range(1, _NEWTON_STEPS + 1):
        if active.size == 0:
            break
        jet = wave.jet(y[active], x[active], t)
        dy, dx, _ = solve_step(jet.value, jet.dy, jet.dx)
        length = np.hypot(dy, dx)
        damp = np.minimum(1.0, longest / np.maximum(length, longest * 1e-9))
        y[active] += damp * dy
        x[active] += damp * dx
        done = length < 1e-11 * wave.finest_px
        taken[active[done]] = step
        strayed = np.hypot(y[active] - start_y[active], x[active] - start_x[active])
        active = active[~done & (strayed < wave.finest_px / 2)]
        if step == _MERGE_AFTER:
            spots = np.stack([y[active], x[active]], axis=1) / (_MERGED * wave.finest_px)
            active = active[np.unique(np.rint(spots), axis=0, return_index=True)[1]]
    # Zeros of higher order creep up by a constant factor and are as good as they get.
    jet = wave.jet(y[active], x[active], t)
    dy, dx, _ = solve_step(jet.value, jet.dy, jet.dx)
    taken[active[np.hypot(dy, dx) < 1e-8 * wave.finest_px]] = _NEWTON_STEPS
    return y, x, taken


def solve_step(
    value: ComplexArray, dy: ComplexArray, dx: ComplexArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return Newton's step (y, x) towards a zero and the Jacobian Re dx Im dy - Re dy Im dx."""
    jacobian = dx.real * dy.imag - dy.real * dx.imag
    safe = np.where(jacobian == 0, np.inf, jacobian)
    step_x = -(value.real * dy.imag - value.imag * dy.real) / safe
    step_y = -(value.imag * dx.real - value.real * dx.imag) / safe
    return step_y, step_x, jacobian


def _distinct(
    y: FloatArray, x: FloatArray, taken: np.ndarray, window: Window, finest: float
) -> tuple[FloatArray, FloatArray, np.ndarray]:
    """Keep one of each zero that lies in the window."""
    kept = (taken >= 0) & window.contains(y, x)
    y, x, taken = y[kept], x[kept], taken[kept]
    if y.size == 0:
        return y, x, taken
    pairs = cKDTree(np.stack([y, x], axis=1)).query_pairs(_SAME * finest, output_type="ndarray")
    single = np.ones(y.size, dtype=bool)
    single[pairs.max(axis=1)] = False
    return y[single], x[single], taken[single]


def _charges(wave: Wave, y: FloatArray, x: FloatArray, t: float, taken: np.ndarray) -> np.ndarray:
    """Return the charge of each zero."""
    jet = wave.jet(y, x, t)
    jacobian = jet.dx.real * jet.dy.imag - jet.dy.real * jet.dx.imag
    charge = np.sign(jacobian)
    square = np.abs(jet.dx) ** 2 + np.abs(jet.dy) ** 2
    doubtful = np.flatnonzero((taken > _SLOW) | (2 * np.abs(jacobian) < _FLAT * square))
    if doubtful.size:
        radius = np.full(y.size, wave.finest_px / 20)
        if y.size > 1:
            spots = np.stack([y, x], axis=1)
            radius = np.minimum(radius, cKDTree(spots).query(spots, k=2)[0][:, 1] / 2)
        angle = 2 * np.pi * np.arange(48) / 48
        for i in doubtful:
            ring_y = y[i] + radius[i] * np.sin(angle)
            ring_x = x[i] + radius[i] * np.cos(angle)
            charge[i] = _winding(wave, ring_y, ring_x, t)
    return charge
