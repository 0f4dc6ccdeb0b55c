from __future__ import annotations

import inspect
import subprocess
import sys
from typing import Any

import pytest

import hologyre
from hologyre.fields.carrier import find_carrier
from hologyre.fields.compensate import compensate
from hologyre.fields.demodulate import demodulate
from hologyre.motion import follow_threads, link_singularities
from hologyre.optics import Optics
from hologyre.phase.unwrap import unwrap
from hologyre.recipe import Recipe
from hologyre.singularities.locate import locate_singularities

# words of the recipe that the functions spell otherwise: what is surveyed, and a text for None
SPELT = {"auto": None, "mixed": "auto", "none": None}


def loaded_after(statement: str) -> set[str]:
    code = f"import sys; {statement}; print(*sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return set(done.stdout.split())


def test_importing_the_package_loads_none_of_its_heavy_parts() -> None:
    loaded = loaded_after("import hologyre")
    heavy = {"napari", "qtpy", "PySide6", "matplotlib", "numba", "dask", "xarray", "pandas",
             "scipy", "numpy", "zarr", "tifffile", "pydantic", "typer"}  # fmt: skip
    assert loaded & heavy == set()


@pytest.mark.parametrize(
    "statement",
    [
        "import hologyre.results",
        "import hologyre; [getattr(hologyre, name) for name in hologyre.__all__]",
        "import hologyre.cli",
    ],
)
def test_headless_parts_load_no_screen(statement: str) -> None:
    loaded = loaded_after(statement)
    assert loaded & {"napari", "qtpy", "PySide6", "vispy", "magicgui", "matplotlib.pyplot"} == set()


def test_help_of_the_command_loads_no_numerics() -> None:
    loaded = loaded_after("import hologyre.cli")
    assert loaded & {"numba", "scipy", "dask", "matplotlib", "pandas"} == set()


@pytest.mark.parametrize("name", hologyre.__all__)
def test_every_public_name_is_there_and_documented(name: str) -> None:
    thing = getattr(hologyre, name)
    assert name in dir(hologyre)
    assert inspect.getdoc(thing)


def test_unknown_name_is_told() -> None:
    with pytest.raises(AttributeError, match="module 'hologyre' has no attribute 'analyze'"):
        hologyre.analyze  # type: ignore[attr-defined]  # noqa: B018


@pytest.mark.parametrize("name", ["analyse", "survey"])
def test_functions_win_over_the_modules_of_their_name(name: str) -> None:
    code = f"import hologyre.{name}, hologyre; assert callable(hologyre.{name})"
    subprocess.run([sys.executable, "-c", code], check=True)
    code = f"import hologyre; hologyre.{name}; import hologyre.{name}; hologyre.{name}.__name__"
    subprocess.run([sys.executable, "-c", code], check=True)


@pytest.mark.parametrize(
    ("path", "function", "option"),
    [
        ("carrier.radius", find_carrier, "radius"),
        ("carrier.conjugate", find_carrier, "conjugate"),
        ("field.edges", demodulate, "edges"),
        ("field.window", demodulate, "window"),
        ("field.precision", demodulate, "precision"),
        ("stack.saturation", demodulate, "saturation"),
        ("compensation.order", compensate, "order"),
        ("compensation.method", compensate, "method"),
        ("phase.weight", unwrap, "weight"),
        ("singularities.margin_px", locate_singularities, "margin_px"),
        ("motion.method", follow_threads, "method"),
        ("motion.max_gap", follow_threads, "max_gap"),
        ("motion.max_gap", link_singularities, "max_gap"),
        ("optics.medium_index", Optics, "medium_index"),
        ("optics.wavelength_nm", Optics, "wavelength_nm"),
        ("optics.camera_pixel_um", Optics, "camera_pixel_um"),
        ("optics.magnification", Optics, "magnification"),
        ("optics.numerical_aperture", Optics, "numerical_aperture"),
        ("optics.frame_interval_s", Optics, "frame_interval_s"),
    ],
)
def test_recipe_default_is_the_function_default(path: str, function: Any, option: str) -> None:
    section, name = path.split(".")
    ours = getattr(getattr(Recipe(), section), name)
    theirs = inspect.signature(function).parameters[option].default
    assert (SPELT.get(ours, ours) if isinstance(ours, str) else ours) == theirs


@pytest.mark.parametrize("function", [follow_threads, link_singularities])
def test_longest_step_is_auto_in_recipe_and_functions(function: Any) -> None:
    assert Recipe().motion.max_step_px == "auto"
    assert inspect.signature(function).parameters["max_step_px"].default == "auto"
