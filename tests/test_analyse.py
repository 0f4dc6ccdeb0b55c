from __future__ import annotations

import pickle
import threading
from contextlib import closing
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import tifffile
from distributed import LocalCluster
from numpy.typing import NDArray

from hologyre.analyse import (
    Analysis,
    ClusterError,
    FrameResult,
    analyse,
    connect,
    frame_table,
    inspect,
    iter_frames,
    plan,
    unwrap_field,
)
from hologyre.edits import Barrier, Bridge, Region, barriers, bridges, used_pixels
from hologyre.fields.interpolate import evaluate, on_pixels
from hologyre.fields.refocus import refocus
from hologyre.motion import Motion
from hologyre.phase.edges import edges_along
from hologyre.recipe import Recipe, RecipeError
from hologyre.simulate.camera import Camera, record
from hologyre.simulate.random_waves import RandomWaves
from hologyre.singularities.locate import locate_singularities
from hologyre.stacks import StackError, open_stack
from hologyre.survey import survey
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES, empty


@pytest.fixture(scope="module")
def recipe(stack_file: Path) -> Recipe:
    return survey(open_stack(stack_file))


@pytest.fixture(scope="module")
def analysis(stack_file: Path, recipe: Recipe) -> Analysis:
    return analyse(open_stack(stack_file), recipe)


def spoilt(holograms: NDArray[Any]) -> NDArray[Any]:
    """Frame 0 good, 1 constant, 2 saturated, 3 without fringes, 4 NaN, 5 good."""
    frames = np.array(holograms, dtype=np.float32)
    frames[1] = 80
    frames[2] = np.minimum(frames[2] * 20, 255)
    frames[3] = np.random.default_rng(1).poisson(80, frames[3].shape)
    frames[4] = np.nan
    return frames


def test_tables_have_their_columns_and_one_row_a_frame(analysis: Analysis) -> None:
    assert list(analysis.singularities) == [c.name for c in SINGULARITIES]
    assert list(analysis.trajectories) == [c.name for c in TRAJECTORIES]
    assert list(analysis.events) == [c.name for c in EVENTS]
    assert list(analysis.frames) == [c.name for c in FRAMES]
    assert analysis.frames["frame"].tolist() == list(range(6))
    assert analysis.frames["status"].eq("done").all()


def test_found_singularities_are_the_simulated_ones(analysis: Analysis) -> None:
    wave = RandomWaves("disc", 20.0, spread_rad_per_frame=0.1, seed=4)
    inside = analysis.singularities.query("20 < y_px < 107 and 20 < x_px < 107")
    y, x, t = (inside[name].to_numpy(dtype=float) for name in ("y_px", "x_px", "frame"))
    jet = wave.jet(y, x, t)
    # first order: a zero of the analytic field lies this far away
    det = np.abs((jet.dx.conj() * jet.dy).imag)
    distance = np.abs(jet.value) * np.sqrt(np.abs(jet.dy) ** 2 + np.abs(jet.dx) ** 2) / det
    assert np.median(distance) < 0.1
    turn = np.sign((jet.dx.conj() * jet.dy).imag)
    assert np.mean(turn == inside["charge"]) > 0.98


def test_lengths_and_times_follow_the_optics(analysis: Analysis) -> None:
    for table in (analysis.singularities, analysis.trajectories):
        np.testing.assert_allclose(table["y_um"], table["y_px"] * 0.25, rtol=1e-6)
        np.testing.assert_allclose(table["time_s"], table["frame"] * 0.5)
    events = analysis.events
    np.testing.assert_allclose(events["x_um"], events["x_px"] * 0.25, rtol=1e-6)
    assert events["time_s"].between(events["frame_before"] * 0.5, events["frame_after"] * 0.5).all()


def test_lengths_and_times_are_empty_where_the_optics_are_unknown(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    unknown = {"optics.pixel_um": "unknown", "optics.frame_interval_s": "unknown"}
    result = analyse(holograms[:2], recipe.with_settings(unknown))
    assert result.singularities[["y_um", "x_um", "time_s"]].isna().all(axis=None)
    assert result.events[["y_um", "x_um", "time_s"]].isna().all(axis=None)
    assert result.frames["time_s"].isna().all()


def test_every_singularity_is_in_one_track(analysis: Analysis) -> None:
    ids = analysis.trajectories["singularity"]
    assert sorted(ids) == analysis.singularities["singularity"].tolist()
    assert ids.is_unique


def test_counts_of_a_frame_are_those_of_its_singularities(analysis: Analysis) -> None:
    found = analysis.singularities.groupby("frame")["charge"]
    assert (found.apply(lambda q: (q > 0).sum()) == analysis.frames["positive"]).all()
    assert (found.apply(lambda q: (q < 0).sum()) == analysis.frames["negative"]).all()


def test_net_charge_is_the_winding_along_the_border(analysis: Analysis) -> None:
    net = analysis.frames["positive"] - analysis.frames["negative"]
    assert (net == analysis.frames["border_winding"]).all()


def test_every_frame_is_audited_and_has_its_drift(analysis: Analysis) -> None:
    frames = analysis.frames
    assert (frames["audit"] != "").all()
    assert not frames["audit"].str.contains("turns along the border").any()
    assert frames.loc[0, ["drift_y_px", "drift_x_px"]].tolist() == [0, 0]
    assert frames[["drift_y_px", "drift_x_px"]].notna().all(axis=None)


def test_common_motion_of_all_singularities_is_the_drift(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    # the same speckle moved by 2 px a frame along y: the region follows none of it
    frames = np.stack([holograms[0, 8 - 2 * n : 120 - 2 * n] for n in range(4)])
    drift = analyse(frames, recipe).frames["drift_y_px"]
    # positions are good to 0.05 px, the median of some forty to less
    np.testing.assert_allclose(drift, [0, 2, 4, 6], atol=0.1)


def test_frames_that_do_not_add_up_are_told() -> None:
    rows = [{"frame": 0, "status": "done", "positive": 3, "negative": 1, "border_winding": 1}]
    table = frame_table(rows, Motion(empty(TRAJECTORIES), empty(EVENTS)))
    assert table["audit"].tolist() == ["charge +2 but +1 turns along the border"]


def test_fields_phase_and_unwrapped_are_lazy_and_agree(analysis: Analysis) -> None:
    field = analysis.fields[2]
    phase, unwrapped = analysis.phase, analysis.unwrapped
    assert phase.dims == unwrapped.dims == ("t", "y", "x")
    assert phase.chunks == ((1,) * 6, (128,), (128,))
    np.testing.assert_allclose(phase[2].values, np.angle(on_pixels(field)), atol=1e-6)
    turns = (unwrapped[2].values - phase[2].values) / (2 * np.pi)
    np.testing.assert_allclose(turns, np.round(turns), atol=1e-5)
    assert len(analysis.fields[1:3]) == 2


def test_unwrapping_keeps_to_pixels_that_are_used(analysis: Analysis) -> None:
    field, settings = analysis.fields[2], analysis.recipe.phase
    half = Region(frame=2, where=((-1, -1), (-1, 63.5), (128, 63.5), (128, -1)), use="leave out")
    used = used_pixels([half], 2, (128, 128))
    phase = unwrap_field(field, settings, used=used).phase
    assert np.isnan(phase[:, :64]).all()
    turns = (phase - np.angle(on_pixels(field)))[:, 64:] / (2 * np.pi)
    np.testing.assert_allclose(turns, np.round(turns), atol=1e-5)


def test_no_cut_crosses_a_bridge_and_cuts_along_barriers_are_free(analysis: Analysis) -> None:
    field, settings = analysis.fields[2], analysis.recipe.phase
    free = unwrap_field(field, settings)
    cut = max(free.cuts.polylines, key=len)
    bridge = Bridge(frame=2, where=(tuple(cut[0] - 0.25), tuple(cut[-1] + 0.25)))
    drawn = [bridge, Barrier(frame=2, where=tuple(map(tuple, cut)))]
    bridged = unwrap_field(field, settings, bridges=bridges(drawn, 2))
    barred = unwrap_field(field, settings, barriers=barriers(drawn, 2))
    crossed = edges_along(bridges(drawn, 2)[0], (128, 128))
    assert not bridged.cuts.jump_y[crossed.y].any()
    assert not bridged.cuts.jump_x[crossed.x].any()
    assert free.cuts.jump_y[crossed.y].any() or free.cuts.jump_x[crossed.x].any()
    # edges are all that the cost is made of: those of the longest cut are free now
    assert barred.cost < free.cost < bridged.cost


def test_pixels_used_are_checked(analysis: Analysis) -> None:
    field, settings = analysis.fields[2], analysis.recipe.phase
    with pytest.raises(ValueError, match=r"used: expected shape \(128, 128\), got \(4, 4\)"):
        unwrap_field(field, settings, used=np.ones((4, 4), np.bool_))
    with pytest.raises(ValueError, match="used: expected at least one pixel"):
        unwrap_field(field, settings, used=np.zeros((128, 128), np.bool_))


def test_phase_lies_above_minus_pi(analysis: Analysis) -> None:
    values = analysis.phase.values
    assert values.min() > -np.float32(np.pi)
    assert values.max() <= np.float32(np.pi)


def test_single_frame_has_singularities_and_no_motion(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    result = analyse(holograms[0], recipe)
    assert len(result.singularities) > 0
    assert result.trajectories.empty
    assert result.events.empty


def test_bad_frames_are_skipped_with_their_reason(holograms: NDArray[Any], recipe: Recipe) -> None:
    frames = analyse(spoilt(holograms), recipe).frames
    assert frames["status"].tolist() == ["done", *["skipped"] * 4, "done"]
    reasons = frames["reason"].tolist()
    assert reasons[1] == "all pixels have the same value, 80.0"
    assert reasons[2].endswith("% of the pixels are saturated")
    assert reasons[3].startswith("no fringes: ")
    assert reasons[4] == "16384 of 16384 pixels are NaN or infinite"


def test_singularities_are_tracked_across_a_skipped_frame(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    frames = np.array(holograms)
    frames[2] = 80
    tracks = analyse(frames, recipe).trajectories
    long = tracks.groupby("track")["frame"].agg(["min", "max"])
    assert ((long["min"] < 2) & (long["max"] > 2)).sum() > 10
    assert 2 not in tracks["frame"].tolist()


def test_few_missing_pixels_are_done_without(holograms: NDArray[Any], recipe: Recipe) -> None:
    frames = np.array(holograms[:1], dtype=np.float32)
    whole = analyse(frames, recipe).singularities
    missing = np.random.default_rng(3).random(frames.shape) < 0.01
    frames[missing] = np.nan
    holed = analyse(frames, recipe).singularities
    assert abs(len(holed) - len(whole)) <= 2


def test_left_out_frames_are_listed_with_their_reason(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    chosen = recipe.with_settings(
        {"stack.frames": "1:5", "stack.left_out": [{"frame": 3, "reason": "bubble"}]}
    )
    frames = analyse(holograms, chosen).frames
    assert frames["frame"].tolist() == [1, 2, 3, 4]
    assert frames["reason"].tolist() == ["", "", "bubble", ""]
    assert frames["status"].tolist() == ["done", "done", "skipped", "done"]


def test_region_gives_positions_and_field_of_the_whole_frame(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    region = (16, 112, 24, 120)
    whole = next(iter(iter_frames(holograms, recipe)))
    part = next(iter(iter_frames(holograms, recipe.with_settings({"stack.region": region}))))
    assert whole.field is not None
    assert part.field is not None
    assert part.field.grid.frame_shape == (128, 128)
    assert part.singularities["y_px"].between(16, 111).all()
    assert part.singularities["x_px"].between(24, 119).all()
    # well inside, the field read from the region is the field read from the whole
    y, x = np.meshgrid(np.arange(44.0, 84, 4), np.arange(52.0, 92, 4), indexing="ij")
    a, b = (evaluate(field, y, x)[0] for field in (whole.field, part.field))
    # the ends of the frame and of the region leave some percent
    assert np.linalg.norm(a - b) < 0.05 * np.linalg.norm(a)


def test_zeros_do_not_depend_on_where_the_region_starts(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    counts = np.zeros((1, 160, 160), dtype=np.uint8) + 60
    counts[0, 20:148, 9:137] = holograms[0]
    plain = next(iter(iter_frames(holograms[:1], recipe))).singularities
    placed = next(
        iter(iter_frames(counts, recipe.with_settings({"stack.region": (20, 148, 9, 137)})))
    ).singularities
    np.testing.assert_allclose(placed["y_px"], plain["y_px"] + 20, atol=1e-9)
    np.testing.assert_allclose(placed["x_px"], plain["x_px"] + 9, atol=1e-9)


@pytest.mark.parametrize("workers", [2, 3])
def test_results_are_the_same_for_any_number_of_workers(
    holograms: NDArray[Any], recipe: Recipe, workers: int
) -> None:
    alone, together = (
        list(iter_frames(spoilt(holograms), recipe, workers=n)) for n in (1, workers)
    )
    for one, other in zip(alone, together, strict=True):
        assert_same(one, other)


def assert_same(one: FrameResult, other: FrameResult) -> None:
    assert (one.frame, one.status, one.reason) == (other.frame, other.status, other.reason)
    pd.testing.assert_frame_equal(one.singularities, other.singularities, check_exact=True)
    np.testing.assert_equal(one.row, other.row)
    if one.field is not None and other.field is not None:
        np.testing.assert_array_equal(one.field.values, other.field.values)


def test_results_are_the_same_on_a_dask_cluster(stack_file: Path, recipe: Recipe) -> None:
    planned = plan(open_stack(stack_file), recipe)
    with (
        LocalCluster(
            n_workers=1, threads_per_worker=2, processes=False, dashboard_address=None
        ) as cluster,
        connect(cluster.scheduler_address) as client,
    ):
        together = list(iter_frames(planned, client=client))
        with closing(iter_frames(planned, client=client)) as frames:
            assert next(frames).frame == 0
    for one, other in zip(iter_frames(planned), together, strict=True):
        assert_same(one, other)


def test_address_without_a_scheduler_is_told() -> None:
    with pytest.raises(ClusterError, match=r"nowhere: no dask scheduler answers .*tcp://host:port"):
        connect("nowhere")


@pytest.mark.parametrize("workers", [1, 2])
def test_closing_the_iterator_cancels_what_is_left(
    holograms: NDArray[Any], recipe: Recipe, workers: int
) -> None:
    frames = iter_frames(np.concatenate([holograms] * 5), recipe, workers=workers)
    with closing(frames):
        assert next(frames).frame == 0
    with pytest.raises(StopIteration):
        next(frames)
    assert not [t for t in threading.enumerate() if t.name.startswith("hologyre-frame")]


def test_plan_pickles_and_gives_the_same_frame(stack_file: Path, recipe: Recipe) -> None:
    planned = plan(open_stack(stack_file), recipe)
    again = pickle.loads(pickle.dumps(planned))
    assert_same(*(next(iter(iter_frames(p, frames=[3]))) for p in (planned, again)))


def test_progress_counts_frames(holograms: NDArray[Any], recipe: Recipe) -> None:
    seen: list[tuple[int, int]] = []
    analyse(holograms[:3], recipe, progress=lambda done, total: seen.append((done, total)))
    assert seen == [(1, 3), (2, 3), (3, 3)]


def test_without_a_recipe_the_stack_is_surveyed(
    stack_file: Path, recipe: Recipe, analysis: Analysis
) -> None:
    result = analyse(open_stack(stack_file))
    assert result.recipe == recipe
    pd.testing.assert_frame_equal(result.trajectories, analysis.trajectories, check_exact=True)


def test_undecided_recipe_is_refused(holograms: NDArray[Any]) -> None:
    with pytest.raises(RecipeError, match=r'carrier\.fy, .*: still "auto"'):
        analyse(holograms, Recipe())


def test_refocusing_without_the_wavelength_is_refused(
    holograms: NDArray[Any], recipe: Recipe
) -> None:
    with pytest.raises(RecipeError, match=r"refocus\.distance_um: refocusing needs optics\.wave"):
        analyse(holograms, recipe.with_settings({"refocus.distance_um": 5.0}))


@pytest.mark.parametrize("method", ["mixed", "assignment"])
def test_refocused_frames_are_searched_at_their_new_depth(
    holograms: NDArray[Any], recipe: Recipe, method: str
) -> None:
    lens = recipe.with_settings(
        {"refocus.distance_um": 2.0, "optics.wavelength_nm": 500.0, "motion.method": method}
    )
    result, flat = analyse(holograms[:3], lens), analyse(holograms[:3], recipe)
    assert result.frames["z_um"].tolist() == [2.0] * 3
    expected = refocus(flat.fields[1], 2.0, optics=lens.optics.values())
    np.testing.assert_array_equal(result.fields[1].values, expected.values)
    found = locate_singularities(expected)
    here = result.singularities.query("frame == 1")
    np.testing.assert_array_equal(here["y_px"], found["y_px"])
    assert not result.frames["audit"].str.contains("turns along the border").any()


def test_iter_frames_wants_a_recipe_and_workers(holograms: NDArray[Any], recipe: Recipe) -> None:
    with pytest.raises(TypeError, match="recipe: expected a Recipe"):
        iter_frames(holograms)
    with pytest.raises(ValueError, match="workers: expected 1 or more, got 0"):
        iter_frames(holograms, recipe, workers=0)


def test_dark_frame_is_taken_out(holograms: NDArray[Any], recipe: Recipe, tmp_path: Path) -> None:
    pattern = np.random.default_rng(2).integers(0, 40, holograms.shape[1:]).astype(np.float32)
    tifffile.imwrite(tmp_path / "dark.tif", np.stack([pattern - 1, pattern + 1]))
    # counts shifted by a pattern do not saturate where they did
    recipe = recipe.with_settings({"stack.saturation": "none"})
    clean = analyse(holograms[:1].astype(np.float32), recipe).fields[0]
    given = recipe.with_settings({"stack.dark": str(tmp_path / "dark.tif")})
    dirty = analyse(holograms[:1] + pattern, given).fields[0]
    np.testing.assert_allclose(dirty.values, clean.values, atol=1e-3 * np.abs(clean.values).max())


@pytest.mark.parametrize("family", ["tilt", "polynomial"])
def test_compensation_is_told_and_leaves_singularities_where_they_are(
    holograms: NDArray[Any], recipe: Recipe, family: str
) -> None:
    plain = analyse(holograms[:1], recipe)
    flat = analyse(holograms[:1], recipe.with_settings({"compensation.family": family}))
    told = ["piston_rad", "tilt_y_rad_per_px", "tilt_x_rad_per_px"]
    assert plain.frames[told].isna().all(axis=None)
    assert flat.frames[told].notna().all(axis=None)
    pd.testing.assert_frame_equal(flat.singularities, plain.singularities, check_exact=True)


def test_tilt_taken_out_leaves_the_amplitude(holograms: NDArray[Any], recipe: Recipe) -> None:
    flat = analyse(holograms[:1], recipe.with_settings({"compensation.family": "tilt"})).fields[0]
    plain = analyse(holograms[:1], recipe).fields[0]
    # single precision
    np.testing.assert_allclose(np.abs(flat.values), np.abs(plain.values), rtol=1e-4, atol=1e-3)
    assert flat.tilt_per_px != plain.tilt_per_px


def test_visibility_does_not_count_the_dark_level(
    holograms: NDArray[Any], recipe: Recipe, tmp_path: Path
) -> None:
    tifffile.imwrite(tmp_path / "dark.tif", np.full((128, 128), 40, dtype=np.uint8))
    given = recipe.with_settings(
        {"stack.saturation": "none", "stack.dark": str(tmp_path / "dark.tif")}
    )
    plain = analyse(
        holograms[:1].astype(np.uint16), recipe.with_settings({"stack.saturation": "none"})
    )
    lifted = analyse(holograms[:1].astype(np.uint16) + 40, given)
    assert lifted.frames["visibility"][0] == pytest.approx(plain.frames["visibility"][0], rel=1e-4)


def test_blank_of_another_size_is_refused(
    holograms: NDArray[Any], recipe: Recipe, tmp_path: Path
) -> None:
    path = tmp_path / "dark.tif"
    tifffile.imwrite(path, np.zeros((64, 64), dtype=np.uint8))
    given = recipe.with_settings({"stack.dark": str(path)})
    with pytest.raises(
        StackError, match=r"dark\.tif: the dark frame is 64x64 px and the stack 128"
    ):
        analyse(holograms, given)


def test_frame_that_cannot_be_read_is_skipped(
    holograms: NDArray[Any], recipe: Recipe, tmp_path: Path
) -> None:
    path = tmp_path / "damaged.tif"
    tifffile.imwrite(path, holograms, compression="zlib", photometric="minisblack")
    content = bytearray(path.read_bytes())
    with tifffile.TiffFile(path) as tif:
        start = tif.pages[3].dataoffsets[0]  # type: ignore[union-attr]
    content[start : start + 400] = bytes(400)
    path.write_bytes(content)
    frames = analyse(open_stack(path), recipe).frames
    assert frames["status"].tolist().count("skipped") == 1
    assert "damaged.tif: a frame could not be read" in frames["reason"][3]


def test_inspection_says_what_a_microscopist_acts_on(stack_file: Path) -> None:
    found = inspect(open_stack(stack_file))
    text = "\n".join(found.sentences())
    assert "speckle: 6 frames of 128x128 px, uint8; 0.25 um per pixel in the object" in text
    assert "px per fringe; visibility 0." in text
    assert "before it meets the zero order" in text
    # the beams' visibility is 0.8 by construction of the simulation
    assert found.visibility == pytest.approx(0.8, abs=0.1)
    assert found.radius_limit_per_px == pytest.approx(np.hypot(0.13, 0.19) / 3, rel=0.05)
    assert not any(word in text for word in ("weak", "overlaps", "is high"))


def test_inspection_warns_of_low_visibility(holograms: NDArray[Any]) -> None:
    weak = 0.1 * (holograms.astype(np.float32) - 60) + 60
    assert any("the fringes are weak" in warning for warning in inspect(weak).warnings)


def test_inspection_warns_of_a_band_given_too_wide(holograms: NDArray[Any], recipe: Recipe) -> None:
    wide = recipe.with_settings({"carrier.radius": 0.1})
    warnings = inspect(holograms, wide).warnings
    assert any("the band's radius 0.100 overlaps its neighbours" in text for text in warnings)


def test_inspection_warns_of_high_noise() -> None:
    wave = RandomWaves("disc", 20.0, seed=4)
    dim = Camera(full_well_e=50.0, visibility=0.2)
    frame = record(wave.on_frame((128, 128), 0.0), dim, seed=1)
    assert any("the phase noise of 0." in text for text in inspect(frame).warnings)


def test_inspection_of_a_frame_that_cannot_be_used_is_refused(holograms: NDArray[Any]) -> None:
    frames = np.array(holograms)
    frames[1] = 3
    with pytest.raises(ValueError, match="frame: 1 cannot be used: all pixels have the same"):
        inspect(frames, frame=1)
