"""The probability that a zero is the object's and not the noise's.

Around a zero of the field seen, the noise-free field is the field seen less the noise, whose
value, slope and curvature there are Gaussian with known variances. Along the core's flat axis
the field is a fold, ``-n0 + (s2 - n1) v + (k - n2) v^2 / 2``, with ``k = s2^2 / (2 R)`` from
the robustness R: it may lose the zero, or have it elsewhere; along the steep axis noise only
moves the zero. What is asked is how often a zero is left within a given distance.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numba
import numpy as np
from numpy.typing import NDArray

from hologyre.singularities.kernel import HALO
from hologyre.singularities.lattice import Lattice

WITHIN_PX = 2.0
"""How far the noise-free field's zero may lie for a zero to count as real, hologram pixels."""

_TAIL = 4.5
_CERTAIN = 6.0
"""Standard deviations of noise beyond which nothing is left to average over."""


class NoiseShare(NamedTuple):
    """How much of a field is noise, in its value, slopes and curvatures.

    Attributes
    ----------
    value, slope, curvature : float
        Mean square of the noise over that of the field, for noise of unit E|n|^2.
    """

    value: float
    slope: float
    curvature: float


def noise_share(lattice: Lattice, bend: NDArray[np.float32]) -> NoiseShare:
    """Compare a field's mean squares with those of noise that fills its disc of frequencies.

    Both are taken through the same differences between nodes, which then need not be those of
    calculus.

    Parameters
    ----------
    lattice : Lattice
        The field.
    bend : (4, ny, nx) array
        Its second differences, as `bends` gives them.
    """
    inner = lattice.planes[:, HALO:-HALO, HALO:-HALO]
    power = [float(np.mean(inner**2)) * 2, 0.0, 0.0]
    disc = np.linspace(-1, 1, 41) * 2 * np.pi * lattice.radius_per_px
    inside = np.hypot(disc[:, np.newaxis], disc) <= disc[-1] * 1.0001
    noise = [1.0, 0.0, 0.0]
    for axis in (0, 1):
        step = lattice.step_px[axis]
        # |exp(i k h) - 1|^2 and its square, averaged over the disc.
        turn = np.broadcast_to(2 - 2 * np.cos(disc * step), inside.shape)[inside]
        noise[1] += float(turn.mean()) / step**2
        noise[2] += float((turn**2).mean()) / step**4
        power[1] += float(np.mean(np.diff(inner, axis=1 + axis) ** 2)) * 2 / step**2
        power[2] += float(np.mean(bend[axis] ** 2, dtype=np.float64)) / step**4
    shares = [n / p if p > 0 else math.inf for n, p in zip(noise, power, strict=True)]
    return NoiseShare(*shares)


def trust(
    robustness: NDArray[np.float64],
    steep: NDArray[np.float64],
    flat: NDArray[np.float64],
    variance: NDArray[np.float64],
    share: NoiseShare,
    radius_per_px: float,
) -> NDArray[np.float64]:
    """Return the probability that the noise-free field has a zero of this charge nearby.

    Parameters
    ----------
    robustness : (n,) array
        R, field units.
    steep, flat : (n,) arrays
        Singular values s1 and s2 of the Jacobian, field units per px.
    variance : (n,) array
        E|n|^2 at each zero.
    share : NoiseShare
        Of the frame.
    radius_per_px : float
        Radius of the disc of frequencies the noise fills, cycles/px.

    Returns
    -------
    (n,) array
        Probability of a zero within `WITHIN_PX`; NaN where the noise is not known.
    """
    kept = [np.maximum(1 - variance * part, 0.01) for part in share]
    k = 2 * np.pi * radius_per_px
    sigma = np.sqrt(variance / 2)
    # Noise even over a disc: <k_v^2> = k^2 / 4 and <k_v^4> = k^4 / 8 along any axis.
    return _survival(
        robustness,
        steep * kept[1],
        flat,
        sigma * np.sqrt(kept[0]),
        sigma * np.sqrt(kept[1]) * k / 2,
        sigma * np.sqrt(kept[2]) * k**2 / np.sqrt(8),
        kept[1],
        kept[2],
        *_normal_nodes(5),
        *_normal_nodes(3),
        *np.polynomial.legendre.leggauss(12),
    )


def trust_of_higher(robustness: float, sigma: float, variance: float) -> float:
    """Return the same for a vortex of higher charge, whose parts scatter about its middle.

    Its net charge stays while the noise along the weakest way out is below its robustness; its
    middle has the standard error `sigma` along each axis.
    """
    if not variance > 0:
        return math.nan if math.isnan(variance) else 1.0
    stays = 0.5 * math.erfc(-robustness / math.sqrt(variance))
    return stays * -math.expm1(-(WITHIN_PX**2) / (2 * sigma**2))


def _normal_nodes(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return places and weights that average over a standard normal variable."""
    places, weights = np.polynomial.hermite_e.hermegauss(count)
    return places, weights / weights.sum()


@numba.njit(cache=True, nogil=True)
def _survival(  # type: ignore[no-untyped-def]
    robustness,
    steep,
    flat,
    sigma0,
    sigma1,
    sigma2,
    kept1,
    kept2,
    place1,
    weight1,
    place2,
    weight2,
    place0,
    weight0,
):
    """Average over the noise's value, slope and curvature along the flat axis."""
    out = np.empty(robustness.size)
    for n in range(robustness.size):
        if not sigma0[n] >= 0.0 or not robustness[n] > 0.0:
            out[n] = np.nan if not sigma0[n] >= 0.0 else 0.0
            continue
        slope = flat[n] * kept1[n]
        # Well below the fold's top, within reach, and with a slope that noise cannot turn.
        far = min(0.5 * robustness[n], WITHIN_PX * slope) > _CERTAIN * sigma0[n]
        if sigma0[n] == 0.0 or (far and slope > _CERTAIN * sigma1[n]):
            out[n] = 1.0
            continue
        bend = kept2[n] * flat[n] ** 2 / (2.0 * robustness[n])
        total = 0.0
        for a in range(place1.size):
            turned = slope - sigma1[n] * place1[a]
            for b in range(place2.size):
                curve = max(abs(bend - sigma2[n] * place2[b]), 1e-9 * bend)
                # The zero lies at v when the noise is n0 = slope v + curve v^2 / 2; beyond the
                # fold's top, or in the tail, or too far away, there is nothing to add.
                reach = curve * _TAIL * sigma0[n]
                low = max(
                    (math.sqrt(max(turned**2 - 2.0 * reach, 0.0)) - turned) / curve, -WITHIN_PX
                )
                high = min((math.sqrt(turned**2 + 2.0 * reach) - turned) / curve, WITHIN_PX)
                if low >= high:
                    continue
                half = 0.5 * (high - low)
                part = 0.0
                for c in range(place0.size):
                    v = low + half * (place0[c] + 1.0)
                    z = v * (turned + 0.5 * curve * v) / sigma0[n]
                    room = math.sqrt(WITHIN_PX * WITHIN_PX - v * v)
                    aside = math.erf(room * steep[n] / (sigma0[n] * math.sqrt(2.0)))
                    part += weight0[c] * math.exp(-0.5 * z * z) * (turned + curve * v) * aside
                total += weight1[a] * weight2[b] * half * part / sigma0[n]
        out[n] = min(total / math.sqrt(2.0 * math.pi), 1.0)
    return out
