"""A stack and a resolved recipe in; fields, singularities and their motion out."""

from __future__ import annotations

from hologyre.analyse.analysis import Analysis, LazyFields, analyse, unwrap_field, wrapped_phase
from hologyre.analyse.frame import FrameResult, field_of, measure
from hologyre.analyse.inspection import Inspection, inspect, inspect_plan
from hologyre.analyse.iterate import ClusterError, connect, iter_frames
from hologyre.analyse.motion import frame_table, join_singularities, link
from hologyre.analyse.planning import Plan, plan

__all__ = [
    "Analysis",
    "ClusterError",
    "FrameResult",
    "Inspection",
    "LazyFields",
    "Plan",
    "analyse",
    "connect",
    "field_of",
    "frame_table",
    "inspect",
    "inspect_plan",
    "iter_frames",
    "join_singularities",
    "link",
    "measure",
    "plan",
    "unwrap_field",
    "wrapped_phase",
]
