"""Residues of a wrapped phase: the plaquettes around which it turns once."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

TWO_PI = 2.0 * np.pi
NEAR_PI_RAD = 0.9 * np.pi
"""Wrapped differences beyond this are called near pi: noise may have flipped them."""


def wrap(phase: NDArray[np.floating]) -> NDArray[np.floating]:
    """Bring a phase into (-pi, pi], in radians, keeping its floating type.

    Parameters
    ----------
    phase : float array
        Any real phase, in radians.

    Returns
    -------
    float array of the same shape
        Congruent to `phase` modulo 2 pi. What would be -pi becomes pi.
    """
    phase = np.asarray(phase)
    kind = phase.dtype if phase.dtype in (np.float32, np.float64) else np.dtype(np.float64)
    turns = np.ceil((phase.astype(np.float64) - np.pi) / TWO_PI)
    wrapped: NDArray[np.floating] = (phase - TWO_PI * turns).astype(kind)
    return wrapped


def residues(
    phase: NDArray[np.floating], *, valid: NDArray[np.bool_] | None = None
) -> NDArray[np.int8]:
    """Return the winding of a phase around every plaquette of four pixels.

    Parameters
    ----------
    phase : (y, x) float array
        Phase in radians, taken modulo 2 pi.
    valid : (y, x) bool array, optional
        True where the phase counts. A plaquette with a pixel left out has no residue here,
        and the phase may be anything there.

    Returns
    -------
    (y - 1, x - 1) int8 array
        Residue (j, i) sits at (j + 0.5, i + 0.5) px. It is +1 when the phase grows by 2 pi
        on a loop turning from +x (right) towards +y (down), -1 when it falls so.

    Raises
    ------
    TypeError
        If `phase` is not a real array.
    ValueError
        If its shape is not (y, x) with at least 2 x 2 pixels, or it is not finite.

    Notes
    -----
    Differences are wrapped into (-pi, pi] in one direction of each edge, so that windings of
    plaquettes add up exactly to the winding along the border around them.

    References
    ----------
    R. M. Goldstein, H. A. Zebker, C. L. Werner, Radio Science 23, 713 (1988).

    Examples
    --------
    >>> import numpy as np
    >>> y, x = np.mgrid[-1.5:2, -1.5:2]
    >>> residues(np.arctan2(y, x))
    array([[0, 0, 0],
           [0, 1, 0],
           [0, 0, 0]], dtype=int8)
    """
    phase, mask = checked_phase(phase, valid)
    turn_y, turn_x = edge_turns(phase)
    charge = plaquette_charges(turn_y, turn_x)
    if mask is not None:
        charge[~(mask[:-1, :-1] & mask[:-1, 1:] & mask[1:, :-1] & mask[1:, 1:])] = 0
    return charge


def border_winding(phase: NDArray[np.floating]) -> int:
    """Return how many turns a phase makes along the border of its frame.

    Parameters
    ----------
    phase : (y, x) float array
        Phase in radians, taken modulo 2 pi.

    Returns
    -------
    int
        Turns on the loop right, down, left, up: the sum of all residues.

    Raises
    ------
    TypeError, ValueError
        As `residues`.
    """
    phase, _ = checked_phase(phase, None)
    top, bottom = edge_turns(phase[[0, -1]])[1]
    left, right = edge_turns(phase[:, [0, -1]])[0].T
    return -int(
        top.sum(dtype=np.int64)
        + right.sum(dtype=np.int64)
        - bottom.sum(dtype=np.int64)
        - left.sum(dtype=np.int64)
    )


def checked_phase(
    phase: NDArray[np.floating], valid: NDArray[np.bool_] | None
) -> tuple[NDArray[np.floating], NDArray[np.bool_] | None]:
    """Return phase and mask ready for the kernels: wrapped, with 0 where left out.

    Raises
    ------
    TypeError
        If `phase` is not real or `valid` not boolean.
    ValueError
        If shapes do not fit or a valid pixel is not finite.
    """
    phase = np.asarray(phase)
    if phase.dtype.kind not in "fiu":
        raise TypeError(f"phase: expected a real array in radians, got dtype {phase.dtype}")
    if phase.ndim != 2 or min(phase.shape) < 2:
        raise ValueError(
            f"phase: expected shape (y, x) with at least 2 x 2 pixels, got {phase.shape}"
        )
    kind = np.float32 if phase.dtype == np.float32 else np.float64
    phase = np.ascontiguousarray(phase, dtype=kind)
    mask = checked_mask(valid, phase.shape)
    if mask is not None:
        phase = np.where(mask, phase, kind(0.0))
    largest = _largest_modulus(phase)
    if not np.isfinite(largest):
        j, i = np.argwhere(~np.isfinite(phase))[0]
        raise ValueError(
            f"phase: expected finite values where valid, got {phase[j, i]} at pixel "
            f"(y={j}, x={i}); leave such pixels out with valid="
        )
    if largest > kind(np.pi):
        phase = wrap(phase)
    return phase, mask


def checked_mask(
    valid: NDArray[np.bool_] | None, shape: tuple[int, ...]
) -> NDArray[np.bool_] | None:
    """Return the mask, or None when every pixel counts.

    Raises
    ------
    TypeError
        If it is not boolean.
    ValueError
        If its shape is not that of the phase, or it leaves no pixel.
    """
    if valid is None:
        return None
    mask = np.ascontiguousarray(valid)
    if mask.dtype != np.bool_:
        raise TypeError(f"valid: expected a bool array (True means use), got dtype {mask.dtype}")
    if mask.shape != shape:
        raise ValueError(f"valid: expected the shape of phase, {shape}, got {mask.shape}")
    if not mask.any():
        raise ValueError("valid: expected at least one pixel to use, got none")
    return None if mask.all() else mask


@njit(cache=True, nogil=True)
def _largest_modulus(phase: NDArray[np.floating]) -> float:
    """Return the largest modulus, NaN or infinity when there is one."""
    largest = 0.0
    for j in range(phase.shape[0]):
        row = 0.0
        for i in range(phase.shape[1]):
            value = abs(phase[j, i])
            if not value <= row:
                row = value
            if row != row:
                return np.nan
        largest = max(largest, row)
    return largest


@njit(cache=True, nogil=True)
def edge_turns(phase: NDArray[np.floating]) -> tuple[NDArray[np.int8], NDArray[np.int8]]:
    """Return the turns to take off the differences along y and x to wrap them."""
    ny, nx = phase.shape
    turn_y = np.empty((ny - 1, nx), np.int8)
    turn_x = np.empty((ny, nx - 1), np.int8)
    for j in range(ny):
        for i in range(nx - 1):
            step = float(phase[j, i + 1]) - float(phase[j, i])
            turn_x[j, i] = (step > np.pi) - (step <= -np.pi)
        if j < ny - 1:
            for i in range(nx):
                step = float(phase[j + 1, i]) - float(phase[j, i])
                turn_y[j, i] = (step > np.pi) - (step <= -np.pi)
    return turn_y, turn_x


@njit(cache=True, nogil=True)
def plaquette_charges(turn_y: NDArray[np.integer], turn_x: NDArray[np.integer]) -> NDArray[np.int8]:
    """Return the residues that belong to the turns of the edges."""
    ny, nx = turn_y.shape[0], turn_x.shape[1]
    charge = np.empty((ny, nx), np.int8)
    for j in range(ny):
        for i in range(nx):
            charge[j, i] = turn_y[j, i] + turn_x[j + 1, i] - turn_x[j, i] - turn_y[j, i + 1]
    return charge


def near_pi_part(wrapped: NDArray[np.floating], mask: NDArray[np.bool_] | None) -> float:
    """Return the fraction of edges between valid pixels that differ by more than 0.9 pi."""
    if mask is None:
        mask = np.broadcast_to(np.bool_(True), wrapped.shape)
    near, edges = _count_near_pi(wrapped, mask)
    return near / edges if edges else 0.0


@njit(cache=True, nogil=True)
def _count_near_pi(wrapped: NDArray[np.floating], mask: NDArray[np.bool_]) -> tuple[int, int]:
    near, edges = 0, 0
    ny, nx = wrapped.shape
    for j in range(ny):
        for i in range(nx):
            if not mask[j, i]:
                continue
            if i + 1 < nx and mask[j, i + 1]:
                step = abs(float(wrapped[j, i + 1]) - float(wrapped[j, i]))
                near += min(step, TWO_PI - step) > NEAR_PI_RAD
                edges += 1
            if j + 1 < ny and mask[j + 1, i]:
                step = abs(float(wrapped[j + 1, i]) - float(wrapped[j, i]))
                near += min(step, TWO_PI - step) > NEAR_PI_RAD
                edges += 1
    return near, edges
