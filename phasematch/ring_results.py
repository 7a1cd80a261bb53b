"""What a ring gives back: resonances, dispersion, aligned pairs, and the light they make."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from materials.common.results import FullResult, quantity

_MU = ("mu",)
_ORDER = ("order",)
_DETUNING = ("pump_order", "mu")


@dataclass(frozen=True, slots=True, eq=False)
class Resonances(FullResult):
    """All resonances of a ring within a band."""

    order: np.ndarray = quantity("azimuthal order", "1", _ORDER)
    frequency_thz: np.ndarray = quantity("frequency", "THz", _ORDER)
    wavelength_um: np.ndarray = quantity("wavelength", "um", _ORDER)
    fsr_ghz: np.ndarray = quantity("half the distance of the two neighbours", "GHz", _ORDER)
    linewidth_mhz: np.ndarray = quantity("loaded linewidth", "MHz", _ORDER)


@dataclass(frozen=True, slots=True, eq=False)
class RingDispersion(FullResult):
    """D_k = d^k omega/d mu^k about a resonance, exact derivatives, over 2 pi."""

    pump_order: int = quantity("azimuthal order of the pump", "1")
    pump_um: float = quantity("wavelength of the resonance", "um")
    d1_ghz: float = quantity("D1/2pi", "GHz")
    d2_mhz: float = quantity("D2/2pi", "MHz")
    d3_khz: float = quantity("D3/2pi", "kHz")
    d4_khz: float = quantity("D4/2pi", "kHz")


@dataclass(frozen=True, slots=True, eq=False)
class IntegratedDispersion(FullResult):
    """D_int = omega_mu - omega_0 - D1 mu over 2 pi, mu = -count .. count."""

    mu: np.ndarray = quantity("mode number from the pump", "1", _MU)
    frequency_thz: np.ndarray = quantity("frequency", "THz", _MU)
    integrated_mhz: np.ndarray = quantity("integrated dispersion", "MHz", _MU)
    reason: np.ndarray = quantity("why there is no value", "", _MU)
    pump_order: int = quantity("azimuthal order of the pump", "1")
    pump_um: float = quantity("wavelength of the pump resonance", "um")


@dataclass(frozen=True, slots=True, eq=False)
class PairTable(FullResult):
    """Cold resonance pairs around a pump: by how much they miss, and whether they align.

    ``aligned`` where |misalignment| <= linewidth, the half-rate point. Pairs beyond the
    solved band are NaN, not aligned, and ``reason`` says so.
    """

    mu: np.ndarray = quantity("pair index", "1", _MU)
    misalignment_mhz: np.ndarray = quantity("cold misalignment", "MHz", _MU)
    misalignment_linewidths: np.ndarray = quantity("misalignment in loaded linewidths", "1", _MU)
    linewidth_mhz: np.ndarray = quantity("mean loaded linewidth of the pair", "MHz", _MU)
    aligned: np.ndarray = quantity("misses by at most a linewidth", "", _MU)
    signal_um: np.ndarray = quantity("signal wavelength", "um", _MU)
    idler_um: np.ndarray = quantity("idler wavelength", "um", _MU)
    signal_thz: np.ndarray = quantity("signal frequency", "THz", _MU)
    idler_thz: np.ndarray = quantity("idler frequency", "THz", _MU)
    reason: np.ndarray = quantity("why there is no value", "", _MU)
    pump_order: int = quantity("azimuthal order of the pump", "1")
    pump_um: float = quantity("wavelength of the pump resonance", "um")
    pump_thz: float = quantity("frequency of the pump resonance", "THz")

    #: Pairs are listed one by one, so one beyond the solved band counts as failed.
    outside_counts: ClassVar[bool] = True

    @property
    def misalignment_error_mhz(self) -> np.ndarray:
        """Error bar of the misalignment, MHz: ``error["misalignment_mhz"]``."""
        return self.error["misalignment_mhz"]


@dataclass(frozen=True, slots=True, eq=False)
class DetuningMap(FullResult):
    """Cold misalignment for every pump resonance of a band and every pair about it."""

    pump_order: np.ndarray = quantity("azimuthal order of the pump", "1", ("pump_order",))
    mu: np.ndarray = quantity("pair index", "1", _MU)
    pump_um: np.ndarray = quantity("pump wavelength", "um", ("pump_order",))
    misalignment_mhz: np.ndarray = quantity("cold misalignment", "MHz", _DETUNING)
    linewidth_mhz: np.ndarray = quantity("mean loaded linewidth of the pair", "MHz", _DETUNING)
    misalignment_linewidths: np.ndarray = quantity(
        "misalignment in loaded linewidths", "1", _DETUNING
    )
    aligned: np.ndarray = quantity("misses by at most a linewidth", "", _DETUNING)
    reason: np.ndarray = quantity("why there is no value", "", _DETUNING)


@dataclass(frozen=True, slots=True, eq=False)
class PairRates(FullResult):
    """Spontaneous pairs of a pumped ring, one row a pair of resonances.

    ``threshold_fraction`` is x; where any pair reaches x = 1 the ring oscillates and all
    rates are NaN. Singles and pairs made are exact below threshold for an undepleted pump,
    coincidences hold at low gain.
    """

    mu: np.ndarray = quantity("pair index", "1", _MU)
    coincidences_per_s: np.ndarray = quantity("pairs with both photons in the bus", "1/s", _MU)
    singles_signal_per_s: np.ndarray = quantity("signal photons in the bus", "1/s", _MU)
    singles_idler_per_s: np.ndarray = quantity("idler photons in the bus", "1/s", _MU)
    pairs_inside_per_s: np.ndarray = quantity("pairs made inside", "1/s", _MU)
    threshold_fraction: np.ndarray = quantity("x, 1 at threshold", "1", _MU)
    threshold_w: np.ndarray = quantity("pump power at threshold", "W", _MU)
    misalignment_mhz: np.ndarray = quantity("cold misalignment", "MHz", _MU)
    hot_misalignment_mhz: np.ndarray = quantity("misalignment under power", "MHz", _MU)
    linewidth_mhz: np.ndarray = quantity("mean loaded linewidth of the pair", "MHz", _MU)
    signal_um: np.ndarray = quantity("signal wavelength, cold", "um", _MU)
    idler_um: np.ndarray = quantity("idler wavelength, cold", "um", _MU)
    reason: np.ndarray = quantity("why there is no value", "", _MU)
    pump_um: float = quantity("wavelength of the pump resonance, cold", "um")
    pump_w: float = quantity("pump power in the bus", "W")
    photons_inside: float = quantity("pump photons in the ring", "1")
    build_up: float = quantity("intensity build-up of the pump", "1")
    kerr_shift_mhz: float = quantity("shift gN of the pump line, downwards", "MHz")


@dataclass(frozen=True, slots=True, eq=False)
class StimulatedIdler(FullResult):
    """Idler power of a pumped ring with a seed in the signal resonance, one row a pair."""

    mu: np.ndarray = quantity("pair index", "1", _MU)
    idler_w: np.ndarray = quantity("idler power in the bus", "W", _MU)
    efficiency: np.ndarray = quantity("idler power over signal power", "1", _MU)
    threshold_fraction: np.ndarray = quantity("x, 1 at threshold", "1", _MU)
    idler_detuning_mhz: np.ndarray = quantity("idler from its hot resonance", "MHz", _MU)
    misalignment_mhz: np.ndarray = quantity("cold misalignment", "MHz", _MU)
    hot_misalignment_mhz: np.ndarray = quantity("misalignment under power", "MHz", _MU)
    signal_um: np.ndarray = quantity("signal resonance, cold", "um", _MU)
    idler_um: np.ndarray = quantity("idler resonance, cold", "um", _MU)
    reason: np.ndarray = quantity("why there is no value", "", _MU)
    pump_um: float = quantity("wavelength of the pump resonance, cold", "um")
    pump_w: float = quantity("pump power in the bus", "W")
    signal_w: float = quantity("signal power in the bus", "W")
    signal_detuning_mhz: float = quantity("signal from its hot resonance", "MHz")
