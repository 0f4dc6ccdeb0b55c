"""Frames together: tracks of singularities, their births and deaths, how they move."""

from hologyre.motion.assign import link_singularities
from hologyre.motion.threads import follow_threads
from hologyre.motion.tracks import Motion

__all__ = ["Motion", "follow_threads", "link_singularities"]
