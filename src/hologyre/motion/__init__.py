"""Frames together: tracks of singularities, their births and deaths, how they move."""

from hologyre.motion.assign import link_singularities
from hologyre.motion.audit import audit
from hologyre.motion.drift import estimate_drift, remove_drift
from hologyre.motion.graph import graphml, node_link
from hologyre.motion.kinematics import (
    Diffusion,
    fit_diffusion,
    mean_squared_displacement,
    summarise_tracks,
)
from hologyre.motion.lifetimes import lifetimes, survival
from hologyre.motion.lines import VortexLines, vortex_lines
from hologyre.motion.metrics import TrackScores, score_events, score_tracks
from hologyre.motion.pairs import SquareRootLaw, fit_square_root, pair_separation
from hologyre.motion.threads import follow_threads
from hologyre.motion.tracks import Motion
from hologyre.motion.velocity import field_velocity, track_velocity

__all__ = [
    "Diffusion",
    "Motion",
    "SquareRootLaw",
    "TrackScores",
    "VortexLines",
    "audit",
    "estimate_drift",
    "field_velocity",
    "fit_diffusion",
    "fit_square_root",
    "follow_threads",
    "graphml",
    "lifetimes",
    "link_singularities",
    "mean_squared_displacement",
    "node_link",
    "pair_separation",
    "remove_drift",
    "score_events",
    "score_tracks",
    "summarise_tracks",
    "survival",
    "track_velocity",
    "vortex_lines",
]
