"""Edits on what the whole chain finds in simulated holograms."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from hologyre.analyse import Analysis, analyse
from hologyre.edits import (
    NAME,
    Corrected,
    Corrections,
    Delete,
    Found,
    Log,
    Move,
    Place,
    RenameTrack,
    Snap,
    found_of,
    load_log,
    recount,
    remeasure,
    replay,
    snap,
)
from hologyre.motion import Motion
from hologyre.results import csv_bytes
from hologyre.survey import survey
from hologyre.tables import EVENTS, FRAMES, SINGULARITIES, TRAJECTORIES


def found_by(analysis: Analysis) -> Found:
    settings = analysis.recipe.motion
    return found_of(
        analysis.singularities,
        Motion(analysis.trajectories, analysis.events),
        frames=analysis.measured,
        frame_shape=(analysis.stack.sizes["y"], analysis.stack.sizes["x"]),
        margin_px=analysis.recipe.singularities.margin_px,
        max_step_px=settings.max_step_px,
        max_gap=settings.max_gap,
    )


@pytest.fixture(scope="module")
def analysis(holograms: NDArray[Any]) -> Analysis:
    return analyse(holograms)


@pytest.fixture(scope="module")
def otherwise(holograms: NDArray[Any]) -> Analysis:
    """The same holograms with another way to meet the edges."""
    recipe = survey(holograms)
    edges = "taper" if recipe.field.edges != "taper" else "plain"
    return analyse(holograms, recipe.with_settings({"field.edges": edges}))


def written(tables: Corrected, analysis: Analysis) -> list[bytes]:
    return [
        csv_bytes(tables.singularities, SINGULARITIES),
        csv_bytes(tables.trajectories, TRAJECTORIES),
        csv_bytes(tables.events, EVENTS),
        csv_bytes(recount(analysis.frames, tables), FRAMES),
    ]


@pytest.fixture(scope="module")
def session(
    analysis: Analysis, tmp_path_factory: pytest.TempPathFactory
) -> tuple[Corrections, Path]:
    """Work in the middle of the frame: taken out, put back by a snap, moved, renamed."""
    path = tmp_path_factory.mktemp("result") / NAME
    work = Corrections(found_by(analysis), Log(path, author="Ada"))
    table = analysis.singularities
    middle = table[table["y_px"].between(40, 88) & table["x_px"].between(40, 88)]
    assert len(middle) >= 8
    one, two, three = (middle[middle["frame"] == f].iloc[0] for f in (1, 2, 3))
    why = {"reason": "a trial of taking out and putting back"}
    assert work.do(Delete(frame=1, where=(one.y_px, one.x_px), charge=one.charge, **why))
    again = snap(analysis.fields[1], one.y_px + 0.3, one.x_px - 0.2)
    assert isinstance(again, Snap)
    place = (again.y_px, again.x_px)
    assert work.do(Place(frame=1, where=place, charge=again.charge, winding=again.charge))
    to = (two.y_px + 0.5, two.x_px)
    assert work.do(
        Move(frame=2, where=(two.y_px, two.x_px), charge=two.charge, to=to, winding=0, **why)
    )
    where = (three.y_px, three.x_px)
    assert work.do(RenameTrack(frame=3, where=where, charge=three.charge, track=0, new_track=900))
    return work, path


def test_a_click_finds_every_singularity_of_the_run(analysis: Analysis) -> None:
    field = analysis.fields[2]
    for one in analysis.singularities[analysis.singularities["frame"] == 2].itertuples():
        found = snap(field, one.y_px, one.x_px, within_px=1.0)
        assert isinstance(found, Snap)
        assert found.charge == one.charge
        # fields of single precision
        assert found.distance_px < 1e-3


def test_a_log_replayed_on_a_fresh_run_writes_the_same_files(
    session: tuple[Corrections, Path], analysis: Analysis, holograms: NDArray[Any]
) -> None:
    work, path = session
    fresh = analyse(holograms, analysis.recipe)
    replayed = replay(load_log(path).standing, found_by(fresh))
    assert replayed.misfits == ()
    assert written(replayed, fresh) == written(work.tables, analysis)


def test_one_taken_out_and_put_back_is_in_its_track_again(
    session: tuple[Corrections, Path], analysis: Analysis
) -> None:
    work, _ = session
    chain = work.tables.trajectories
    placed = chain[chain["origin"] == "placed"].iloc[0]
    before = analysis.trajectories
    near = np.hypot(before["y_px"] - placed["y_px"], before["x_px"] - placed["x_px"])
    was = before[(near < 0.01) & (before["frame"] == placed["frame"])].iloc[0]
    own, once = (
        t[t["track"] == row["track"]][["frame", "singularity"]].to_numpy()
        for t, row in ((chain, placed), (before, was))
    )
    same = once[:, 1] != was["singularity"]
    np.testing.assert_array_equal(own[same], once[same])
    assert own[~same].tolist() == [[1, placed["singularity"]]]


def test_edits_reattach_to_a_run_of_another_recipe(
    session: tuple[Corrections, Path], otherwise: Analysis, analysis: Analysis
) -> None:
    _, path = session
    moved = np.abs(otherwise.singularities["y_px"].head(5) - analysis.singularities["y_px"].head(5))
    assert (moved > 0).any()
    replayed = replay(load_log(path).standing, found_by(otherwise))
    assert replayed.misfits == ()
    assert sorted(replayed.singularities["origin"].unique()) == ["found", "moved", "placed"]
    assert (replayed.trajectories["track"] == 900).any()


def test_what_was_put_in_is_measured_again_with_another_recipe(
    session: tuple[Corrections, Path], otherwise: Analysis
) -> None:
    _, path = session
    tables = replay(load_log(path).standing, found_by(otherwise))
    frames = dict(zip(otherwise.measured, otherwise.fields, strict=True))
    told = remeasure(tables.singularities, frames.__getitem__, within_px=2.0)
    assert len(told) == 2
    assert (told["winding"] == told["charge"]).all()
    assert told["distance_px"].max() < 1.0
