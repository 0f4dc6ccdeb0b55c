"""Tracks and events as a graph other programs read."""

from __future__ import annotations

import io
import json

import networkx
import pandas as pd
import pytest

from hologyre.motion import Motion, graphml, link_singularities, node_link


@pytest.fixture
def motion() -> Motion:
    rows = [(f, 50.0, 50.0 + c * (4.0 - f), c) for f in (1, 2, 3) for c in (-1, 1)]
    rows += [(f, 20.0, 20.0, 1) for f in range(5)]
    table = pd.DataFrame(rows, columns=["frame", "y_px", "x_px", "charge"])
    return link_singularities(table, max_step_px=7.0, frame_shape=(100, 100))


def test_edges_point_from_births_to_tracks_to_deaths(motion):
    graph = networkx.node_link_graph(json.loads(json.dumps(node_link(motion))), edges="edges")
    assert graph.is_directed()
    named = {motion.events.loc[k, "kind"]: f"event {k}" for k in range(2)}
    assert set(named) == {"pair_birth", "pair_death"}
    tracks = set(graph.successors(named["pair_birth"]))
    assert tracks == set(graph.predecessors(named["pair_death"]))
    assert {graph.nodes[t]["charge"] for t in tracks} == {-1, 1}
    assert networkx.is_directed_acyclic_graph(graph)


def test_both_forms_hold_the_same_graph(motion):
    plain = networkx.node_link_graph(node_link(motion), edges="edges")
    read = networkx.read_graphml(io.BytesIO(graphml(motion).encode()))
    assert dict(read.nodes(data=True)) == dict(plain.nodes(data=True))
    assert set(read.edges) == set(plain.edges)


def test_every_track_is_a_node(motion):
    names = {n["id"] for n in node_link(motion)["nodes"]}
    assert {f"track {t}" for t in motion.trajectories["track"]} <= names
