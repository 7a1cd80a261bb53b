"""What a channel gives back: the pump x signal map, the conversion band, the pair flux."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from materials.common.results import FullResult, quantity

_MAP = ("pump_um", "signal_um")


@dataclass(frozen=True, slots=True, eq=False)
class ChannelMap(FullResult):
    """Mixing in a channel for every pump and every signal wavelength.

    Arrays of shape (pumps, signals); where a point has no value it is NaN and ``reason``
    says why ("" elsewhere). ``error`` has a bar for each of mismatch, gain and efficiency.
    """

    pump_um: np.ndarray = quantity("pump wavelength", "um", ("pump_um",))
    signal_um: np.ndarray = quantity("signal wavelength", "um", ("signal_um",))
    idler_um: np.ndarray = quantity("idler wavelength", "um", _MAP)
    mismatch_per_m: np.ndarray = quantity("phase mismatch with its nonlinear part", "1/m", _MAP)
    gain_db: np.ndarray = quantity("signal gain", "dB", _MAP)
    efficiency_db: np.ndarray = quantity("idler out over signal in", "dB", _MAP)
    reason: np.ndarray = quantity("why there is no value", "", _MAP)
    pump_w: float = quantity("pump power at the input", "W")


@dataclass(frozen=True, slots=True, eq=False)
class ConversionBand(FullResult):
    """The signal band about the most efficient signal in which the efficiency stays high.

    An edge is NaN where the efficiency does not fall far enough inside the solved band;
    ``reason`` then says so.
    """

    pump_um: float = quantity("pump wavelength", "um")
    pump_w: float = quantity("pump power at the input", "W")
    level_db: float = quantity("level at the edges, below the peak", "dB")
    peak_um: float = quantity("signal wavelength of the peak", "um")
    peak_efficiency_db: float = quantity("efficiency at the peak", "dB")
    short_um: float = quantity("short edge", "um")
    long_um: float = quantity("long edge", "um")
    low_thz: float = quantity("low edge", "THz")
    high_thz: float = quantity("high edge", "THz")
    width_thz: float = quantity("width", "THz")
    contains_pump: bool = quantity("the pump lies within the band", "")
    reason: str = quantity("why an edge is missing", "")


@dataclass(frozen=True, slots=True, eq=False)
class PairFlux(FullResult):
    """Photon pairs per second from a channel, signals on one side of the pump.

    ``low_thz`` to ``high_thz`` are the signal frequencies that were integrated over.
    """

    pump_um: float = quantity("pump wavelength", "um")
    pump_w: float = quantity("pump power at the input", "W")
    counted: str = quantity("what is counted", "")
    flux_per_s: float = quantity("flux", "1/s")
    quadrature_error_per_s: float = quantity("error estimate of the quadrature", "1/s")
    low_thz: float = quantity("lowest signal frequency", "THz")
    high_thz: float = quantity("highest signal frequency", "THz")
    reason: str = quantity("why there is no value", "")
