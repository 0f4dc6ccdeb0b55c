"""The figure that shows a whole run at a glance."""

from __future__ import annotations

import io
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from matplotlib.patches import Circle
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from hologyre.analyse import Analysis
from hologyre.fields.interpolate import on_pixels
from hologyre.grid import Field

# Okabe and Ito's colours, told apart with every common colour vision deficiency
POSITIVE, NEGATIVE = "#E69F00", "#56B4E9"
BORN, DIED, ENTERED, LEFT = "#009E73", "#D55E00", "#7FC9B4", "#E8A877"
_INK, _FAINT = "#262626", "#8c8c8c"
_MARKERS = {1: ("^", POSITIVE), -1: ("v", NEGATIVE)}


@dataclass(frozen=True)
class _Scale:
    """From hologram pixels to what the axes show."""

    factor: float
    unit: str

    def extent(self, shape: tuple[int, int]) -> tuple[float, float, float, float]:
        ny, nx = (n * self.factor for n in shape)
        half = self.factor / 2
        return (-half, nx - half, ny - half, -half)


def overview_png(analysis: Analysis) -> bytes:
    """Draw hologram, spectrum, amplitude, phase, tracks and counts; return a PNG file.

    The frame shown is the middle one of those that were measured.

    Raises
    ------
    ValueError
        If no frame was measured.
    """
    if not analysis.measured:
        raise ValueError("analysis: no frame was measured, there is nothing to draw")
    middle = len(analysis.measured) // 2
    frame = analysis.measured[middle]
    field = analysis.fields[middle]
    hologram = np.asarray(analysis.stack.data[frame].compute())
    pixel = analysis.recipe.optics.values().pixel_um
    scale = _Scale(1.0, "px") if pixel is None else _Scale(pixel, "µm")

    figure = Figure(
        figsize=(15, 9.6), dpi=110, layout=ConstrainedLayoutEngine(w_pad=0.1, h_pad=0.1)
    )
    FigureCanvasAgg(figure)
    figure.suptitle(_title(analysis), color=_INK, fontsize=13, x=0.012, ha="left")
    axes = figure.subplots(2, 3, gridspec_kw={"width_ratios": (1, 1, 1)})
    _hologram(axes[0, 0], hologram, frame, scale)
    _spectrum(axes[0, 1], hologram, analysis)
    values = on_pixels(field)
    _amplitude(axes[0, 2], values, frame, scale)
    _phase(axes[1, 0], values, field, analysis, frame, scale)
    _tracks(axes[1, 1], analysis, scale)
    _counts(figure, axes[1, 2], analysis)
    png = io.BytesIO()
    figure.savefig(png, format="png", metadata={"Software": None})
    return png.getvalue()


def _title(analysis: Analysis) -> str:
    tracks = analysis.trajectories["track"].nunique()
    words = [
        f"{len(analysis.measured)} of {len(analysis.frames)} frames",
        f"{len(analysis.singularities)} singularities",
        f"{tracks} tracks",
        f"{len(analysis.events)} events",
    ]
    return f"{analysis.stack.attrs.get('name', 'stack')}:  " + ",  ".join(words)


def _heading(axes: Axes, text: str) -> None:
    axes.set_title(text, loc="left", fontsize=11, color=_INK)
    axes.tick_params(colors=_INK, labelsize=8)


def _image_axes(axes: Axes, shape: tuple[int, int], scale: _Scale) -> None:
    left, right, bottom, top = scale.extent(shape)
    axes.set_xlim(left, right)
    axes.set_ylim(bottom, top)
    axes.set_aspect("equal")
    axes.set_xlabel(f"x ({scale.unit})", fontsize=9)
    axes.set_ylabel(f"y ({scale.unit})", fontsize=9)


def _hologram(axes: Axes, hologram: NDArray[Any], frame: int, scale: _Scale) -> None:
    low, high = np.percentile(hologram, (0.2, 99.8))
    shown = axes.imshow(
        hologram,
        cmap="gray",
        vmin=low,
        vmax=max(high, low + 1e-9),
        extent=scale.extent(hologram.shape),
    )
    _image_axes(axes, hologram.shape, scale)
    _heading(axes, f"Hologram, frame {frame}")
    _colorbar(axes, shown, "counts")


def _spectrum(axes: Axes, hologram: NDArray[Any], analysis: Analysis) -> None:
    ny, nx = hologram.shape
    fade = np.outer(np.hanning(ny + 2)[1:-1], np.hanning(nx + 2)[1:-1])
    counts = hologram.astype(np.float64)
    power = np.abs(np.fft.fftshift(np.fft.fft2((counts - counts.mean()) * fade))) ** 2
    level = 10 * np.log10(power / power.max() + 1e-12)
    low = float(np.percentile(level, 20))
    half_y, half_x = 0.5 / ny, 0.5 / nx
    shown = axes.imshow(
        level, cmap="magma", vmin=low, vmax=0, interpolation="antialiased",
        extent=(-0.5 - half_x, 0.5 - half_x, 0.5 - half_y, -0.5 - half_y),
    )  # fmt: skip
    carrier = analysis.recipe.carrier
    fy, fx, radius = float(carrier.fy), float(carrier.fx), float(carrier.radius)
    axes.add_patch(Circle((fx, fy), radius, fill=False, edgecolor="white", linewidth=1.6))
    axes.plot(fx, fy, "+", color="white", markersize=7)
    axes.add_patch(
        Circle((-fx, -fy), radius, fill=False, edgecolor="white", linewidth=0.8, linestyle=":")
    )
    axes.set_xlabel("x (cycles/px)", fontsize=9)
    axes.set_ylabel("y (cycles/px)", fontsize=9)
    _heading(axes, f"Spectrum; carrier {fy:.3f}, {fx:.3f}, radius {radius:.3f}")
    _colorbar(axes, shown, "dB")


def _amplitude(axes: Axes, values: NDArray[Any], frame: int, scale: _Scale) -> None:
    amplitude = np.abs(values)
    shown = axes.imshow(
        amplitude, cmap="gray", vmin=0, vmax=float(np.percentile(amplitude, 99.8)),
        extent=scale.extent(amplitude.shape),
    )  # fmt: skip
    _image_axes(axes, amplitude.shape, scale)
    _heading(axes, f"Amplitude, frame {frame}")
    _colorbar(axes, shown, "counts")


def _phase(
    axes: Axes,
    values: NDArray[Any],
    field: Field,
    analysis: Analysis,
    frame: int,
    scale: _Scale,
) -> None:
    shape = values.shape
    shown = axes.imshow(
        np.angle(values), cmap="twilight_shifted", vmin=-np.pi, vmax=np.pi,
        interpolation="nearest", extent=scale.extent(shape),
    )  # fmt: skip
    here = analysis.singularities[analysis.singularities["frame"] == frame]
    size = float(np.clip(6000 / max(len(here), 1), 16, 60))
    for charge, (marker, colour) in _MARKERS.items():
        chosen = here[np.sign(here["charge"]) == charge]
        axes.scatter(
            chosen["x_px"] * scale.factor, chosen["y_px"] * scale.factor, s=size, marker=marker,
            facecolor=colour, edgecolor="black", linewidth=0.4,
        )  # fmt: skip
    _image_axes(axes, shape, scale)
    up, down = (int((np.sign(here["charge"]) == charge).sum()) for charge in (1, -1))
    _heading(axes, f"Phase, frame {frame}: {up} positive ▲, {down} negative ▼")
    bar = _colorbar(axes, shown, "rad")
    bar.set_ticks([-np.pi, 0, np.pi], labels=["−π", "0", "π"])


def _tracks(axes: Axes, analysis: Analysis, scale: _Scale) -> None:
    table = analysis.trajectories
    shape = (analysis.stack.sizes["y"], analysis.stack.sizes["x"])
    axes.set_facecolor("#f4f4f4")
    _image_axes(axes, shape, scale)
    if table.empty:
        text = "one frame: no motion" if len(analysis.measured) == 1 else "no tracks"
        axes.text(0.5, 0.5, text, transform=axes.transAxes, ha="center", color=_FAINT)
        _heading(axes, "Tracks")
        return
    last = int(table["frame"].max())
    for charge, (marker, colour) in _MARKERS.items():
        chosen = table[np.sign(table["charge"]) == charge]
        position = chosen[["x_px", "y_px"]].to_numpy() * scale.factor
        starts = np.flatnonzero(np.diff(chosen["track"].to_numpy())) + 1
        lines = np.split(position, starts)
        axes.add_collection(LineCollection(lines, colors=colour, linewidths=1.3, alpha=0.9))
        ends = chosen[chosen["frame"] == last]
        axes.scatter(
            ends["x_px"] * scale.factor, ends["y_px"] * scale.factor, s=14, marker=marker,
            facecolor=colour, edgecolor="black", linewidth=0.4, zorder=3,
        )  # fmt: skip
    _heading(axes, f"{table['track'].nunique()} tracks; markers: frame {last}")


def _counts(figure: Figure, axes: Axes, analysis: Analysis) -> None:
    frames, events = analysis.frames, analysis.events
    timed = not frames["time_s"].isna().any() and len(frames) > 1
    axes.set_axis_off()
    inner = axes.get_subplotspec().subgridspec(2, 1, height_ratios=(1.6, 1), hspace=0.06)  # type: ignore[union-attr]
    above = figure.add_subplot(inner[0])
    below = figure.add_subplot(inner[1], sharex=above)
    step = 1.0
    if timed:
        step = float(frames["time_s"].diff().median() / frames["frame"].diff().median())
    at = frames["frame"] * step
    for charge, name in ((1, "positive"), (-1, "negative")):
        marker, colour = _MARKERS[charge]
        above.plot(
            at, frames[name].astype("float64"), color=colour, marker=marker, markersize=4,
            markeredgecolor="black", markeredgewidth=0.3,
            label=f"charge {'+' if charge > 0 else '−'}1",
        )  # fmt: skip
    for frame in frames.loc[frames["status"] == "skipped", "frame"]:
        above.axvspan((frame - 0.5) * step, (frame + 0.5) * step, color="#dddddd", linewidth=0)
    above.set_ylabel("singularities", fontsize=9)
    above.tick_params(labelbottom=False)
    _heading(above, "Counts and events")
    below.axhline(0, color=_INK, linewidth=0.8)
    middle = (events["frame_before"] + events["frame_after"]) / 2
    for side, kinds in ((1, ("pair_birth", "entry")), (-1, ("pair_death", "exit"))):
        _event_bars(below, events, middle, step, side, kinds)
    below.set_ylabel("events", fontsize=9)
    if events.empty:
        below.set_ylim(-1, 1)
        below.text(0.5, 0.6, "no events", transform=below.transAxes, ha="center", color=_FAINT)
    below.yaxis.set_major_locator(MaxNLocator(nbins=5, integer=True))
    above.yaxis.set_major_locator(MaxNLocator(nbins=7, integer=True))
    if len(frames) == 1:
        below.set_xticks(at)
    elif not timed:
        below.xaxis.set_major_locator(MaxNLocator(integer=True))
    below.yaxis.set_major_formatter(lambda value, _: f"{abs(value):.0f}")
    below.set_xlabel("time (s)" if timed else "frame", fontsize=9)
    below.tick_params(colors=_INK, labelsize=8)
    for part in (above, below):
        part.spines[["top", "right"]].set_visible(False)
        part.margins(y=0.12)
        if part.get_legend_handles_labels()[0]:
            part.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), frameon=False, fontsize=8)


def _event_bars(
    axes: Axes,
    events: pd.DataFrame,
    middle: pd.Series,
    step: float,
    side: int,
    kinds: tuple[str, str],
) -> None:
    colours = {"pair_birth": BORN, "entry": ENTERED, "pair_death": DIED, "exit": LEFT}
    words = {
        "pair_birth": "pairs born", "entry": "entered", "pair_death": "pairs died", "exit": "left",
    }  # fmt: skip
    base: pd.Series | float = 0.0
    places = pd.Index(sorted(middle.unique()))
    for kind in kinds:
        number = middle[events["kind"] == kind].value_counts().reindex(places, fill_value=0)
        if len(number):
            axes.bar(
                places * step, side * number, bottom=base, width=0.8 * step,
                color=colours[kind], label=words[kind], linewidth=0,
            )  # fmt: skip
        base = base + side * number


def _colorbar(axes: Axes, shown: Any, label: str) -> Any:
    beside = axes.inset_axes((1.02, 0.0, 0.03, 1.0))
    bar = axes.figure.colorbar(shown, cax=beside)
    bar.ax.tick_params(labelsize=8)
    bar.set_label(label, fontsize=8)
    bar.outline.set_visible(False)
    return bar
