"""Regions of valid pixels apart from each other, and what ties their offsets."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray
from scipy.ndimage import distance_transform_edt
from scipy.ndimage import label as label_regions
from scipy.sparse import coo_array
from scipy.sparse.csgraph import breadth_first_order, minimum_spanning_tree


class Component(NamedTuple):
    """A region of valid pixels that hang together by their sides.

    ``label`` is its number in the label image, ``pixels`` its size. ``tied_to`` is the
    label of the region its offset was taken from, 0 for the one all others hang on.
    ``turns`` is the offset this gave, in turns, ``gap_px`` the distance to that region, and
    ``agreement`` the part, 0 to 1, of the votes across the gap that were for it.
    """

    label: int
    pixels: int
    tied_to: int
    turns: int
    gap_px: float
    agreement: float


def gather_holes(
    charge: NDArray[np.int8], mask: NDArray[np.bool_]
) -> tuple[NDArray[np.int32], NDArray[np.bool_]]:
    """Put the charge of each region left out on one plaquette; mark those at the border.

    Plaquettes around one region (pixels that touch by side or corner) are joined by free
    edges, so it does not matter where in it the charge sits.
    """
    regions, count = label_regions(~mask, structure=np.ones((3, 3)))
    at_border = np.zeros(count + 1, np.bool_)
    for side in (regions[0], regions[-1], regions[:, 0], regions[:, -1]):
        at_border[side] = True
    at_border[0] = False
    region = np.maximum(
        np.maximum(regions[:-1, :-1], regions[:-1, 1:]),
        np.maximum(regions[1:, :-1], regions[1:, 1:]),
    )
    inside = region > 0
    total = np.bincount(region[inside], charge[inside], minlength=count + 1).astype(np.int32)
    numbers, first = np.unique(region, return_index=True)
    left = charge.astype(np.int32)
    left[inside] = 0
    holes = (numbers > 0) & ~at_border[numbers]
    left.ravel()[first[holes]] = total[numbers[holes]]
    return left, at_border[region]


@njit(cache=True, nogil=True)
def integrate(
    turn_y: NDArray[np.int8],
    turn_x: NDArray[np.int8],
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
) -> NDArray[np.int32]:
    """Return the turns to add to each pixel, 0 for the first one."""
    ny, nx = turn_x.shape[0], turn_y.shape[1]
    turns = np.empty((ny, nx), np.int32)
    first = 0
    for j in range(ny):
        if j > 0:
            first += jump_y[j - 1, 0] - turn_y[j - 1, 0]
        here = first
        turns[j, 0] = here
        for i in range(1, nx):
            here += jump_x[j, i - 1] - turn_x[j, i - 1]
            turns[j, i] = here
    return turns


@njit(cache=True, nogil=True)
def integrate_valid(
    turn_y: NDArray[np.int8],
    turn_x: NDArray[np.int8],
    jump_y: NDArray[np.int32],
    jump_x: NDArray[np.int32],
    valid: NDArray[np.bool_],
) -> tuple[NDArray[np.int32], NDArray[np.int32], NDArray[np.int64]]:
    """Return the turns of each valid pixel, its component's label and the components' sizes.

    Turns are 0 at the first pixel, in reading order, of each component. Labels start at 1;
    0 marks what is left out.
    """
    ny, nx = valid.shape
    turns = np.zeros((ny, nx), np.int32)
    labels = np.zeros((ny, nx), np.int32)
    sizes = np.zeros(16, np.int64)
    stack = np.empty((1024, 2), np.int32)
    count = 0
    for j0 in range(ny):
        for i0 in range(nx):
            if not valid[j0, i0] or labels[j0, i0] != 0:
                continue
            if count == sizes.size:
                larger = np.zeros(2 * count, np.int64)
                larger[:count] = sizes
                sizes = larger
            count += 1
            labels[j0, i0] = count
            stack[0, 0], stack[0, 1] = j0, i0
            top = 1
            while top > 0:
                top -= 1
                j, i = stack[top, 0], stack[top, 1]
                sizes[count - 1] += 1
                if top + 4 > stack.shape[0]:
                    grown = np.empty((2 * stack.shape[0], 2), np.int32)
                    grown[:top] = stack[:top]
                    stack = grown
                here = turns[j, i]
                for k in range(4):
                    if k == 0:
                        if i + 1 == nx:
                            continue
                        y, x, step = j, i + 1, jump_x[j, i] - turn_x[j, i]
                    elif k == 1:
                        if i == 0:
                            continue
                        y, x, step = j, i - 1, turn_x[j, i - 1] - jump_x[j, i - 1]
                    elif k == 2:
                        if j + 1 == ny:
                            continue
                        y, x, step = j + 1, i, jump_y[j, i] - turn_y[j, i]
                    else:
                        if j == 0:
                            continue
                        y, x, step = j - 1, i, turn_y[j - 1, i] - jump_y[j - 1, i]
                    if valid[y, x] and labels[y, x] == 0:
                        labels[y, x] = count
                        turns[y, x] = here + step
                        stack[top, 0], stack[top, 1] = y, x
                        top += 1
    return turns, labels, sizes[:count].copy()


def tie_components(
    phase: NDArray[np.floating],
    turns: NDArray[np.int32],
    labels: NDArray[np.int32],
    sizes: NDArray[np.int64],
    weight: NDArray[np.floating] | None,
) -> tuple[NDArray[np.int32], tuple[Component, ...]]:
    """Bring components to common offsets, across the narrowest gaps between them.

    Parameters
    ----------
    phase : (y, x) float array
        Wrapped phase.
    turns, labels, sizes
        As `integrate_valid` returns them.
    weight : (y, x) float array or None
        Pixels vote on the offset by the lesser weight of the two across the gap.

    Returns
    -------
    turns : (y, x) int32 array
        Turns with the offsets added. Those of the largest component do not change.
    components : tuple of Component
        In the order of their labels.
    """
    count = len(sizes)
    root = int(sizes.argmax())
    if count == 1:
        return turns, (Component(1, int(sizes[0]), 0, 0, 0.0, 1.0),)
    one, two, gap, votes, trust = _gaps(phase, turns, labels, weight)
    pair, member = np.unique(one * count + two, return_inverse=True)
    narrowest = np.full(len(pair), np.inf)
    np.minimum.at(narrowest, member, gap)
    # Only pixels at the narrowest place vote: phase drifts across a wide gap.
    near = gap <= narrowest[member] + 1.0
    tree = minimum_spanning_tree(
        coo_array((narrowest, (pair // count, pair % count)), shape=(count, count))
    )
    order, before = breadth_first_order(tree, root, directed=False)
    offsets = np.zeros(count, np.int64)
    ties = {root: (0, 0.0, 1.0)}
    for child in order[1:]:
        parent = int(before[child])
        low, high = min(child, parent), max(child, parent)
        here = np.searchsorted(pair, low * count + high)
        chosen = near & (member == here)
        step, agreement = _winner(votes[chosen], trust[chosen])
        offsets[child] = offsets[parent] + (step if parent == low else -step)
        ties[int(child)] = (parent + 1, float(narrowest[here]), agreement)
    components = tuple(
        Component(c + 1, int(sizes[c]), ties[c][0], int(offsets[c]), *ties[c][1:])
        for c in range(count)
    )
    shift = np.concatenate(([0], offsets)).astype(np.int32)
    return turns + shift[labels], components


def _gaps(
    phase: NDArray[np.floating],
    turns: NDArray[np.int32],
    labels: NDArray[np.int32],
    weight: NDArray[np.floating] | None,
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64], NDArray[np.int64],
           NDArray[np.float64]]:  # fmt: skip
    """List pixel pairs that face each other across a gap between two components.

    Returns the components (numbered from 0, the lower first), the gap in pixels, the turns
    to add to the second one so that the two pixels agree best, and the weight of that vote.
    """
    nearest = distance_transform_edt(labels == 0, return_distances=False, return_indices=True)
    flat = np.ravel_multi_index(tuple(nearest), labels.shape)
    facing = [(flat[:, :-1], flat[:, 1:]), (flat[:-1], flat[1:])]
    a = np.concatenate([pair[0].ravel() for pair in facing])
    b = np.concatenate([pair[1].ravel() for pair in facing])
    label = labels.ravel()
    apart = label[a] != label[b]
    a, b = a[apart], b[apart]
    a, b = np.where(label[a] < label[b], (a, b), (b, a))
    (ay, ax), (by, bx) = (np.unravel_index(p, labels.shape) for p in (a, b))
    value = phase.ravel().astype(np.float64) + 2.0 * np.pi * turns.ravel()
    votes = np.rint((value[a] - value[b]) / (2.0 * np.pi)).astype(np.int64)
    trust = np.ones(len(a)) if weight is None else np.minimum(*weight.ravel()[np.array((a, b))])
    return (
        label[a].astype(np.int64) - 1,
        label[b].astype(np.int64) - 1,
        np.hypot(ay - by, ax - bx),
        votes,
        trust.astype(np.float64),
    )


def _winner(votes: NDArray[np.int64], trust: NDArray[np.float64]) -> tuple[int, float]:
    """Return the value with most weight behind it and its part of the whole."""
    values, member = np.unique(votes, return_inverse=True)
    behind = np.bincount(member, weights=trust)
    if behind.sum() == 0.0:
        behind = np.bincount(member).astype(np.float64)
    best = int(behind.argmax())
    return int(values[best]), float(behind[best] / behind.sum())
