"""Speed and accuracy of reading fields from holograms.

Run with ``python -m pytest tests/benchmarks/bench_fields.py -s`` and OMP_NUM_THREADS=1. Every
hologram is a simulation. Times are processor time; ratios are medians of runs that take turns
with the reference, a bare `scipy.fft.rfft2` of the same frames, float32, one worker.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import partial

import numpy as np
import pytest
import scipy.fft
from scipy.spatial import cKDTree

from hologyre.fields.carrier import Carrier, find_carrier
from hologyre.fields.compensate import compensate
from hologyre.fields.demodulate import demodulate
from hologyre.fields.interpolate import on_pixels
from hologyre.fields.noise import field_noise
from hologyre.fields.surfaces import Surface
from hologyre.grid import Window
from hologyre.simulate.camera import Camera, set_up
from hologyre.simulate.random_waves import RandomWaves
from hologyre.simulate.truth import find_zeros
from hologyre.singularities.locate import locate_singularities

ROUNDS = 15
SHORTEST_PX = 24.0
SHAPE = (384, 448)
CARRIER = (0.2013, 0.1801)
GATE_PX = 3.0


def seconds(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start


def ratio(work: Callable[[], object], reference: Callable[[], object], repeats: int = 4) -> float:
    """Median over rounds of the work's time over the reference's, run in turns."""

    def several(call: Callable[[], object]) -> None:
        for _ in range(repeats):
            call()

    work(), reference()
    return float(
        np.median(
            [
                seconds(partial(several, work)) / seconds(partial(several, reference))
                for _ in range(ROUNDS)
            ]
        )
    )


def record(
    shape: tuple[int, int], seed: int, carrier: tuple[float, float] = CARRIER, **options: float
) -> tuple[np.ndarray, RandomWaves]:
    """Return a noisy hologram of a speckle field, and the field's wave."""
    box = options.pop("box_px", None)
    wave = RandomWaves("disc", SHORTEST_PX, seed=seed, box_px=box)
    field = wave.on_grid(np.arange(shape[0], dtype=float), np.arange(shape[1], dtype=float), 0.0)
    camera = Camera(**{"full_well_e": 1e4, "visibility": 0.8, "carrier_per_px": carrier, **options})
    return set_up(camera, field, seed=seed).record(field), wave


def bench_speed_of_demodulation():
    hologram, _ = record((1024, 1024), 0)
    frame = hologram.astype(np.float32)
    carrier = Carrier(*CARRIER, 1 / SHORTEST_PX)
    bare = partial(scipy.fft.rfft2, frame, workers=1)

    def textbook() -> np.ndarray:
        spectrum = np.fft.fftshift(np.fft.fft2(hologram))
        f = np.fft.fftshift(np.fft.fftfreq(1024))
        away = np.hypot(f[:, None] - CARRIER[0], f[None, :] - CARRIER[1])
        spectrum = np.roll(spectrum * (away < 1 / SHORTEST_PX), (-206, -184), (0, 1))
        return np.fft.ifft2(np.fft.ifftshift(spectrum))

    print("\n1024 x 1024, 8 bits, times a bare rfft2 (float32, one worker):")
    for edges in ("plain", "taper", "fit"):
        read = partial(demodulate, hologram, carrier, edges=edges, saturation=np.inf)
        print(f"  {edges:9s}{ratio(read, bare):7.2f}")
    narrow = partial(
        demodulate, hologram, carrier, edges="plain", reach=1 / SHORTEST_PX, saturation=np.inf
    )
    print(f"  plain, sideband alone {ratio(narrow, bare):7.2f}")
    filled = partial(demodulate, hologram, carrier)
    print(f"  fit, saturated pixels filled {ratio(filled, bare, 1):7.2f}")
    double = partial(demodulate, hologram, carrier, precision="double", saturation=np.inf)
    print(f"  fit, double precision {ratio(double, bare, 1):7.2f}")
    print(f"  textbook  {ratio(textbook, bare, 1):7.2f}")
    assert ratio(narrow, bare) < 1.2


@pytest.mark.parametrize("margin_px", [24.0, 8.0])
def bench_zeros_against_the_limit(margin_px: float):
    print(f"\nzeros, {margin_px:.0f} px from the border: median, 90th %, RMSE, recall, zeros (px)")
    side = 480
    frames = 30
    rows: dict[str, list[tuple[np.ndarray, int]]] = {}
    for seed in range(frames):
        free, wave = record(SHAPE, seed)
        for edges in ("plain", "taper", "fit"):
            carrier = Carrier(*CARRIER, 1 / SHORTEST_PX)
            field = demodulate(free, carrier, edges=edges)
            rows.setdefault(edges, []).append(match(field, wave, SHAPE, margin_px))
        whole = (round(CARRIER[0] * side) / side, round(CARRIER[1] * side) / side)
        periodic, wave = record((side, side), seed, whole, box_px=float(side))
        field = demodulate(
            periodic, Carrier(*whole, 1 / SHORTEST_PX), edges="plain", reach=1 / SHORTEST_PX
        )
        rows.setdefault("limit", []).append(match(field, wave, (side, side), margin_px))
    for name, found in rows.items():
        errors = np.concatenate([e for e, _ in found])
        missed = sum(m for _, m in found)
        middle, late = np.quantile(errors, [0.5, 0.9])
        rmse = np.sqrt(np.mean(errors**2))
        recall = errors.size / (errors.size + missed)
        print(f"  {name:6s}{middle:8.4f}{late:8.4f}{rmse:8.4f}{recall:8.4f}{errors.size:7d}")


def match(field, wave, shape: tuple[int, int], margin_px: float) -> tuple[np.ndarray, int]:
    window = Window(0, shape[0] - 1, 0, shape[1] - 1)
    truth = find_zeros(wave, window)[["y_px", "x_px"]].to_numpy()
    truth = truth[window.contains(truth[:, 0], truth[:, 1], margin_px)]
    found = locate_singularities(field)[["y_px", "x_px"]].to_numpy()
    distance, _ = cKDTree(found).query(truth)
    hit = distance < GATE_PX
    return distance[hit], int((~hit).sum())


@pytest.mark.parametrize("full_well", [1e3, 1e4, 5e4])
def bench_noise_against_the_total_error(full_well: float):
    ratios = []
    for seed in range(5):
        hologram, wave = record(SHAPE, seed, full_well_e=full_well)
        carrier = Carrier(*CARRIER, 1 / SHORTEST_PX)
        y, x = np.mgrid[8 : SHAPE[0] - 8, 8 : SHAPE[1] - 8].astype(float)
        truth = wave.on_grid(y[:, 0], x[0], 0.0)
        field = on_pixels(demodulate(hologram, carrier))[8:-8, 8:-8]
        scale = np.vdot(truth, field) / np.vdot(truth, truth)
        error = np.abs(field - scale * truth) ** 2 / field_noise(hologram, carrier).at(y, x)
        ratios.append(np.sqrt(error.mean()))
    print(f"\nfull well {full_well:.0f}: total error over the noise map {np.mean(ratios):.3f}")


@pytest.mark.parametrize("count", [80, 3000])
def bench_carrier_on_speckle(count: int):
    off = []
    for seed in range(25):
        wave = RandomWaves("disc", SHORTEST_PX, seed=seed, count=count)
        field = wave.on_grid(np.arange(SHAPE[0]) * 1.0, np.arange(SHAPE[1]) * 1.0, 0.0)
        camera = Camera(full_well_e=1e4, visibility=0.8, carrier_per_px=CARRIER)
        found = find_carrier(set_up(camera, field, seed=seed).record(field))
        assert isinstance(found, Carrier)
        off.append(
            [
                (found.fy - CARRIER[0]) * SHAPE[0],
                (found.fx - CARRIER[1]) * SHAPE[1],
                found.radius * SHORTEST_PX - 1,
            ]
        )
    rms = np.sqrt(np.mean(np.square(off), axis=0))
    print(f"\n{count} waves: centre {rms[0]:.3f}, {rms[1]:.3f} bins rms, radius {rms[2]:.2%}")


def bench_compensation_of_speckle():
    n, shortest, edge = 256, 23.0, 0.3
    surface = Surface.over((n, n), "polynomial", 2)
    y, x = np.mgrid[:n, :n]
    scale = edge * surface.scale_px**2 / n
    phase = surface.phase([0, 0, 0.6 * scale, 0, scale], y, x)
    errors = []
    for seed in range(4):
        wave = RandomWaves("disc", shortest, seed=seed, box_px=1024.0)
        field = wave.on_grid(np.arange(n) * 1.0, np.arange(n) * 1.0, 0.0) * np.exp(1j * phase)
        camera = Camera(full_well_e=1e4, visibility=0.8, carrier_per_px=(0.26, 0.25))
        hologram = set_up(camera, field, seed=seed).record(field)
        read = demodulate(hologram, Carrier(0.26, 0.25, 0.115))
        rough = compensate(read, family="polynomial", order=2)
        fine = compensate(read, family="polynomial", order=2, method="likelihood")
        bound = np.linalg.norm(fine.sigma * surface.values(y, x).std(axis=(1, 2)))
        errors.append([np.std(r.phase(y, x) - phase) for r in (rough, fine)] + [bound])
    rms = np.sqrt(np.mean(np.square(errors), axis=0))
    print(f"\nrad rms: gradient {rms[0]:.3f}, likelihood {rms[1]:.4f}, bound {rms[2]:.4f}")
