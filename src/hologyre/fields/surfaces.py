"""Smooth phase surfaces over a frame, as sums of powers of its coordinates."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.zernike import osa_orders, zernike_powers

Family = Literal["tilt", "polynomial", "zernike"]


@dataclass(frozen=True, eq=False)
class Surface:
    """Terms of a phase surface; piston is not among them.

    The coordinates are ``(r - centre) / scale``, which is half the frame's diagonal, so that
    the unit disc holds the frame.

    Parameters
    ----------
    names : tuple of str
        What each term is, as "y x^2" or "Z4 (n=2, m=0)".
    powers : (terms, a, b) float array
        Coefficients of ``y^a x^b``.
    centre_px : (float, float)
        Middle of the frame.
    scale_px : float
        Half its diagonal.
    """

    names: tuple[str, ...]
    powers: NDArray[np.float64]
    centre_px: tuple[float, float]
    scale_px: float

    @classmethod
    def over(cls, frame_shape: tuple[int, int], family: Family, order: int) -> Surface:
        """Return the terms of a family up to an order.

        Parameters
        ----------
        frame_shape : (int, int)
            Rows and columns.
        family : "tilt", "polynomial" or "zernike"
            Two tilts; all ``y^a x^b`` with a + b up to `order`; or Zernike polynomials of
            radial order up to `order`, in OSA/ANSI order from index 1.
        order : int
            1 to 4 for polynomials, 1 to 8 for Zernike.
        """
        if family == "tilt":
            order = 1
        most = 8 if family == "zernike" else 4
        if not 1 <= order <= most:
            raise ValueError(f"order: expected 1 to {most} for {family}, got {order}")
        names, terms = [], []
        if family == "zernike":
            for j in range(1, (order + 1) * (order + 2) // 2):
                n, m = osa_orders(j)
                power = np.zeros((order + 1, order + 1))
                power[: n + 1, : n + 1] = zernike_powers(n, m)
                names.append(f"Z{j} (n={n}, m={m})")
                terms.append(power)
        else:
            for total in range(1, order + 1):
                for a in range(total, -1, -1):
                    power = np.zeros((order + 1, order + 1))
                    power[a, total - a] = 1
                    names.append(_monomial(a, total - a))
                    terms.append(power)
        ny, nx = frame_shape
        centre = ((ny - 1) / 2, (nx - 1) / 2)
        return cls(tuple(names), np.stack(terms), centre, float(np.hypot(ny, nx)) / 2)

    def values(self, y_px: ArrayLike, x_px: ArrayLike) -> NDArray[np.float64]:
        """Return every term at points, shape (terms, ...)."""
        y, x = self._coordinates(y_px, x_px)
        return np.stack([np.polynomial.polynomial.polyval2d(y, x, p) for p in self.powers])

    def phase(
        self, coefficients: ArrayLike, y_px: ArrayLike, x_px: ArrayLike
    ) -> NDArray[np.float64]:
        """Return the surface at points, rad."""
        y, x = self._coordinates(y_px, x_px)
        power = np.tensordot(np.asarray(coefficients, dtype=np.float64), self.powers, axes=1)
        return np.asarray(np.polynomial.polynomial.polyval2d(y, x, power), dtype=np.float64)

    def slope(
        self, coefficients: ArrayLike, y_px: ArrayLike, x_px: ArrayLike
    ) -> NDArray[np.float64]:
        """Return the surface's gradient at points, rad/px, shape (2, ...) as (y, x)."""
        y, x = self._coordinates(y_px, x_px)
        power = np.tensordot(np.asarray(coefficients, dtype=np.float64), self.powers, axes=1)
        along = [
            np.polynomial.polynomial.polyval2d(
                y, x, np.polynomial.polynomial.polyder(power, axis=axis)
            )
            for axis in (0, 1)
        ]
        return np.asarray(np.stack(along) / self.scale_px, dtype=np.float64)

    def _coordinates(
        self, y_px: ArrayLike, x_px: ArrayLike
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        y = (np.asarray(y_px, dtype=np.float64) - self.centre_px[0]) / self.scale_px
        x = (np.asarray(x_px, dtype=np.float64) - self.centre_px[1]) / self.scale_px
        both = np.broadcast_arrays(y, x)
        return both[0], both[1]


def _monomial(a: int, b: int) -> str:
    names = {0: "", 1: "{}"}
    parts = [names.get(p, "{}^" + str(p)).format(name) for name, p in (("y", a), ("x", b))]
    return " ".join(part for part in parts if part)
