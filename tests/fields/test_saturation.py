from __future__ import annotations

import numpy as np
import pytest

from hologyre.fields.saturation import saturation_level, usable_pixels


@pytest.mark.parametrize("bits", [8, 10, 12, 14, 16])
def test_full_scale_is_saturated(bits: int) -> None:
    frame = np.random.default_rng(0).integers(0, 2**bits, (50, 50)).astype(np.uint16)
    frame[3, 4] = 2**bits - 1
    assert saturation_level(frame) == 2**bits - 1
    usable = usable_pixels(frame)
    assert usable is not None
    assert not usable[3, 4]


def test_a_pile_below_full_scale_is_saturated() -> None:
    counts = np.random.default_rng(1).exponential(40, (100, 100))
    assert saturation_level(np.minimum(counts, 201.5)) == 201.5
    assert saturation_level(np.minimum(counts, 240).astype(np.uint8)) == 240


def test_a_frame_that_does_not_reach_its_top_is_not_saturated() -> None:
    rng = np.random.default_rng(2)
    assert saturation_level(rng.poisson(20, (200, 200)).astype(np.uint8)) is None
    assert saturation_level(rng.normal(0, 1, (200, 200))) is None
    assert usable_pixels(rng.poisson(20, (64, 64)).astype(np.uint8)) is None


def test_a_constant_frame_below_full_scale_is_not_saturated() -> None:
    assert saturation_level(np.full((40, 40), 17, dtype=np.uint8)) is None


def test_mask_and_saturation_are_joined() -> None:
    frame = np.full((4, 4), 10.0)
    frame[0, 0] = 99
    valid = np.ones((4, 4), dtype=bool)
    valid[1, 1] = False
    usable = usable_pixels(frame, valid, saturation=99)
    assert usable is not None
    assert np.count_nonzero(~usable) == 2
