"""Sample stacks: simulated scenes, each frame made when it is looked at."""

from __future__ import annotations

from typing import Any

import napari
import numpy as np
import xarray as xr

from hologyre.optics import Optics
from hologyre.recipe import Recipe
from hologyre.simulate.scenes import stage
from hologyre.viewer.frames import FrameCache, lazy_frames
from hologyre.viewer.launch import open_docks
from hologyre.viewer.opening import stack_layer
from hologyre.viewer.session import Session

LayerData = tuple[Any, dict[str, Any], str]


def drying_film() -> list[LayerData]:
    """Speckle behind a film that dries: it slows down and settles."""
    return _sample("drying-film", "drying film")


def vortex_beams() -> list[LayerData]:
    """A Gaussian beam hosting three positive and two negative vortices."""
    return _sample("vortex-beams", "vortex beams")


def cell_in_beam() -> list[LayerData]:
    """A cell creeping through a beam that holds four vortices."""
    return _sample("cell-in-beam", "cell in a beam")


def charge_two() -> list[LayerData]:
    """One frame of a beam with a vortex of charge two."""
    return _sample("charge-two", "charge two")


def weak_fringes() -> list[LayerData]:
    """One frame of speckle whose fringes are weak."""
    return _sample("weak-fringes", "weak fringes")


def scene_stack(scene: str) -> tuple[xr.DataArray, Recipe]:
    """Return a simulated scene as a lazy stack, and a recipe that knows its optics."""
    staged = stage(scene)
    made = FrameCache()
    first = staged.hologram(0)
    made.put(0, first)

    def hologram(t: int) -> np.ndarray:
        return made.get(t, lambda: staged.hologram(t))

    shape = (staged.frames, *first.shape)
    stack = xr.DataArray(
        lazy_frames(hologram, shape, first.dtype),
        dims=("t", "y", "x"),
        coords={"t": np.arange(staged.frames, dtype=np.int64)},
        name=scene,
        attrs={
            "name": scene,
            "paths": (),
            "pixel_um": None,
            "frame_interval_s": None,
            "bits": staged.setup.camera.bits,
            "notes": (),
        },
    )
    settings = _settings(staged.scene.optics)
    settings["stack.notes"] = f"Simulation: {staged.scene.description}."
    return stack, Recipe().with_settings(settings)


def _sample(scene: str, name: str) -> list[LayerData]:
    stack, recipe = scene_stack(scene)
    session = Session(stack, name=name, recipe=recipe)
    _open_docks()
    return [stack_layer(session)]


def _settings(optics: Optics) -> dict[str, Any]:
    return {
        f"optics.{name}": getattr(optics, name)
        for name in (
            "wavelength_nm",
            "camera_pixel_um",
            "magnification",
            "medium_index",
            "numerical_aperture",
            "frame_interval_s",
        )
        if getattr(optics, name) is not None
    }


def _open_docks() -> None:
    """Open the docks once the sample is there, so that a new user sees what can be done."""
    viewer = napari.current_viewer()
    if viewer is None:
        return

    def opened(event: Any) -> None:
        viewer.layers.events.inserted.disconnect(opened)
        open_docks(viewer)

    # after napari has put the time slider in the middle
    viewer.layers.events.inserted.connect(opened, position="last")
