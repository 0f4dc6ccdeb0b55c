"""How many zeros of a sampled speckle field show as residues."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.fft

from hologyre.phase.residues import residues

SIDE = 1024


def spectrum(kind: str, shortest_px: float, seed: int) -> tuple[np.ndarray, float]:
    """Draw a periodic simulated speckle field's spectrum; return it with <k^2>, rad^2/px^2."""
    f = scipy.fft.fftfreq(SIDE)
    k = 2 * np.pi * np.hypot(f[:, None], f)
    edge, step = 2 * np.pi / shortest_px, 2 * np.pi / SIDE
    power = np.exp(-((k - edge) ** 2) / (2 * (0.35 * step) ** 2)) if kind == "ring" else k < edge
    rng = np.random.default_rng(seed)
    drawn = np.sqrt(power) * (rng.normal(size=k.shape) + 1j * rng.normal(size=k.shape))
    return drawn, float((power * k**2).sum() / power.sum())


def count(field: np.ndarray) -> int:
    """Count residues of a field that is periodic in its box."""
    return int(np.abs(residues(np.angle(np.pad(field, ((0, 1), (0, 1)), mode="wrap")))).sum())


# Density <k^2> / (4 pi): Berry and Dennis, Proc. R. Soc. Lond. A 456, 2059 (2000). Share of the
# zeros that a lattice shows: table of simulated ratios, known to 0.005, over 3e5 zeros each;
# tolerance 0.01 about them.
@pytest.mark.parametrize(
    ("kind", "shortest_px", "share"),
    [("ring", 4, 1.020), ("ring", 8, 1.005), ("disc", 3, 0.923), ("disc", 4, 0.960),
     ("disc", 8, 0.991)],
)  # fmt: skip
def test_residues_miss_the_share_of_zeros_that_coarse_samples_hide(
    kind: str, shortest_px: float, share: float
) -> None:
    found = expected = 0.0
    for seed in range(3):
        drawn, mean_square_k = spectrum(kind, shortest_px, seed)
        found += count(scipy.fft.ifft2(drawn))
        expected += mean_square_k / (4 * np.pi) * SIDE**2
    assert found / expected == pytest.approx(share, abs=0.01)


def test_finer_samples_of_one_field_show_more_of_its_zeros() -> None:
    drawn, mean_square_k = spectrum("disc", 4.0, 7)
    half = SIDE // 2
    wide = np.zeros((2 * SIDE, 2 * SIDE), complex)
    wide[half:-half, half:-half] = scipy.fft.fftshift(drawn)
    expected = mean_square_k / (4 * np.pi) * SIDE**2
    coarse = count(scipy.fft.ifft2(drawn)) / expected
    fine = count(scipy.fft.ifft2(scipy.fft.ifftshift(wide))) / expected
    assert abs(1 - fine) < 0.5 * abs(1 - coarse)
