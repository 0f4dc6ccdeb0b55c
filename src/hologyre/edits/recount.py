"""The table of frames after edits: counts, and whether it still adds up."""

from __future__ import annotations

import pandas as pd

from hologyre.edits.corrected import Corrected
from hologyre.motion.audit import audit
from hologyre.tables import FRAMES, conform


def recount(frames: pd.DataFrame, corrected: Corrected) -> pd.DataFrame:
    """Return the table of frames with counts and audit of the corrected tables.

    Parameters
    ----------
    frames : DataFrame
        Columns `hologyre.tables.FRAMES`. Not changed.
    corrected : Corrected

    Returns
    -------
    DataFrame
        With the columns positive, negative and audit made anew for the frames that were
        measured. The border's winding is that of the whole frame; for the audit the charge set
        aside by regions is taken off it. Edits against the measured winding are told by number.
    """
    done = frames["status"] == "done"
    numbers = frames.loc[done, "frame"]
    aside = corrected.set_aside.groupby("frame")["charge"].sum()
    winding = frames.loc[done].set_index("frame")["border_winding"].dropna()
    inside = winding - aside.reindex(winding.index, fill_value=0)
    known = {int(frame): int(turns) for frame, turns in inside.items()}
    told = audit(corrected.trajectories, corrected.events, known, frames=numbers)
    told = told.set_index("frame").reindex(numbers)
    by_hand = corrected.contradictions.groupby("frame")["edit"].agg(list)
    remarks = [_told(text, by_hand.get(frame, [])) for frame, text in told["audit"].items()]
    out = frames.copy()
    counts = corrected.singularities.groupby(["frame", corrected.singularities["charge"] > 0])
    sizes = counts.size().unstack(fill_value=0).reindex(numbers, fill_value=0)
    for name, positive in (("positive", True), ("negative", False)):
        column = sizes[positive] if positive in sizes else pd.Series(0, index=numbers)
        out.loc[done, name] = column.to_numpy()
    if len(corrected.trajectories):
        out.loc[done, "audit"] = remarks
    return conform(out, FRAMES)


def _told(text: str, edits: list[int]) -> str:
    if not edits:
        return text
    one = "edit" if len(edits) == 1 else "edits"
    by_hand = f"{one} {', '.join(map(str, edits))} by hand against the winding"
    return by_hand if text == "ok" else f"{text}; {by_hand}"
