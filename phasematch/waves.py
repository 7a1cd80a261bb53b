"""The three waves of a channel: their frequencies and mismatch, and the photons they make."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from phasematch import mixing
from phasematch.curve_protocol import Curve, inside
from phasematch.reasons import GAMMA_UNKNOWN, OUTSIDE_BAND
from phasematch.weak_mixing import WeakPhotons, weak_photons_m2


class Waves(NamedTuple):
    """Frequencies, mismatch and gammas of pump, signal and idler, broadcast together."""

    pump: np.ndarray
    signal: np.ndarray
    idler: np.ndarray
    dbeta_per_m: np.ndarray
    kappa_per_m: np.ndarray
    gamma_signal: np.ndarray
    gamma_idler: np.ndarray
    pump_w: np.ndarray


def mix(curve: Curve, pump: Any, signal: Any, gamma: Any, power: Any) -> Waves:
    """The waves of given pump and signal frequencies in rad/ps.

    Parameters
    ----------
    curve : Curve
    pump, signal : array_like, rad/ps
    gamma : array_like, 1/(W m)
        At the pump; may be NaN, and is not needed where there is no power.
    power : ndarray, W
        Of the pump.

    Returns
    -------
    Waves
        NaN mismatch where a wave leaves the solved band.
    """
    idler = np.asarray(mixing.idler_omega(pump, signal))
    idler = np.where(idler > 0.0, idler, np.nan)
    dbeta = mixing.linear_mismatch_per_m(curve, pump, signal)
    gamma = np.where((power == 0.0) & np.isnan(gamma), 0.0, gamma)
    gamma_s = mixing.scaled_gamma(gamma, signal, pump)
    gamma_i = mixing.scaled_gamma(gamma, idler, pump)
    kappa = mixing.total_mismatch_per_m(dbeta, gamma_s, gamma_i, gamma, power)
    return Waves(pump, signal, idler, dbeta, kappa, gamma_s, gamma_i, power)


def weak(waves: Waves, loss_per_m: float, length_m: float) -> WeakPhotons:
    """Photon numbers of a weak pump with equal loss."""
    shape = weak_photons_m2(waves.dbeta_per_m, loss_per_m, length_m)
    front = waves.gamma_signal * waves.gamma_idler * np.square(waves.pump_w)
    return WeakPhotons(*(front * part for part in shape))


def photons(waves: Waves, loss_per_m: float, length_m: float) -> np.ndarray:
    """Idler photons out per signal photon in: exact without loss, weak pump with it."""
    if loss_per_m:
        return weak(waves, loss_per_m, length_m).stimulated
    return mixing.idler_photons(
        waves.kappa_per_m, waves.gamma_signal, waves.gamma_idler, waves.pump_w, length_m
    )


def log_photons(waves: Waves, loss_per_m: float, length_m: float) -> np.ndarray:
    """Natural logarithm of `photons`, finite for any gain."""
    if loss_per_m:
        with np.errstate(divide="ignore"):
            return np.log(weak(waves, loss_per_m, length_m).stimulated)
    return mixing.log_idler_photons(
        waves.kappa_per_m, waves.gamma_signal, waves.gamma_idler, waves.pump_w, length_m
    )


def density(waves: Waves, loss_per_m: float, length_m: float, counted: str) -> np.ndarray:
    """Spontaneous pairs (or photons of one arm) per Hz; see `Channel.pair_flux_density`."""
    if not loss_per_m:
        return photons(waves, loss_per_m, length_m)
    numbers = weak(waves, loss_per_m, length_m)
    return numbers.singles if counted == "singles" else numbers.coincidences


def reasons(curve: Curve, waves: Waves) -> np.ndarray:
    """Why a point of a map is not there, "" where it is."""
    shape = waves.dbeta_per_m.shape
    pump = np.broadcast_to(inside(curve, waves.pump), shape)
    signal = np.broadcast_to(inside(curve, waves.signal), shape)
    idler = inside(curve, waves.idler)
    gamma = np.broadcast_to(np.isfinite(waves.gamma_signal), shape)
    return np.select(
        [
            ~pump,
            ~signal,
            np.isnan(waves.idler),
            ~idler,
            ~gamma,
            np.broadcast_to(waves.pump_w == 0.0, shape),
        ],
        [
            f"pump {OUTSIDE_BAND}",
            f"signal {OUTSIDE_BAND}",
            f"idler {OUTSIDE_BAND}: the signal has twice the pump's frequency or more",
            f"idler {OUTSIDE_BAND}",
            GAMMA_UNKNOWN,
            "no pump power: no idler",
        ],
        default="",
    )
