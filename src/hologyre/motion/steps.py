"""How far zeros move between frames: the law that prices links, pairs and crossings."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numba
import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@numba.vectorize(cache=True)
def link_price(distance, frames, scale, density):  # type: ignore[no-untyped-def]
    """Return minus the log of the step's density over that of zeros of its charge."""
    w2 = (scale * frames) ** 2
    return math.log(math.pi * density * w2 * (1.0 + distance * distance / w2) ** 2)


@numba.vectorize(cache=True)
def pair_price(separation, frames, scale):  # type: ignore[no-untyped-def]
    """Return minus the log of a pair's chance to meet."""
    share = separation / (2.0 * scale * frames)
    return math.log(2.0 * (1.0 + share * share) ** 2)


@numba.vectorize(cache=True)
def crossing_price(to_border, frames, scale):  # type: ignore[no-untyped-def]
    """Return minus the log of the chance of a step across the border."""
    b = max(to_border, 0.0)
    return -math.log(0.5 * (1.0 - b / math.hypot(b, scale * frames)))


@dataclass(frozen=True)
class StepLaw:
    """Prices of what may befall zeros between two frames, as minus log likelihoods.

    Parameters
    ----------
    scale_px : float
        Median step w of a zero in one frame, px.
    density_per_px2 : float
        Zeros of one charge per px^2.
    missed : float
        Probability that a zero goes undetected in a frame where it is not known to be weak.

    Notes
    -----
    Zeros of an isotropic random field move with the speed distribution
    P(v) = 2 v w^2 / (v^2 + w^2)^2, whose median is w and whose variance is infinite (it
    follows from a Gaussian field whose time derivative is independent of its gradient;
    M. V. Berry and M. R. Dennis, Proc. R. Soc. Lond. A 456, 2059, 2000). A price that grows
    with the logarithm of the distance is what this tail calls for; a squared distance would
    give up right links of fast zeros.

    A link is priced against the density of zeros of its charge, a pair of opposite charges
    by the chance that it meets within a frame, a crossing of the border by the chance of a
    step that long; so all three can be weighed against each other. The prices are symmetric
    in time.
    """

    scale_px: float
    density_per_px2: float
    missed: float = 1e-3

    def link(self, distance_px: Array, frames: Array | float) -> Array:
        """Return the price of a step of this length over this many frames."""
        price: Array = link_price(distance_px, frames, self.scale_px, self.density_per_px2)
        return price

    def pair(self, separation_px: Array, frames: Array | float) -> Array:
        """Return the price of a pair this far apart to meet, or to have just parted."""
        price: Array = pair_price(separation_px, frames, self.scale_px)
        return price

    def crossing(self, to_border_px: Array, frames: Array | float) -> Array:
        """Return the price of crossing a border this far away."""
        price: Array = crossing_price(to_border_px, frames, self.scale_px)
        return price

    def vanishing(self, robustness_snr: Array) -> Array:
        """Return the price of a zero going undetected in one frame.

        Noise of mean square s^2 removes a zero of robustness R with a probability of the
        order of exp(-R^2/s^2); an unknown robustness counts as strong.
        """
        snr = np.nan_to_num(robustness_snr, nan=np.inf)
        price: Array = -np.log(np.maximum(self.missed, 0.5 * np.exp(-(np.minimum(snr, 30.0) ** 2))))
        return price
