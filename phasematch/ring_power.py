"""Light in a ring: spontaneous pairs and stimulated idlers, up to threshold and no further.

The laser sits on the pump's hot resonance. The pump line is then shifted by -gN and another
by -2gN f, f = omega v_g over that of the pump (`cavity.line_share`), so the hot misalignment
is delta = delta_mu - 2gN (f_s + f_i - 1).
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from materials.common import inputs
from materials.common.constants import (
    C_UM_PER_PS,
    PER_PS_TO_PER_S,
    RAD_PER_PS_TO_MHZ,
    um_from_omega,
)
from materials.common.results import ErrorBars, frozen_array
from phasematch import cavity
from phasematch.caution import power_notes
from phasematch.curve_protocol import Curve, gamma_or_nan, values_with_bars
from phasematch.reasons import GAMMA_UNKNOWN, OUTSIDE_BAND
from phasematch.resonances import check_number, find_lines, order_range
from phasematch.ring_results import PairRates, StimulatedIdler

if TYPE_CHECKING:
    from phasematch.ring import Ring

_HIGH = 0.02  # x above which low-gain forms get a note


class Hot(NamedTuple):
    """A pumped ring in rad/ps: scalars of the pump, arrays of the pairs."""

    pump: float
    gamma: float
    n_group: float
    photons: float
    shift: float  # gN, by which the pump's line moves
    oscillating: int  # the first pair of the whole band at or above threshold, 0 for none
    least_w: float  # the least threshold of the band's pairs, NaN where none oscillates
    least_mu: int  # the pair it belongs to
    signal: np.ndarray
    idler: np.ndarray
    width_s: np.ndarray
    width_i: np.ndarray
    cold: np.ndarray
    delta: np.ndarray
    x: np.ndarray
    gain: np.ndarray  # G, at which signal and idler couple
    threshold_w: np.ndarray


def heat_up(ring: Ring, order: int, pump_w: float, count: int, kerr_shift: bool) -> Hot:
    """Photons inside, Kerr shift, hot misalignment and threshold fraction of each pair."""
    curve = ring.curve
    low, high = order_range(curve, ring.radius_um)
    # threshold is looked for among all pairs of the band, not only those listed
    most = max(count, min(order - low, high - order))
    check_number(curve, ring.radius_um, 2 * most + 1)
    mu = np.arange(1, most + 1)
    lines = find_lines(curve, ring.radius_um, np.arange(order - most, order + most + 1))
    omega = lines.omega_rad_per_ps
    pump, signal, idler = float(omega[most]), omega[most + mu], omega[most - mu]
    gamma = float(gamma_or_nan(curve, um_from_omega(pump)))
    n_group = _n_group(curve, pump)
    share_s, share_i = (
        cavity.line_share(line, _n_group(curve, line), pump, n_group) for line in (signal, idler)
    )
    width_p, coupling_p = pump / ring.q_loaded, pump / ring.q_coupling
    photons = cavity.photons_inside(pump_w, pump, width_p, coupling_p)
    per_photon = cavity.kerr_shift_per_photon(gamma, pump, n_group, ring.length_um)
    shift, kerr = photons * per_photon, float(kerr_shift) * (share_s + share_i - 1.0)
    gain = shift * np.sqrt(share_s * share_i)
    width_s, width_i = signal / ring.q_loaded, idler / ring.q_loaded
    cold = lines.misaligned(most, mu)
    delta = cold - 2.0 * shift * kerr if kerr_shift else cold
    x = cavity.threshold_fraction(gain, width_s, width_i, delta)
    at = cavity.threshold_gain(width_s, width_i, cold, coupling=share_s * share_i, shift=kerr)
    threshold = cavity.pump_for_photons(at / per_photon, pump, width_p, coupling_p)
    least = int(np.argmin(np.where(np.isnan(threshold), np.inf, threshold)))
    first = int(np.argmax(x >= 1.0)) + 1 if np.any(x >= 1.0) else 0
    arrays = (signal, idler, width_s, width_i, cold, delta, x, gain, threshold)
    about = (shift, first, float(threshold[least]), least + 1)
    return Hot(pump, gamma, n_group, photons, *about, *(part[:count] for part in arrays))


def _n_group(curve: Curve, omega: Any) -> Any:
    return C_UM_PER_PS * curve.beta_rad_per_um(omega, 1)


#: What `_resonances` gives.
_RESONANCES = (
    "misalignment_mhz", "hot_misalignment_mhz", "linewidth_mhz", "signal_um", "idler_um",
)  # fmt: skip


def _resonances(hot: Hot) -> list[np.ndarray]:
    """Cold and hot misalignment and linewidth in MHz, cold wavelengths in um, of each pair."""
    width = 0.5 * (hot.width_s + hot.width_i)
    mhz = [RAD_PER_PS_TO_MHZ * rate for rate in (hot.cold, hot.delta, width)]
    return [*mhz, um_from_omega(hot.signal), um_from_omega(hot.idler)]


def _rates(ring: Ring, hot: Hot) -> np.ndarray:
    """Made inside, singles of each arm, coincidences (1/s); x; threshold in W; shape (6, n)."""
    below = np.nan if hot.oscillating else 1.0
    weak = cavity.pair_rate_inside(hot.gain, hot.width_s, hot.width_i, hot.delta)
    made = PER_PS_TO_PER_S * below * weak / np.where(hot.x < 1.0, 1.0 - hot.x, np.nan)
    escape = ring.escape_fraction
    singles = escape * made
    return np.stack([made, singles, singles, escape**2 * made, hot.x, hot.threshold_w])


def _reasons(hot: Hot) -> np.ndarray:
    """Why a pair has no rate."""
    beyond = ~np.isfinite(hot.cold)
    own = hot.x >= 1.0
    another = np.full(own.shape, hot.oscillating > 0)
    unknown = np.full(own.shape, np.isnan(hot.gamma))
    return np.select(
        [beyond, unknown, own, another],
        [
            OUTSIDE_BAND,
            GAMMA_UNKNOWN,
            "at or above the threshold of oscillation",
            f"the ring oscillates at this power (pair {hot.oscillating})",
        ],
        default="",
    )


def _notes(ring: Ring, hot: Hot, low_gain: str) -> tuple[str, ...]:
    """``low_gain`` names what holds at low gain only, "" if nothing does."""
    notes = list(ring.notes)
    top = np.nanmax(hot.x, initial=0.0)
    if hot.oscillating:
        notes.append(
            f"at or above threshold, which pair {hot.least_mu} reaches first at "
            f"{hot.least_w:.4g} W: no rates are given, the pump is no longer what it was"
        )
    elif low_gain and top > _HIGH:
        notes.append(f"x reaches {top:.2g} of the threshold's 1: {low_gain} hold at low gain")
    # thresholds are powers, also where the pump is off
    return (*notes, *power_notes(ring.curve))


def spontaneous(
    ring: Ring, pump_um: float, pump_w: float, count: int, kerr_shift: bool
) -> PairRates:
    """See `Ring.spontaneous`."""
    pump_w = inputs.number("pump_w", pump_w, "W", least=True)
    count = inputs.whole("count", count, most=100_000)
    order = ring.pump_order(pump_um)

    def numbers(curve: Curve) -> np.ndarray:
        other = replace(ring, curve=curve)
        now = heat_up(other, order, pump_w, count, kerr_shift)
        return np.vstack([_rates(other, now), *_resonances(now)])

    def of_the_pump(curve: Curve) -> np.ndarray:
        other = replace(ring, curve=curve)
        now = heat_up(other, order, pump_w, count, kerr_shift)
        pump_um = um_from_omega(now.pump)
        shift = RAD_PER_PS_TO_MHZ * now.shift
        return np.array([pump_um, now.photons, other.build_up(pump_um), shift])

    hot = heat_up(ring, order, pump_w, count, kerr_shift)
    names = (
        "pairs_inside_per_s",
        "singles_signal_per_s",
        "singles_idler_per_s",
        "coincidences_per_s",
        "threshold_fraction",
        "threshold_w",
        *_RESONANCES,
    )
    values, bars = values_with_bars(ring.curve, names, numbers)
    pump = ("pump_um", "photons_inside", "build_up", "kerr_shift_mhz")
    at_pump, pump_bars = values_with_bars(ring.curve, pump, of_the_pump)
    return PairRates(
        mu=frozen_array(np.arange(1, count + 1)),
        **values,
        reason=frozen_array(_reasons(hot)),
        pump_w=pump_w,
        **at_pump,
        error=ErrorBars({**bars, **pump_bars}),
        **_about(ring, hot, pump_um, kerr_shift, "coincidences"),
    )


def stimulated(
    ring: Ring,
    pump_um: float,
    pump_w: float,
    signal_w: float,
    count: int,
    signal_detuning_mhz: float,
    kerr_shift: bool,
) -> StimulatedIdler:
    """See `Ring.stimulated`."""
    pump_w = inputs.number("pump_w", pump_w, "W", least=True)
    signal_w = inputs.number("signal_w", signal_w, "W", least=True)
    count = inputs.whole("count", count, most=100_000)
    seed_mhz = inputs.number("signal_detuning_mhz", signal_detuning_mhz, "MHz", above=-1e12)
    seed = seed_mhz / RAD_PER_PS_TO_MHZ
    order = ring.pump_order(pump_um)

    per_w = np.nan if signal_w == 0.0 else 1.0 / signal_w

    def numbers(curve: Curve) -> np.ndarray:
        other = replace(ring, curve=curve)
        now = heat_up(other, order, pump_w, count, kerr_shift)
        idler_w = _idler_w(other, now, pump_w, signal_w, seed)
        detuning = -RAD_PER_PS_TO_MHZ * (now.delta + seed)
        cold, hot, _, *um = _resonances(now)
        return np.vstack([idler_w, idler_w * per_w, now.x, detuning, cold, hot, *um])

    def pump(curve: Curve) -> np.ndarray:
        omega = find_lines(curve, ring.radius_um, [order]).omega_rad_per_ps
        return um_from_omega(omega)

    hot = heat_up(ring, order, pump_w, count, kerr_shift)
    names = (
        "idler_w",
        "efficiency",
        "threshold_fraction",
        "idler_detuning_mhz",
        "misalignment_mhz",
        "hot_misalignment_mhz",
        "signal_um",
        "idler_um",
    )
    values, bars = values_with_bars(ring.curve, names, numbers)
    at_pump, pump_bars = values_with_bars(ring.curve, ("pump_um",), pump)
    return StimulatedIdler(
        mu=frozen_array(np.arange(1, count + 1)),
        **values,
        reason=frozen_array(_reasons(hot)),
        **at_pump,
        pump_w=pump_w,
        signal_w=signal_w,
        signal_detuning_mhz=seed_mhz,
        error=ErrorBars({**bars, **pump_bars}),
        **_about(ring, hot, pump_um, kerr_shift, ""),
    )


def _idler_w(ring: Ring, hot: Hot, pump_w: float, signal_w: float, seed: float) -> np.ndarray:
    """Idler power of each pair; the idler's detuning follows from photon energy."""
    if hot.oscillating:
        return np.full(hot.x.shape, np.nan)

    def built(omega: Any, detuning: Any) -> Any:
        width, coupling = omega / ring.q_loaded, omega / ring.q_coupling
        n_group = np.asarray(_n_group(ring.curve, omega))
        return cavity.build_up(n_group, ring.length_um, width, coupling, detuning)

    detuning = -(hot.delta + seed)
    build_ups = built(hot.pump, 0.0), built(hot.signal, seed), built(hot.idler, detuning)
    gamma = hot.gamma * np.sqrt(hot.signal * hot.idler) / hot.pump
    weak = cavity.stimulated_idler_w(
        gamma, ring.length_um, pump_w, signal_w, build_ups, hot.idler / hot.signal
    )
    return weak * cavity.seed_gain(hot.gain, hot.width_s, hot.width_i, seed, detuning)


def _about(ring: Ring, hot: Hot, pump_um: float, kerr_shift: bool, low_gain: str) -> dict[str, Any]:
    about = ring.about(pump_um=pump_um, kerr_shift=kerr_shift)
    about["notes"] = _notes(ring, hot, low_gain)
    return about
