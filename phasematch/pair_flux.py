"""The spectrum of spontaneous pairs of a channel: which signals, and the flux over them."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from materials.common import inputs
from materials.common.constants import RAD_PER_PS_TO_HZ, omega_from_um, um_from_omega
from materials.common.errors import InputError
from phasematch.curve_protocol import Curve, inside, snap
from phasematch.quadrature import integrate, phase_nodes
from phasematch.reasons import OUTSIDE_BAND

#: Signal frequencies -> (density per Hz, phase kappa L/2 in rad).
Spectrum = Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]

_RTOL = 1e-8  # rounding of beta, 1e-15 of some 1e5 rad of phase, leaves no more to gain


@dataclass(frozen=True, slots=True)
class SignalRange:
    """Signal frequencies in rad/ps whose pairs are counted, or why they cannot be.

    ``empty`` when the filters share no pair: the flux is then 0, not unknown.
    """

    low: float
    high: float
    reason: str = ""
    empty: bool = False


def signal_range(
    curve: Curve, pump_rad_per_ps: float, signal_band_um: Any, idler_band_um: Any
) -> SignalRange:
    """Signals that pass their filter and whose idlers pass theirs.

    Without filters: everything above the pump that the solved band allows.

    Raises
    ------
    InputError
        For a filter that holds the pump: its two photons could not be told apart.
    """
    if not inside(curve, pump_rad_per_ps):
        return SignalRange(math.nan, math.nan, f"pump {OUTSIDE_BAND}")
    pump = float(snap(curve, pump_rad_per_ps))
    band_low, band_high = curve.band_rad_per_ps
    least, most = max(band_low, 2 * pump - band_high), min(band_high, 2 * pump - band_low)
    if signal_band_um is None and idler_band_um is None:
        reason = "" if most > pump else f"every signal or idler {OUTSIDE_BAND}"
        return SignalRange(pump, most, reason)
    low, high = -math.inf, math.inf
    for name, band, mirrored in (
        ("signal_band_um", signal_band_um, False),
        ("idler_band_um", idler_band_um, True),
    ):
        if band is None:
            continue
        start, stop = _frequencies(name, band, pump)
        if mirrored:
            start, stop = 2 * pump - stop, 2 * pump - start
        low, high = max(low, start), min(high, stop)
    if low >= high:
        return SignalRange(math.nan, math.nan, empty=True)
    slack = 1e-12 * pump
    if low < least - slack or high > most + slack:
        reason = f"a filter, or its mirror image about the pump, {OUTSIDE_BAND}"
        return SignalRange(low, high, reason)
    return SignalRange(max(low, least), min(high, most))


def _frequencies(name: str, band_um: Any, pump: float) -> tuple[float, float]:
    short, long = inputs.interval(name, band_um, "um")
    low, high = omega_from_um(long), omega_from_um(short)
    if low < pump < high:
        raise InputError(
            f"{name} = {short:g} to {long:g} um holds the pump at {um_from_omega(pump):g} um; "
            "give a filter on one side of it"
        )
    return low, high


def integrate_flux(spectrum: Spectrum, span: SignalRange) -> tuple[float, float]:
    """Pairs per second over a range, and the error estimate of the quadrature.

    Panels follow the phase of the spectrum, a quarter of a fringe at most, and are halved
    until 1e-8 of the flux is reached.
    """
    if span.empty:
        return 0.0, 0.0
    if span.reason:
        return math.nan, math.nan
    edges = phase_nodes(lambda w: spectrum(w)[1], span.low, span.high, 0.5 * math.pi)
    value, error = integrate(lambda w: spectrum(w)[0], edges, rtol=_RTOL)
    return value * RAD_PER_PS_TO_HZ, error * RAD_PER_PS_TO_HZ


def beyond_note(spectrum: Spectrum, span: SignalRange, flux: float) -> tuple[str, ...]:
    """What the end of the solved band cuts off, as a note.

    Beyond the last fringes the density is half its envelope on average and falls as the
    inverse square of the mismatch, taken to grow as the square of the offset.
    """
    if span.empty or not np.isfinite(flux) or flux <= 0.0:
        return ()
    width = span.high - span.low
    _, phase = spectrum(np.array([span.high - 1e-3 * width, span.high]))
    if abs(phase[1]) < 2 * math.pi:
        return (
            "the spectrum has not fallen at the edge of the solved band, so the flux is what the "
            "band lets through; widen the band for the whole",
        )
    # the last fringe, a turn of pi, gives the envelope
    fringe = math.pi * 1e-3 * width / max(abs(phase[1] - phase[0]), 1e-300)
    last = span.high - np.linspace(0.0, min(fringe, 0.25 * width), 65)
    envelope = float(np.max(spectrum(last)[0]))
    tail = 0.5 * envelope * width / 3.0 * RAD_PER_PS_TO_HZ
    if not np.isfinite(tail) or tail < 1e-6 * flux:
        return ()
    share = 100.0 * tail / flux
    return (f"signals beyond the solved band would add about {share:.2g} % (not counted)",)
