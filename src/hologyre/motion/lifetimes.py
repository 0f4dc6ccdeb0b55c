"""How long singularities live, when many are seen for part of their life only."""

from __future__ import annotations

import numpy as np
import pandas as pd


def lifetimes(trajectories: pd.DataFrame, events: pd.DataFrame) -> pd.DataFrame:
    """Return the life of each track and how much of it was seen.

    Parameters
    ----------
    trajectories, events : DataFrame
        Tables of a `Motion`.

    Returns
    -------
    DataFrame
        track, charge, life_frames, began and ended ("pair", "split", "merge", "border",
        "unexplained", or "record" for tracks that meet the first or last frame or a hole).
        Life is counted between the events' moments where they are known, else from half a
        frame before the first row to half a frame after the last.
    """
    rows = trajectories.groupby("track").agg(
        charge=("charge", "first"), first=("frame", "min"), last=("frame", "max")
    )
    told = events.assign(track=events["tracks"].str.split(";")).explode("track")
    told = told.assign(track=told["track"].astype("int64")).set_index("track")
    told = told.join(rows, how="inner")
    start = told[told["frame_after"] <= told["first"]]
    end = told[told["frame_before"] >= told["last"]]
    names = {
        "pair_birth": "pair",
        "pair_death": "pair",
        "entry": "border",
        "exit": "border",
        "split": "split",
        "merge": "merge",
        "unexplained": "unexplained",
    }
    began = start["kind"].map(names).groupby(level=0).first().reindex(rows.index)
    ended = end["kind"].map(names).groupby(level=0).first().reindex(rows.index)
    open_start, open_end = began.isna(), ended.isna()
    born = rows["first"] - np.where(open_start, 0.0, 0.5)
    died = rows["last"] + np.where(open_end, 0.0, 0.5)
    return pd.DataFrame(
        {
            "charge": rows["charge"],
            "life_frames": died - born,
            "began": began.fillna("record"),
            "ended": ended.fillna("record"),
        }
    ).reset_index()


def survival(lives: pd.DataFrame) -> pd.DataFrame:
    """Return the share of born singularities that live on, against their age.

    Parameters
    ----------
    lives : DataFrame
        As `lifetimes` returns it. Only tracks whose birth in a pair was seen count; those that
        left through the border, met the end of the record, or ended unexplained are censored:
        they count until then.

    Returns
    -------
    DataFrame
        age_frames, alive (share that lives longer), error (standard error), at_risk; one row
        an age at which some died.

    Notes
    -----
    The product-limit estimate with its variance (E. L. Kaplan and P. Meier, J. Am. Stat.
    Assoc. 53, 457, 1958; M. Greenwood, 1926).
    """
    born = lives[lives["began"] == "pair"]
    life = born["life_frames"].to_numpy()
    died = (born["ended"] == "pair").to_numpy()
    ages, deaths = np.unique(life[died], return_counts=True)
    at_risk = len(life) - np.searchsorted(np.sort(life), ages)
    alive = np.cumprod(1.0 - deaths / at_risk)
    left = np.maximum(at_risk - deaths, 1)
    error = alive * np.sqrt(np.cumsum(deaths / (at_risk * left)))
    return pd.DataFrame({"age_frames": ages, "alive": alive, "error": error, "at_risk": at_risk})
