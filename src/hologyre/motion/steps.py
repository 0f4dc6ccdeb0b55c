"""How far zeros move between frames: the law that prices links, pairs and crossings."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


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
        w2 = np.square(self.scale_px * np.asarray(frames, dtype=np.float64))
        price: Array = np.log(np.pi * self.density_per_px2 * w2) + 2.0 * np.log1p(
            np.square(distance_px) / w2
        )
        return price

    def pair(self, separation_px: Array, frames: Array | float) -> Array:
        """Return the price of a pair this far apart to meet, or to have just parted."""
        w2 = np.square(2.0 * self.scale_px * np.asarray(frames, dtype=np.float64))
        price: Array = np.log(2.0) + 2.0 * np.log1p(np.square(separation_px) / w2)
        return price

    def crossing(self, to_border_px: Array, frames: Array | float) -> Array:
        """Return the price of crossing a border this far away."""
        w = self.scale_px * np.asarray(frames, dtype=np.float64)
        b = np.maximum(to_border_px, 0.0)
        price: Array = -np.log(0.5 * (1.0 - b / np.hypot(b, w)))
        return price

    def vanishing(self, robustness_snr: Array) -> Array:
        """Return the price of a zero going undetected in one frame.

        Noise of mean square s^2 removes a zero of robustness R with a probability of the
        order of exp(-R^2/s^2); an unknown robustness counts as strong.
        """
        snr = np.nan_to_num(robustness_snr, nan=np.inf)
        price: Array = -np.log(np.maximum(self.missed, 0.5 * np.exp(-(np.minimum(snr, 30.0) ** 2))))
        return price
