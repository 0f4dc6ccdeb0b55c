"""From off-axis hologram time-lapses to trajectories of phase singularities.

Names are imported on first use, so that ``import hologyre`` stays fast and needs no screen.
"""

from __future__ import annotations

import sys
from importlib import import_module
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from hologyre.analyse import Analysis, FrameResult, analyse, iter_frames
    from hologyre.edits import (
        Agreement,
        Log,
        LogError,
        compare,
        found_of,
        load_log,
        replay,
        review,
        snap,
    )
    from hologyre.fields.autofocus import Focus, autofocus
    from hologyre.fields.blanks import Blanks
    from hologyre.fields.carrier import Carrier, NoFringes, find_carrier
    from hologyre.fields.compensate import Compensated, compensate
    from hologyre.fields.demodulate import demodulate
    from hologyre.fields.interpolate import evaluate, on_pixels, resample
    from hologyre.fields.noise import NoiseMap, field_noise
    from hologyre.fields.refocus import refocus
    from hologyre.fields.wavevector import current, local_wavevector
    from hologyre.grid import Field, Grid, Window
    from hologyre.motion import Motion, audit, follow_threads, link_singularities
    from hologyre.optics import Optics
    from hologyre.phase.residues import residues
    from hologyre.phase.unwrap import Unwrapped, unwrap
    from hologyre.recipe import Recipe, RecipeError, load_recipe, save_recipe
    from hologyre.results import OutputError, load_result
    from hologyre.singularities.locate import locate_singularities
    from hologyre.singularities.statistics import measure_density, measure_neighbours
    from hologyre.singularities.statistics_fields import measure_spectrum
    from hologyre.singularities.statistics_pairs import measure_charge_variance, measure_pairs
    from hologyre.singularities.theory import (
        charge_correlation,
        charge_variance,
        pair_correlation,
        zero_density,
    )
    from hologyre.singularities.theory_spectrum import Spectrum
    from hologyre.stacks import StackError, open_stack
    from hologyre.survey import SurveyError, survey

__version__ = "0.1.0"

_HOMES = {
    "Agreement": "hologyre.edits",
    "Analysis": "hologyre.analyse",
    "Blanks": "hologyre.fields.blanks",
    "Carrier": "hologyre.fields.carrier",
    "Compensated": "hologyre.fields.compensate",
    "Field": "hologyre.grid",
    "Focus": "hologyre.fields.autofocus",
    "FrameResult": "hologyre.analyse",
    "Grid": "hologyre.grid",
    "Log": "hologyre.edits",
    "LogError": "hologyre.edits",
    "Motion": "hologyre.motion",
    "NoFringes": "hologyre.fields.carrier",
    "NoiseMap": "hologyre.fields.noise",
    "Optics": "hologyre.optics",
    "OutputError": "hologyre.results",
    "Recipe": "hologyre.recipe",
    "RecipeError": "hologyre.recipe",
    "Spectrum": "hologyre.singularities.theory_spectrum",
    "StackError": "hologyre.stacks",
    "SurveyError": "hologyre.survey",
    "Unwrapped": "hologyre.phase.unwrap",
    "Window": "hologyre.grid",
    "analyse": "hologyre.analyse",
    "audit": "hologyre.motion",
    "autofocus": "hologyre.fields.autofocus",
    "charge_correlation": "hologyre.singularities.theory",
    "charge_variance": "hologyre.singularities.theory",
    "compare": "hologyre.edits",
    "compensate": "hologyre.fields.compensate",
    "current": "hologyre.fields.wavevector",
    "demodulate": "hologyre.fields.demodulate",
    "evaluate": "hologyre.fields.interpolate",
    "field_noise": "hologyre.fields.noise",
    "find_carrier": "hologyre.fields.carrier",
    "follow_threads": "hologyre.motion",
    "found_of": "hologyre.edits",
    "iter_frames": "hologyre.analyse",
    "link_singularities": "hologyre.motion",
    "load_log": "hologyre.edits",
    "load_recipe": "hologyre.recipe",
    "load_result": "hologyre.results",
    "local_wavevector": "hologyre.fields.wavevector",
    "locate_singularities": "hologyre.singularities.locate",
    "measure_charge_variance": "hologyre.singularities.statistics_pairs",
    "measure_density": "hologyre.singularities.statistics",
    "measure_neighbours": "hologyre.singularities.statistics",
    "measure_pairs": "hologyre.singularities.statistics_pairs",
    "measure_spectrum": "hologyre.singularities.statistics_fields",
    "on_pixels": "hologyre.fields.interpolate",
    "open_stack": "hologyre.stacks",
    "pair_correlation": "hologyre.singularities.theory",
    "refocus": "hologyre.fields.refocus",
    "replay": "hologyre.edits",
    "resample": "hologyre.fields.interpolate",
    "residues": "hologyre.phase.residues",
    "review": "hologyre.edits",
    "save_recipe": "hologyre.recipe",
    "snap": "hologyre.edits",
    "survey": "hologyre.survey",
    "unwrap": "hologyre.phase.unwrap",
    "zero_density": "hologyre.singularities.theory",
}

__all__ = [
    "Agreement",
    "Analysis",
    "Blanks",
    "Carrier",
    "Compensated",
    "Field",
    "Focus",
    "FrameResult",
    "Grid",
    "Log",
    "LogError",
    "Motion",
    "NoFringes",
    "NoiseMap",
    "Optics",
    "OutputError",
    "Recipe",
    "RecipeError",
    "Spectrum",
    "StackError",
    "SurveyError",
    "Unwrapped",
    "Window",
    "analyse",
    "audit",
    "autofocus",
    "charge_correlation",
    "charge_variance",
    "compare",
    "compensate",
    "current",
    "demodulate",
    "evaluate",
    "field_noise",
    "find_carrier",
    "follow_threads",
    "found_of",
    "iter_frames",
    "link_singularities",
    "load_log",
    "load_recipe",
    "load_result",
    "local_wavevector",
    "locate_singularities",
    "measure_charge_variance",
    "measure_density",
    "measure_neighbours",
    "measure_pairs",
    "measure_spectrum",
    "on_pixels",
    "open_stack",
    "pair_correlation",
    "refocus",
    "replay",
    "resample",
    "residues",
    "review",
    "save_recipe",
    "snap",
    "survey",
    "unwrap",
    "zero_density",
]


class _Package(ModuleType):
    """Two functions are called like the modules they live in; the functions win."""

    def __setattr__(self, name: str, value: object) -> None:
        # the import system sets a submodule here once it is loaded
        if isinstance(value, ModuleType) and name in _HOMES:
            value = getattr(value, name)
        super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Package


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'hologyre' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
