"""Frames together: tracks of singularities, their births and deaths, how they move."""

from hologyre.motion.assign import link_singularities
from hologyre.motion.audit import audit
from hologyre.motion.graph import graphml, node_link
from hologyre.motion.metrics import TrackScores, score_events, score_tracks
from hologyre.motion.threads import follow_threads
from hologyre.motion.tracks import Motion

__all__ = [
    "Motion",
    "TrackScores",
    "audit",
    "follow_threads",
    "graphml",
    "link_singularities",
    "node_link",
    "score_events",
    "score_tracks",
]
