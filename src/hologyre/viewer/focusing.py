"""Autofocus of the current frame, off the GUI thread."""

from __future__ import annotations

from collections.abc import Callable

from hologyre.fields.autofocus import Focus, Kind, Measure, autofocus
from hologyre.viewer.maps import Skipped
from hologyre.viewer.plots import Curve, Panel
from hologyre.viewer.session import Session
from hologyre.viewer.styles import NEGATIVE
from hologyre.viewer.worker import Task, Work

_MEASURES = {
    "modulus": "mean modulus over its rms (largest in focus)",
    "tamura": "root of the intensity's contrast (largest in focus)",
}


def focus_frame(
    session: Session,
    range_um: tuple[float, float],
    *,
    measure: Measure,
    kind: Kind,
    on_done: Callable[[Focus], None],
) -> None:
    """Find the distance at which the current frame is in focus, and hand it on.

    The field is read as the recipe says, but not refocused.
    """
    plain = session.recipe.with_settings({"refocus.distance_um": 0.0})
    frame, optics = session.frame, session.optics

    def work() -> Work[Focus]:
        yield
        field = session.maps.field(plain, frame)
        yield
        if isinstance(field, Skipped):
            raise ValueError(field.reason)
        return autofocus(field, range_um, optics=optics, measure=measure, kind=kind)

    def end() -> None:
        session.task = None

    task = Task("Autofocus", work, total=2, on_done=on_done, on_end=end)
    session.task = task
    task.start()


def focus_panel(found: Focus) -> Panel:
    """Return the curve of an autofocus as a plot."""
    curve = found.curve if found.curve.ndim == 1 else found.curve.mean(axis=0)
    title = _MEASURES[found.measure]
    return Panel(title, (Curve(found.curve_um, curve, NEGATIVE),), from_zero=False)
