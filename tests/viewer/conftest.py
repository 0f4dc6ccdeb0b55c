from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray

from hologyre.recipe import Recipe
from hologyre.stacks import as_stack
from hologyre.survey import survey


@pytest.fixture(scope="session")
def stack(holograms: NDArray[Any]) -> xr.DataArray:
    return as_stack(np.array(holograms), name="speckle")


@pytest.fixture(scope="session")
def recipe(stack: xr.DataArray) -> Recipe:
    """Everything decided; the quickest way to read fields."""
    return survey(stack, quick())


@pytest.fixture
def finish(qtbot: Any) -> Callable[[Any], None]:
    """Wait until the work on a session is done."""

    def wait(session: Any) -> None:
        qtbot.waitUntil(lambda: session.task is None, timeout=60_000)

    return wait


def quick() -> Recipe:
    return Recipe().with_settings(
        {"field.edges": "plain", "optics.pixel_um": 0.25, "optics.frame_interval_s": 0.5}
    )
