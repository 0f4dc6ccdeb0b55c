"""Scores of tracks against a truth."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest

from hologyre.motion.metrics import score_events, score_tracks


def track(number: int, frames: range, y: float, charge: int = 1) -> pd.DataFrame:
    return pd.DataFrame(
        {"track": number, "frame": frames, "y_px": y, "x_px": 0.0, "charge": charge}
    )


def tracks(*parts: pd.DataFrame) -> pd.DataFrame:
    return pd.concat(parts, ignore_index=True)


TRUTH = tracks(track(0, range(10), 0.0), track(1, range(10), 100.0))
# the same two tracks, identities swapped at half time
SWAPPED = tracks(
    track(0, range(5), 0.0),
    track(0, range(5, 10), 100.0),
    track(1, range(5), 100.0),
    track(1, range(5, 10), 0.0),
)


def test_the_worked_example_of_the_track_benchmark():
    # Two true tracks of 10 frames; one found 1 px off, one missing its last two frames, and a
    # spurious one of 3 frames, gate 5 px: by hand from the definitions of N. Chenouard et al.,
    # Nature Methods 11, 281 (2014).
    found = tracks(track(0, range(10), 1.0), track(1, range(8), 100.0), track(2, range(3), 500.0))
    scores = score_tracks(found, TRUTH, gate_px=5.0)
    assert scores.alpha == pytest.approx(0.8, abs=1e-9)
    assert scores.beta == pytest.approx(80 / 115, abs=1e-9)
    assert scores.jsc == pytest.approx(18 / 23, abs=1e-9)
    assert scores.jsc_theta == pytest.approx(2 / 3, abs=1e-9)
    assert scores.rmse_px == pytest.approx(math.sqrt(10 / 18), abs=1e-9)


def test_the_truth_itself_scores_one():
    scores = score_tracks(TRUTH, TRUTH)
    assert (scores.links, scores.alpha, scores.beta, scores.jsc, scores.jsc_theta) == (1,) * 5
    assert (scores.mota, scores.hota, scores.rmse_px) == (1, 1, 0)


def test_nothing_found_scores_nothing():
    scores = score_tracks(TRUTH.iloc[:0], TRUTH)
    assert (scores.links, scores.alpha, scores.beta, scores.jsc, scores.hota) == (0,) * 5
    assert math.isnan(scores.rmse_px)


def test_swapped_identities_cost_what_the_definitions_say():
    scores = score_tracks(SWAPPED, TRUTH, gate_px=5.0)
    assert scores.alpha == pytest.approx(0.5, abs=1e-9)
    assert scores.beta == pytest.approx(0.5, abs=1e-9)
    assert scores.jsc == pytest.approx(1 / 3, abs=1e-9)
    # MOTA = 1 - (misses + false + switches) / true positions: K. Bernardin and R. Stiefelhagen,
    # EURASIP J. Image Video Process. 2008, 246309.
    assert scores.mota == pytest.approx(0.9, abs=1e-9)
    # HOTA = sqrt(DetA AssA): J. Luiten et al., Int. J. Comput. Vis. 129, 548 (2021).
    assert scores.hota == pytest.approx(math.sqrt(1 / 3), abs=1e-9)
    # 18 true links, two missed and two wrong ones
    assert scores.links == pytest.approx(16 / 20, abs=1e-9)


def test_a_link_that_bridges_an_undetected_position_is_neither_right_nor_wrong():
    gap = TRUTH[(TRUTH["track"] != 0) | (TRUTH["frame"] != 4)]
    # 18 true links, the two next to the gap missed
    assert score_tracks(gap, TRUTH).links == pytest.approx(16 / 18, abs=1e-9)


def test_positions_of_the_other_charge_do_not_match():
    assert score_tracks(TRUTH.assign(charge=-1), TRUTH).alpha == 0.0


def test_events_match_within_a_frame_and_by_kind():
    truth = pd.DataFrame(
        {
            "kind": ["pair_birth", "pair_death", "pair_death"],
            "frame_before": [3, 5, 9],
            "y_px": [0.0, 10.0, 20.0],
            "x_px": 0.0,
        }
    )
    found = truth.assign(kind=["pair_birth", "pair_birth", "pair_death"], frame_before=[4, 5, 7])
    assert score_events(found, truth, frames=1) == (1 / 3, 1 / 3)
    assert score_events(truth, truth) == (1.0, 1.0)


@pytest.mark.parametrize(
    ("truth", "gate", "message"),
    [(TRUTH, 0.0, "gate_px: expected"), (TRUTH.iloc[:0], 5.0, "truth: expected at least one")],
)
def test_bad_input_is_named(truth, gate, message):
    with pytest.raises(ValueError, match=message):
        score_tracks(TRUTH, truth, gate_px=gate)


def test_scores_do_not_depend_on_the_order_of_rows():
    rng = np.random.default_rng(0)
    shuffled = SWAPPED.iloc[rng.permutation(len(SWAPPED))]
    assert score_tracks(shuffled, TRUTH) == score_tracks(SWAPPED, TRUTH)
