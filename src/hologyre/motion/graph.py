"""Tracks and events as a graph, in the two forms other programs read."""

from __future__ import annotations

from typing import Any
from xml.etree import ElementTree

import pandas as pd

from hologyre.motion.tracks import Motion

_TYPES = {bool: "boolean", int: "long", float: "double", str: "string"}


def node_link(motion: Motion) -> dict[str, Any]:
    """Return tracks and events as a directed graph in node-link form.

    Parameters
    ----------
    motion : Motion

    Returns
    -------
    dict
        What ``networkx.node_link_graph(..., edges="edges")`` reads, and ``json.dump`` writes.
        Nodes: one a track ("track 5": charge, first_frame, last_frame, rows and its first and
        last position) and one an event ("event 2": event_kind, frames, time, position). Edges
        point along time, from an event to the tracks it begins and from tracks to the event
        that ends them. What is not known is left out.
    """
    nodes: list[dict[str, Any]] = []
    edges: list[dict[str, Any]] = []
    begins: dict[int, int] = {}
    for track, rows in motion.trajectories.groupby("track", sort=True):
        first, last = rows.iloc[0], rows.iloc[-1]
        begins[int(track)] = int(first["frame"])
        nodes.append(
            {
                "id": f"track {track}",
                "kind": "track",
                "charge": int(first["charge"]),
                "first_frame": int(first["frame"]),
                "last_frame": int(last["frame"]),
                "rows": len(rows),
                "first_y_px": float(first["y_px"]),
                "first_x_px": float(first["x_px"]),
                "last_y_px": float(last["y_px"]),
                "last_x_px": float(last["x_px"]),
            }
        )
    for event in motion.events.to_dict("records"):
        name = f"event {event['event']}"
        node = {"id": name, "kind": "event", "event_kind": event["kind"]}
        for key in ("frame_before", "frame_after"):
            node[key] = int(event[key])
        for key in ("time_s", "y_px", "x_px", "y_um", "x_um"):
            if pd.notna(event[key]):
                node[key] = float(event[key])
        nodes.append(node)
        for track in (int(t) for t in event["tracks"].split(";")):
            ends = (f"track {track}", name)
            if begins[track] >= event["frame_after"]:
                ends = (name, f"track {track}")
            edges.append({"source": ends[0], "target": ends[1]})
    return {"directed": True, "multigraph": False, "graph": {}, "nodes": nodes, "edges": edges}


def graphml(motion: Motion) -> str:
    """Return the same graph as `node_link` as a GraphML document.

    It opens in networkx, igraph, Gephi, Cytoscape and yEd.
    """
    graph = node_link(motion)
    root = ElementTree.Element("graphml", xmlns="http://graphml.graphdrawing.org/xmlns")
    kinds: dict[str, str] = {}
    for node in graph["nodes"]:
        kinds |= {key: _TYPES[type(value)] for key, value in node.items() if key != "id"}
    for key, kind in kinds.items():
        attributes = {"id": key, "for": "node", "attr.name": key, "attr.type": kind}
        ElementTree.SubElement(root, "key", attributes)
    body = ElementTree.SubElement(root, "graph", edgedefault="directed")
    for node in graph["nodes"]:
        element = ElementTree.SubElement(body, "node", id=node["id"])
        for key, value in node.items():
            if key != "id":
                ElementTree.SubElement(element, "data", key=key).text = str(value)
    for edge in graph["edges"]:
        ElementTree.SubElement(body, "edge", source=edge["source"], target=edge["target"])
    ElementTree.indent(root)
    return ElementTree.tostring(root, encoding="unicode", xml_declaration=True) + "\n"
