"""The phase of one frame, read the quickest way, while settings are being moved."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from napari import Viewer
from napari.layers import Layer
from numpy.typing import NDArray

from hologyre.fields.bands import FilterWindow
from hologyre.fields.carrier import Carrier
from hologyre.fields.demodulate import demodulate
from hologyre.fields.interpolate import resample
from hologyre.fields.refocus import refocus
from hologyre.optics import Optics
from hologyre.survey import finite_pixels
from hologyre.viewer.layers import placement
from hologyre.viewer.session import Session, metadata_for, role_of, session_of
from hologyre.viewer.spectrum import Band
from hologyre.viewer.styles import STYLES

ROLE = "preview"
_SIDE = 512
TIP = (
    "While the band or the distance is dragged, the phase shown is a quick preview: plain edges, "
    "no blanks, saturated pixels as they are, nothing taken out, refocused without padding. Once "
    "it rests, the pictures are read again as the recipe says."
)


@dataclass(frozen=True, eq=False)
class Preview:
    """A wrapped phase and where its samples lie on the hologram's pixels."""

    phase: NDArray[np.float32]
    step_px: tuple[float, float]
    origin_px: tuple[float, float]


def preview_phase(
    counts: NDArray[Any],
    band: Band,
    *,
    window: FilterWindow = "disc",
    distance_um: float = 0.0,
    optics: Optics | None = None,
) -> Preview:
    """Read a frame's phase with plain edges, on a grid just fine enough for the eye.

    Parameters
    ----------
    counts : (y, x) array
        A hologram.
    band : Band
        The sideband.
    window : "disc" or "hann"
        Filter on the sideband.
    distance_um : float
        Distance to refocus by, on the frame's own torus; light that leaves on one side comes
        back on the other.
    optics : Optics, optional
        Needed for refocusing.

    Raises
    ------
    ValueError
        If the band or the optics cannot be used.
    """
    field = demodulate(
        counts,
        Carrier(band.fy, band.fx, band.radius),
        edges="plain",
        window=window,
        valid=finite_pixels(counts),
        saturation=np.inf,
    )
    if distance_um and optics is not None:
        field = refocus(field, distance_um, optics=optics, edges="periodic")
    ny, nx = field.grid.frame_shape
    fine = resample(field, max(max(ny, nx) / _SIDE, 1.0))
    rows = fine.grid.y_px(fine.shape[-2]) <= ny - 1
    columns = fine.grid.x_px(fine.shape[-1]) <= nx - 1
    phase = np.angle(fine.values[rows][:, columns]).astype(np.float32, copy=False)
    return Preview(phase, fine.grid.step_px, fine.grid.origin_px)


class PreviewLayer:
    """A layer over a session's pictures that holds the preview while it lasts."""

    def __init__(self, viewer: Viewer) -> None:
        self._viewer = viewer

    def layer(self, session: Session) -> Layer | None:
        """Return the layer if it is there."""
        return next(
            (x for x in self._viewer.layers if role_of(x) == ROLE and session_of(x) is session),
            None,
        )

    def show(self, session: Session, found: Preview) -> None:
        """Show a preview."""
        layer = self.layer(session)
        place = placement(session.optics).of(2)
        pixel = np.array(place["scale"])
        place["scale"] = tuple(pixel * found.step_px)
        place["translate"] = tuple(pixel * found.origin_px)
        if layer is not None:
            layer.data = found.phase
            # each assignment draws the layer anew
            for name in ("scale", "translate"):
                if not np.allclose(getattr(layer, name), place[name], rtol=1e-9, atol=0):
                    setattr(layer, name, place[name])
            return
        layers = self._viewer.layers
        selected = layers.selection.active
        style = STYLES["phase"]
        pictures = ("stack", "amplitude", "phase", "unwrapped", "jumps")
        below = [i for i, x in enumerate(layers) if role_of(x) in pictures]
        layer = self._viewer.add_image(
            found.phase,
            name=f"preview of the phase [{session.name}]",
            metadata=metadata_for(session, ROLE),
            **style.options,
            **place,
        )
        layers.move(len(layers) - 1, max(below, default=len(layers) - 2) + 1)
        layers.selection.active = selected

    def remove(self, session: Session) -> None:
        """Take the preview away."""
        layer = self.layer(session)
        if layer is not None:
            self._viewer.layers.remove(layer)
