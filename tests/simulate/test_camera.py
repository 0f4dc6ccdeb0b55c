from __future__ import annotations

import numpy as np

from hologyre.simulate.camera import Camera, record, set_up
from hologyre.simulate.waves import RandomWaves


def test_fringes_hold_exactly_the_field_promised() -> None:
    # Size, band and carrier as in the exactness limit |f0| > 3B of M. Takeda, H. Ina and
    # S. Kobayashi, JOSA 72, 156 (1982): integer carrier, periodic object, plane reference.
    n, band, bin_ = 512, 81, 172
    wave = RandomWaves("disc", n / band, seed=3, box_px=n)
    field = wave.on_frame((n, n), 0.0)
    setup = set_up(Camera(carrier_per_px=(bin_ / n, bin_ / n)), field, seed=1)
    spectrum = np.roll(np.fft.fft2(setup.expected(field)), (-bin_, -bin_), axis=(0, 1))
    m = np.fft.fftfreq(n) * n
    spectrum[np.hypot(m[:, np.newaxis], m) >= band] = 0
    promised = setup.field(field)
    error = np.linalg.norm(np.fft.ifft2(spectrum) - promised) / np.linalg.norm(promised)
    assert error < 1e-11


def test_any_frame_can_be_recorded_again_alone() -> None:
    wave = RandomWaves("disc", 24, 0.1, seed=3, count=100)
    fields = np.stack([wave.on_frame((60, 70), t) for t in range(3)])
    camera = Camera(vibration_rad=0.2, vibration_per_px=1e-4, hot_pixels=2)
    stack = record(fields, camera, seed=9)
    assert stack.dtype == np.uint8
    np.testing.assert_array_equal(set_up(camera, fields[0], seed=9).record(fields[2], 2), stack[2])
