"""What a TIFF says about its pixels and its frames, where it says anything."""

from __future__ import annotations

import math
import xml.etree.ElementTree as ET
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import tifffile

_UM_PER = {
    "µm": 1.0, "μm": 1.0, "um": 1.0, "micron": 1.0, "microns": 1.0, "micrometer": 1.0,
    "micrometre": 1.0, "\\u00b5m": 1.0, "nm": 1e-3, "mm": 1e3, "cm": 1e4, "m": 1e6, "å": 1e-4,
    "pm": 1e-6,
}  # fmt: skip
_S_PER = {"s": 1.0, "sec": 1.0, "ms": 1e-3, "µs": 1e-6, "μs": 1e-6, "us": 1e-6, "ns": 1e-9,
          "min": 60.0, "h": 3600.0, "d": 86400.0}  # fmt: skip


@dataclass(frozen=True)
class Metadata:
    """Pixel size in object space (um), frame interval (s), and remarks; None where unknown."""

    pixel_um: float | None = None
    frame_interval_s: float | None = None
    notes: tuple[str, ...] = field(default=())


def read_metadata(tif: tifffile.TiffFile) -> Metadata:
    """Return what the file says, OME first, then ImageJ.

    The resolution tags of other files are left alone: they are a printer's dots per inch
    more often than a measurement.
    """
    if tif.ome_metadata:
        return _from_ome(tif.ome_metadata)
    if tif.imagej_metadata:
        return _from_imagej(tif.imagej_metadata, tif.pages.first)
    return Metadata()


def _positive(value: Any) -> float | None:
    try:
        number = float(value)
    except (TypeError, ValueError):
        return None
    return number if math.isfinite(number) and number > 0 else None


def _scaled(value: Any, unit: Any, table: dict[str, float]) -> float | None:
    number = _positive(value)
    factor = table.get(str(unit).strip().lower())
    return None if number is None or factor is None else number * factor


def _square(y_um: float | None, x_um: float | None, notes: list[str]) -> float | None:
    if y_um is None or x_um is None:
        return y_um or x_um
    if not math.isclose(y_um, x_um, rel_tol=1e-3):
        notes.append(
            f"the pixel size in the file differs along y ({y_um:.6g} um) and x ({x_um:.6g} um) "
            "and was not used"
        )
        return None
    return x_um


def _from_imagej(meta: dict[str, Any], page: Any) -> Metadata:
    notes: list[str] = []
    interval = _scaled(meta.get("finterval"), meta.get("tunit", "s") or "s", _S_PER)
    if interval is None and (rate := _positive(meta.get("fps"))):
        interval = 1.0 / rate
    sizes: list[float | None] = []
    for name, unit in (("YResolution", "yunit"), ("XResolution", "unit")):
        tag = page.tags.get(name)
        size = None
        if tag is not None and isinstance(tag.value, tuple) and tag.value[0]:
            size = tag.value[1] / tag.value[0]
        sizes.append(_scaled(size, meta.get(unit) or meta.get("unit"), _UM_PER))
    return Metadata(_square(sizes[0], sizes[1], notes), interval, tuple(notes))


def _from_ome(xml: str) -> Metadata:
    notes: list[str] = []
    try:
        root = ET.fromstring(xml)
    except ET.ParseError:
        return Metadata(notes=("the OME description in the file is not well formed",))
    pixels = root.find(".//{*}Pixels")
    if pixels is None:
        return Metadata()
    y_um, x_um = (
        _scaled(
            pixels.get(f"PhysicalSize{axis}"),
            pixels.get(f"PhysicalSize{axis}Unit", "µm"),
            _UM_PER,
        )
        for axis in "YX"
    )
    interval = _scaled(pixels.get("TimeIncrement"), pixels.get("TimeIncrementUnit", "s"), _S_PER)
    if interval is None:
        interval = _interval_of_planes(pixels, notes)
    return Metadata(_square(y_um, x_um, notes), interval, tuple(notes))


def _interval_of_planes(pixels: ET.Element, notes: list[str]) -> float | None:
    times = {}
    for plane in pixels.findall("{*}Plane"):
        seconds = _scaled(plane.get("DeltaT"), plane.get("DeltaTUnit", "s"), _S_PER)
        if plane.get("DeltaT") == "0":
            seconds = 0.0
        if seconds is not None and plane.get("TheZ", "0") == plane.get("TheC", "0") == "0":
            times[int(plane.get("TheT", "0"))] = seconds
    if len(times) < 2:
        return None
    numbers = np.array(sorted(times))
    steps = np.diff([times[n] for n in numbers]) / np.diff(numbers)
    interval = float(np.median(steps))
    if interval <= 0:
        return None
    if np.max(np.abs(steps - interval)) > 0.1 * interval:
        notes.append(
            f"frames were not taken at even intervals ({steps.min():.4g} to {steps.max():.4g} s); "
            f"times use the median, {interval:.6g} s"
        )
    return interval
