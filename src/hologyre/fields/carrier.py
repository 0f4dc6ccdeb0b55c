"""The carrier of a hologram, found by itself."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hologyre.fields.remarks import WEAK, remarks
from hologyre.fields.saturation import usable_pixels
from hologyre.fields.sidebands import Sideband, Spectrum, find_sidebands, half_way
from hologyre.fields.tone import fit_tone
from hologyre.fields.whittle import fit_disc

_SMALLEST = 32
_SEARCHED = 1024
"""Side of the part of a frame in whose spectrum sidebands are searched for."""
_FAINT = 0.01
_NEARLY_ALL = 0.99
_SKIRT = 1.15
"""How much wider than its likeliest disc a sideband is when it is no disc."""
"""Visibility under which a hill of the spectrum is not taken for fringes."""


@dataclass(frozen=True)
class Carrier:
    """Where a sideband lies in the spectrum, and how wide it is.

    Parameters
    ----------
    fy, fx : float
        Carrier frequency, cycles/px. The field is what multiplies
        ``exp(+2 pi i (fy y + fx x))`` in the hologram.
    radius : float
        Radius of the sideband, cycles/px.
    sigma_fy, sigma_fx, sigma_radius : float
        Standard errors; NaN where not known, as for the radius of plain fringes, which is
        a choice.
    visibility : float
        Visibility of the fringes, twice the field's rms over that of the light, 0 to 1.
    kind : "fringes" or "speckle"
        A plain tone with little around it, or a filled disc.
    notes : tuple of str
        What a microscopist should know about these fringes.

    Raises
    ------
    ValueError
        If a frequency exceeds 0.5 cycles/px or the radius is not in (0, 0.5].
    """

    fy: float
    fx: float
    radius: float
    sigma_fy: float = float("nan")
    sigma_fx: float = float("nan")
    sigma_radius: float = float("nan")
    visibility: float = float("nan")
    kind: Literal["fringes", "speckle"] = "speckle"
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if not (abs(self.fy) <= 0.5 and abs(self.fx) <= 0.5):
            msg = f"carrier: expected |fy|, |fx| <= 0.5 cycles/px, got ({self.fy}, {self.fx})"
            raise ValueError(msg)
        if not 0 < self.radius <= 0.5:
            msg = f"radius: expected above 0 and at most 0.5 cycles/px, got {self.radius}"
            raise ValueError(msg)

    @property
    def frequency(self) -> float:
        """Length of the carrier, cycles/px."""
        return float(np.hypot(self.fy, self.fx))

    @property
    def conjugate(self) -> Carrier:
        """The other sideband, which holds the conjugate field."""
        return replace(self, fy=-self.fy, fx=-self.fx)


@dataclass(frozen=True)
class NoFringes:
    """No usable sideband; false, and says why."""

    reason: str

    def __bool__(self) -> bool:
        return False


def find_carrier(
    hologram: ArrayLike, *, radius: float | None = None, conjugate: bool = False
) -> Carrier | NoFringes:
    """Find the carrier of an off-axis hologram.

    Plain fringes (an empty frame, a smooth object) are fitted as a tone, whose frequency is
    then known to the Cramer-Rao bound; speckle as a filled disc over a floor, by likelihood.

    Parameters
    ----------
    hologram : (y, x) real array
        One frame, at least 32 x 32 pixels.
    radius : float, optional
        Radius of the sideband in cycles/px, where it is known: ``Optics.cutoff_per_px``.
    conjugate : bool
        Take the sideband with ``fx + fy / 2 < 0``, which holds the conjugate field.

    Returns
    -------
    Carrier or NoFringes
        The sideband's centre and radius, with standard errors and notes; or a false value
        that says why there is none.

    Raises
    ------
    ValueError
        If the frame is not real and 2-D, is too small, or holds NaN or infinity, or if the
        radius is not in (0, 0.5].
    """
    frame = _checked(hologram, radius)
    refused = _unusable(frame)
    if refused is not None:
        return refused
    counts = frame.astype(np.float64)
    spectrum = Spectrum.of(_middle(counts))
    bands = [b for b in find_sidebands(spectrum, most=3) if spectrum.visibility(b.power) > _FAINT]
    if bands and _meets_its_conjugate(bands[0]):
        if spectrum.visibility(bands[0].power) > WEAK:
            reason = (
                "the fringes lie at Nyquist, 2 px each, where both sidebands meet: tilt the "
                "reference beam less or magnify more"
            )
            return NoFringes(reason)
        bands = []
    if not bands:
        reason = (
            "no sideband stands apart from the zero order: there are no fringes, or they are "
            "too weak or too coarse; tilt the reference beam more and check that both beams "
            "reach the camera and are coherent"
        )
        return NoFringes(reason)
    return _refined(frame, counts, spectrum, bands[0], radius, conjugate)


def rank_candidates(hologram: ArrayLike, *, most: int = 6) -> list[Carrier]:
    """List the sidebands of a hologram, the most powerful first, by their moments alone.

    Several are found in multiplexed holograms, in those of curved fringes with harmonics, and
    where a stray reflection interferes.

    Parameters
    ----------
    hologram : (y, x) real array
        One frame.
    most : int
        How many to look for.

    Returns
    -------
    list of Carrier
        Those with ``fx + fy / 2 > 0``.
    """
    frame = _checked(hologram, None)
    if _unusable(frame) is not None:
        return []
    counts = frame.astype(np.float64)
    spectrum = Spectrum.of(_middle(counts))
    bands = find_sidebands(spectrum, most=most)
    return [
        Carrier(
            _wrapped(b.fy),
            _wrapped(b.fx),
            min(b.radius, 0.5),
            visibility=spectrum.visibility(b.power),
            kind="speckle",
        )
        for b in bands
    ]


def follow_carrier(hologram: ArrayLike, carrier: Carrier) -> Carrier | NoFringes:
    """Find the carrier again in another frame, near where it was, with the same radius.

    Parameters
    ----------
    hologram : (y, x) real array
        One frame.
    carrier : Carrier
        As found in a frame before.

    Returns
    -------
    Carrier or NoFringes
        The kind and the sideband are kept.
    """
    frame = _checked(hologram, None)
    refused = _unusable(frame)
    if refused is not None:
        return refused
    counts = frame.astype(np.float64)
    spectrum = Spectrum.of(_middle(counts))
    near = spectrum.distance(carrier.fy, carrier.fx) < carrier.radius
    around = spectrum.distance(carrier.fy, carrier.fx) < 1.4 * carrier.radius
    floor = float(np.median(spectrum.power[around & ~near])) / np.log(2)
    power = float((spectrum.power[near] - floor).sum())
    if power < 3 * floor * near.sum() ** 0.5:
        return NoFringes("the fringes are lost: nothing stands out where the carrier was")
    band = Sideband(carrier.fy, carrier.fx, carrier.radius, power, floor, np.inf)
    if carrier.kind == "fringes":
        rows, columns = np.nonzero(near)
        top = int(np.argmax(spectrum.power[near]))
        band = replace(band, fy=float(spectrum.fy[rows[top]]), fx=float(spectrum.fx[columns[top]]))
        return _as_fringes(frame, counts, spectrum, band, carrier.radius)
    return _as_speckle(counts, spectrum, band, carrier.radius)


def _refined(
    frame: NDArray[Any],
    counts: NDArray[np.float64],
    spectrum: Spectrum,
    band: Sideband,
    radius: float | None,
    conjugate: bool,
) -> Carrier:
    distance = spectrum.distance(band.fy, band.fx)
    near = distance < max(1.5 * band.radius, 4 / min(spectrum.power.shape))
    peak = np.unravel_index(int(np.argmax(np.where(near, spectrum.power, 0))), distance.shape)
    top = replace(band, fy=float(spectrum.fy[peak[0]]), fx=float(spectrum.fx[peak[1]]))
    # A tone fills the main lobe of the window, two bins to either side.
    lobe = _lobe(spectrum, top)
    if lobe > 0.5 * band.power:
        found = _as_fringes(frame, counts, spectrum, top, radius)
    else:
        found = _as_speckle(counts, spectrum, band, radius)
    usable = usable_pixels(frame)
    saturated = 0.0 if usable is None else 1 - float(usable.mean())
    place = (found.fy, found.fx)
    notes = remarks(place, found.radius, found.visibility, saturated, found.kind == "speckle")
    found = replace(found, notes=notes)
    own_half = found.fx + found.fy / 2 > 0
    return found if own_half != conjugate else found.conjugate


def _lobe(spectrum: Spectrum, top: Sideband) -> float:
    rows = np.abs((spectrum.fy - top.fy + 0.5) % 1 - 0.5) < 2.5 / spectrum.fy.size
    columns = np.abs((spectrum.fx - top.fx + 0.5) % 1 - 0.5) < 2.5 / spectrum.fx.size
    part = spectrum.power[np.ix_(rows, columns)]
    return float(part.sum()) - top.floor * part.size


def _as_fringes(
    frame: NDArray[Any],
    counts: NDArray[np.float64],
    spectrum: Spectrum,
    top: Sideband,
    radius: float | None,
) -> Carrier:
    usable = usable_pixels(frame)
    weight = None if usable is None else usable.astype(np.float64)
    # In the middle first, where the bins of the search are narrow enough to start from.
    part = None if weight is None else _middle(weight)
    tone = fit_tone(_middle(counts), top.fy, top.fx, part)
    if counts.shape != spectrum.power.shape:
        tone = fit_tone(counts, tone.fy, tone.fx, weight)
    if radius is None:
        radius = _fringe_radius(spectrum, tone.fy, tone.fx)
    return Carrier(
        _wrapped(tone.fy),
        _wrapped(tone.fx),
        radius,
        tone.sigma_fy,
        tone.sigma_fx,
        visibility=spectrum.visibility(top.power),
        kind="fringes",
    )


def _as_speckle(
    counts: NDArray[np.float64], spectrum: Spectrum, band: Sideband, radius: float | None
) -> Carrier:
    whole = spectrum if spectrum.power.shape == counts.shape else Spectrum.of(counts)
    given = radius is not None
    disc = fit_disc(whole, band.fy, band.fx, radius or band.radius, fixed_radius=given)
    distance = whole.distance(disc.fy, disc.fx)
    inside = distance < disc.radius
    power = float((whole.power[inside] - disc.floor).sum())
    if not given:
        most = max(half_way(disc.fy, disc.fx), disc.radius)
        wide = _holding(whole, distance, disc.floor, most)
        if wide - 1.5 / min(counts.shape) > _SKIRT * disc.radius:
            # No disc: a spectrum that fades out, of which the likeliest disc is the middle.
            disc = replace(disc, radius=wide, sigma_radius=float("nan"))
    return Carrier(
        _wrapped(disc.fy),
        _wrapped(disc.fx),
        min(disc.radius, 0.5),
        disc.sigma_fy,
        disc.sigma_fx,
        float("nan") if given else disc.sigma_radius,
        visibility=whole.visibility(power),
        kind="speckle",
    )


def _holding(spectrum: Spectrum, distance: NDArray[np.float64], floor: float, most: float) -> float:
    """Return the radius that holds nearly all the power above the floor within `most`."""
    step = 0.5 / max(spectrum.power.shape)
    near = distance < most
    ring = (distance[near] / step).astype(int)
    power = np.cumsum(np.bincount(ring, weights=spectrum.power[near] - floor))
    return float((np.argmax(power >= _NEARLY_ALL * power[-1]) + 1) * step)


def _fringe_radius(spectrum: Spectrum, fy: float, fx: float) -> float:
    """Return the radius that holds what surrounds a tone, at most a third of the carrier.

    A third keeps an object of that bandwidth clear of the zero order.
    """
    frequency = float(np.hypot(fy, fx))
    most = min(frequency / 3, 0.5 - max(abs(_wrapped(fy)), abs(_wrapped(fx))))
    most = max(most, 3 / min(spectrum.power.shape))
    least = min(max(frequency / 8, 6 / min(spectrum.power.shape)), most)
    distance = spectrum.distance(fy, fx)
    floor = float(np.median(spectrum.power)) / np.log(2)
    step = 1 / min(spectrum.power.shape)
    ring = (distance / step).astype(int)
    inside = ring < int(most / step) + 1
    count = np.bincount(ring[inside])
    mean = np.bincount(ring[inside], weights=spectrum.power[inside]) / np.maximum(count, 1)
    above = np.flatnonzero(mean > 2 * floor)
    return float(np.clip((above[-1] + 1) * step if above.size else least, least, most))


def _meets_its_conjugate(band: Sideband) -> bool:
    """Tell whether a sideband lies where its mirror image does, at Nyquist."""
    apart = np.hypot((2 * band.fy + 0.5) % 1 - 0.5, (2 * band.fx + 0.5) % 1 - 0.5)
    return float(apart) < band.radius


def _middle(counts: NDArray[np.float64]) -> NDArray[np.float64]:
    starts = [max((n - _SEARCHED) // 2, 0) for n in counts.shape]
    return counts[starts[0] : starts[0] + _SEARCHED, starts[1] : starts[1] + _SEARCHED]


def _wrapped(frequency: float) -> float:
    return float((frequency + 0.5) % 1 - 0.5)


def _unusable(frame: NDArray[Any]) -> NoFringes | None:
    low, high = frame.min(), frame.max()
    if low == high:
        return NoFringes(f"the frame is constant, every pixel is {low}")
    usable = usable_pixels(frame)
    if usable is not None and usable.mean() < 0.5:
        share = 1 - float(usable.mean())
        return NoFringes(f"{share:.0%} of the pixels are saturated: shorten the exposure")
    return None


def _checked(hologram: ArrayLike, radius: float | None) -> NDArray[Any]:
    frame = np.asarray(hologram)
    if frame.ndim != 2 or frame.dtype.kind not in "buif":
        msg = f"hologram: expected a real (y, x) array, got {frame.dtype} of shape {frame.shape}"
        raise ValueError(msg)
    if min(frame.shape) < _SMALLEST:
        msg = f"hologram: expected at least {_SMALLEST} x {_SMALLEST} pixels, got {frame.shape}"
        raise ValueError(msg)
    if radius is not None and not 0 < radius <= 0.5:
        raise ValueError(f"radius: expected above 0 and at most 0.5 cycles/px, got {radius}")
    bad = int(np.count_nonzero(~np.isfinite(frame)))
    if bad:
        raise ValueError(f"hologram: {bad} of {frame.size} pixels are NaN or infinite")
    return frame
