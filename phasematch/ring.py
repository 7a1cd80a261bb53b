"""A ring: its resonances, how far pairs of them miss alignment, and what light does in it.

beta is taken at the centre radius R and the azimuthal order is m = beta R, so resonances
are where beta R is whole. Misalignment of pair mu is omega_{+mu} + omega_{-mu} - 2 omega_0;
positive where dispersion is anomalous. One bus, the pump on resonance; both quality
factors are taken the same for all lines.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from materials.common import inputs
from materials.common.constants import (
    C_UM_PER_PS,
    RAD_PER_PS_TO_MHZ,
    TWO_PI,
    omega_from_um,
    um_from_omega,
)
from materials.common.errors import OutOfRange
from materials.common.results import ErrorBars, frozen_array
from phasematch import cavity, ring_power
from phasematch.bend_note import bend_note
from phasematch.curve_protocol import Curve, error_bar, inside, snap, values_with_bars
from phasematch.reasons import outside_or_good
from phasematch.resonances import Lines, check_number, find_lines, order_range, ring_dispersion
from phasematch.ring_results import (
    DetuningMap,
    IntegratedDispersion,
    PairRates,
    PairTable,
    Resonances,
    RingDispersion,
    StimulatedIdler,
)

__all__ = ["Ring"]

_MAP_POINTS = 1_000_000  # points of a detuning map, at most


@dataclass(frozen=True, slots=True, eq=False)
class Ring:
    """A ring resonator of one waveguide.

    Parameters
    ----------
    curve : Curve
        Dispersion of the mode; never solved again here. When it was solved at another bend
        radius, results carry a note with the estimated shift.
    radius_um : float
        Centre radius.
    q_intrinsic : float
        Quality factor of the uncoupled ring; a lossless ring is a large number.
    q_coupling : float
        Quality factor of all couplers together. The pump comes in and the photons go out
        through them as if they were one; with several, a port has its share.

    Raises
    ------
    OutOfRange
        For values that are not positive and finite.
    """

    curve: Curve = field(repr=False)
    radius_um: float = field(kw_only=True)
    q_intrinsic: float = field(kw_only=True)
    q_coupling: float = field(kw_only=True)

    def __post_init__(self) -> None:
        for name, unit in (("radius_um", "um"), ("q_intrinsic", ""), ("q_coupling", "")):
            object.__setattr__(self, name, inputs.number(name, getattr(self, name), unit))

    # ------------------------------------------------------------ numbers of the ring

    @property
    def length_um(self) -> float:
        """Circumference 2 pi R, um."""
        return TWO_PI * self.radius_um

    @property
    def q_loaded(self) -> float:
        """Loaded quality factor, 1/(1/q_intrinsic + 1/q_coupling)."""
        return 1.0 / (1.0 / self.q_intrinsic + 1.0 / self.q_coupling)

    @property
    def escape_fraction(self) -> float:
        """Share Gamma_c/Gamma of the photons inside that leave through the couplers."""
        return self.q_loaded / self.q_coupling

    @property
    def notes(self) -> tuple[str, ...]:
        """Notes of the curve, and of its bend radius where it is not the ring's."""
        return (*self.curve.notes, *bend_note(self.curve, self.radius_um))

    def about(self, **more: Any) -> dict[str, Any]:
        """Inputs, notes and provenance of every result of the ring; ``more`` are inputs."""
        given = {"mode": self.curve.mode, "radius_um": self.radius_um}
        quality = {"q_intrinsic": self.q_intrinsic, "q_coupling": self.q_coupling}
        return {
            "inputs": {**given, **quality, **more},
            "notes": self.notes,
            "provenance": self.curve.provenance,
        }

    def fsr_ghz(self, wavelength_um: Any) -> Any:
        """Free spectral range c/(n_g L), GHz; raises `OutOfRange` outside the band."""
        n_group = np.asarray(self.curve.n_group(wavelength_um))
        return inputs.scalar_or_array(1e3 * C_UM_PER_PS / (n_group * self.length_um))

    def linewidth_mhz(self, wavelength_um: Any) -> Any:
        """Loaded linewidth, full width at half maximum, MHz."""
        omega = omega_from_um(inputs.numbers("wavelength_um", wavelength_um, "um"))
        return inputs.scalar_or_array(omega / self.q_loaded * RAD_PER_PS_TO_MHZ)

    def finesse(self, wavelength_um: Any) -> Any:
        """Free spectral range over linewidth."""
        return 1e3 * self.fsr_ghz(wavelength_um) / self.linewidth_mhz(wavelength_um)

    def build_up(self, wavelength_um: Any, detuning_mhz: Any = 0.0) -> Any:
        """Circulating power over bus power at a detuning from a resonance."""
        omega = omega_from_um(inputs.numbers("wavelength_um", wavelength_um, "um"))
        detuning = np.asarray(detuning_mhz, dtype=float) / RAD_PER_PS_TO_MHZ
        n_group = np.asarray(self.curve.n_group(wavelength_um))
        width, coupling = omega / self.q_loaded, omega / self.q_coupling
        return inputs.scalar_or_array(
            cavity.build_up(n_group, self.length_um, width, coupling, detuning)
        )

    # ------------------------------------------------------------ cold resonances

    def pump_order(self, pump_um: float) -> int:
        """Azimuthal order of the resonance nearest to a pump wavelength.

        Raises
        ------
        OutOfRange
            When the pump lies outside the band.
        """
        omega = self._in_band("pump_um", pump_um)
        low, high = self._order_range(None, None)
        nearest = round(self.radius_um * float(self.curve.beta_rad_per_um(omega)))
        return min(max(nearest, low), high)

    def resonances(self, short_um: float | None = None, long_um: float | None = None) -> Resonances:
        """All resonances between two wavelengths (by default in the solved band).

        Raises
        ------
        OutOfRange
            For wavelengths outside the band.
        """
        order = self._orders(short_um, long_um)

        def stack(curve: Curve) -> np.ndarray:
            around = find_lines(
                curve, self.radius_um, np.append(order, [order[0] - 1, order[-1] + 1])
            )
            n = len(order)
            up, down = np.r_[1:n, n + 1], np.r_[n, 0 : n - 1]
            spacing = 0.5e3 / TWO_PI * around.apart(up, down)
            omega = around.omega_rad_per_ps[:n]
            width = RAD_PER_PS_TO_MHZ * omega / self.q_loaded
            return np.stack([omega / TWO_PI, um_from_omega(omega), spacing, width])

        names = ("frequency_thz", "wavelength_um", "fsr_ghz", "linewidth_mhz")
        values, bars = values_with_bars(self.curve, names, stack)
        return Resonances(
            order=frozen_array(order), **values, error=ErrorBars(bars), **self.about()
        )

    def dispersion_coefficients(self, pump_um: float) -> RingDispersion:
        """D1 .. D4 about the resonance nearest to ``pump_um``, from exact derivatives.

        Raises
        ------
        OutOfRange
            When the pump lies outside the band.
        """
        order = self.pump_order(pump_um)
        scale = np.array([1e3, 1e6, 1e9, 1e9]) / TWO_PI
        values, bars = values_with_bars(
            self.curve,
            ("d1_ghz", "d2_mhz", "d3_khz", "d4_khz"),
            lambda c: scale * self._coefficients(c, order),
        )
        pump, pump_bars = self._pump(order)
        return RingDispersion(
            pump_order=order,
            pump_um=pump["pump_um"],
            **values,
            error=ErrorBars(bars, pump_um=pump_bars["pump_um"]),
            **self.about(pump_um=pump_um),
        )

    def integrated_dispersion(self, pump_um: float, count: int) -> IntegratedDispersion:
        """omega_mu - omega_0 - D1 mu for mu from -count to count.

        Raises
        ------
        OutOfRange
            When the pump lies outside the band or ``count`` is not positive.
        """
        order, count = self.pump_order(pump_um), inputs.whole("count", count, most=100_000)
        mu = np.arange(-count, count + 1)

        def integrated(curve: Curve) -> np.ndarray:
            lines = find_lines(curve, self.radius_um, order + mu)
            d1 = self._coefficients(curve, order)[0]
            return RAD_PER_PS_TO_MHZ * (lines.apart(slice(None), count) - d1 * mu)

        lines = self._lines(order + mu)
        pump, pump_bars = self._pump(order)
        bars = {
            "integrated_mhz": error_bar(self.curve, integrated),
            "pump_um": pump_bars["pump_um"],
        }
        return IntegratedDispersion(
            mu=frozen_array(mu),
            frequency_thz=frozen_array(lines.omega_rad_per_ps / TWO_PI),
            integrated_mhz=frozen_array(integrated(self.curve)),
            reason=frozen_array(outside_or_good(np.isfinite(lines.omega_rad_per_ps))),
            pump_order=order,
            pump_um=pump["pump_um"],
            error=ErrorBars(bars),
            **self.about(pump_um=pump_um),
        )

    def pairs(self, pump_um: float, count: int) -> PairTable:
        """Cold misalignment of the pairs mu = 1 .. count about a pump resonance.

        Parameters
        ----------
        pump_um : float, um
            The pump is the resonance nearest to it.
        count : int
            How many pairs.

        Returns
        -------
        PairTable
            Arrays of length count, the signal at +mu (the higher frequency). Pairs beyond
            the solved band are NaN with the reason.

        Raises
        ------
        OutOfRange
            When the pump lies outside the band or ``count`` is not positive.
        """
        order, count = self.pump_order(pump_um), inputs.whole("count", count, most=100_000)
        mu = np.arange(1, count + 1)
        around = np.arange(order - count, order + count + 1)
        names = (
            "misalignment_mhz", "misalignment_linewidths", "linewidth_mhz",
            "signal_thz", "idler_thz", "signal_um", "idler_um",
        )  # fmt: skip

        def stack(curve: Curve) -> np.ndarray:
            lines = find_lines(curve, self.radius_um, around)
            up, down = lines.omega_rad_per_ps[count + mu], lines.omega_rad_per_ps[count - mu]
            miss = RAD_PER_PS_TO_MHZ * lines.misaligned(count, mu)
            width = 0.5 * RAD_PER_PS_TO_MHZ * (up + down) / self.q_loaded
            thz = [up / TWO_PI, down / TWO_PI]
            return np.stack(
                [miss, miss / width, width, *thz, um_from_omega(up), um_from_omega(down)]
            )

        values, bars = values_with_bars(self.curve, names, stack)
        miss = values["misalignment_mhz"]
        pump, pump_bars = self._pump(order)
        return PairTable(
            mu=frozen_array(mu),
            **values,
            aligned=frozen_array(np.abs(miss) <= values["linewidth_mhz"]),
            reason=frozen_array(outside_or_good(np.isfinite(miss))),
            pump_order=order,
            **pump,
            error=ErrorBars({**bars, **pump_bars}),
            **self.about(pump_um=pump_um),
        )

    def detuning_map(
        self, pump_band_um: tuple[float, float] | None = None, count: int = 40
    ) -> DetuningMap:
        """Cold misalignment for each pump resonance of a band and each pair about it.

        Parameters
        ----------
        pump_band_um : (float, float), optional
            Pump wavelengths in um; by default the whole solved band.
        count : int
            Pairs about each pump.

        Returns
        -------
        DetuningMap
            Arrays of shape (pumps, count). Beyond a million points it holds every second,
            third ... pump resonance, and a note says so.

        Raises
        ------
        OutOfRange
            When the pump band lies outside the solved one, or holds too many resonances.
        """
        count = inputs.whole("count", count, most=100_000)
        ends = (
            (None, None)
            if pump_band_um is None
            else inputs.interval("pump_band_um", pump_band_um, "um")
        )
        pumps, mu = self._orders(*ends), np.arange(1, count + 1)
        step = math.ceil(len(pumps) * count / _MAP_POINTS)
        thinned = (f"the map holds one pump resonance in {step}",) if step > 1 else ()
        pumps = pumps[::step]
        around = np.arange(pumps[0] - count, pumps[-1] + count + 1)
        centre = (pumps - around[0])[:, None]

        def stack(curve: Curve) -> np.ndarray:
            lines = find_lines(curve, self.radius_um, around)
            omega = lines.omega_rad_per_ps
            miss = RAD_PER_PS_TO_MHZ * lines.misaligned(centre, mu)
            both = omega[centre + mu] + omega[centre - mu]
            width = 0.5 * RAD_PER_PS_TO_MHZ * both / self.q_loaded
            return np.stack([miss, miss / width, width])

        def pump(curve: Curve) -> np.ndarray:
            omega = find_lines(curve, self.radius_um, pumps).omega_rad_per_ps
            return um_from_omega(omega)[None]

        names = ("misalignment_mhz", "misalignment_linewidths", "linewidth_mhz")
        values, bars = values_with_bars(self.curve, names, stack)
        pump_um, pump_bars = values_with_bars(self.curve, ("pump_um",), pump)
        miss = values["misalignment_mhz"]
        return DetuningMap(
            pump_order=frozen_array(pumps),
            mu=frozen_array(mu),
            **pump_um,
            **values,
            aligned=frozen_array(np.abs(miss) <= values["linewidth_mhz"]),
            reason=frozen_array(outside_or_good(np.isfinite(miss))),
            error=ErrorBars({**bars, **pump_bars}),
            **{**self.about(), "notes": (*self.notes, *thinned)},
        )

    # ------------------------------------------------------------ with light in it

    def spontaneous(
        self, pump_um: float, pump_w: float, count: int, *, kerr_shift: bool = True
    ) -> PairRates:
        """Photon pairs of each pair of resonances, the pump on its (hot) resonance.

        Parameters
        ----------
        pump_um : float, um
            The pump is the resonance nearest to it, followed as it shifts.
        pump_w : float, W
            In the bus.
        count : int
            Pairs mu = 1 .. count.
        kerr_shift : bool
            False leaves out the shift by -2gN of signal and idler against the pump.

        Returns
        -------
        PairRates
            NaN with a reason beyond the band, and everywhere once a pair oscillates.

        Raises
        ------
        OutOfRange
            When the pump lies outside the band or a number makes no sense.
        """
        return ring_power.spontaneous(self, pump_um, pump_w, count, kerr_shift)

    def stimulated(
        self,
        pump_um: float,
        pump_w: float,
        signal_w: float,
        count: int,
        *,
        signal_detuning_mhz: float = 0.0,
        kerr_shift: bool = True,
    ) -> StimulatedIdler:
        """Idler power with a seed on each signal resonance in turn, up to threshold.

        Parameters
        ----------
        pump_um, pump_w, count, kerr_shift
            As for `spontaneous`.
        signal_w : float, W
            Seed in the bus, small against the pump.
        signal_detuning_mhz : float
            Of the seed from the hot signal resonance.

        Returns
        -------
        StimulatedIdler
            (omega_i/omega_s) gamma_s gamma_i (L P_p)^2 P_s B_p^2 B_s B_i times
            `cavity.seed_gain`, pump and seed undepleted; NaN as for `spontaneous`.

        Raises
        ------
        OutOfRange
            As for `spontaneous`.
        """
        return ring_power.stimulated(
            self, pump_um, pump_w, signal_w, count, signal_detuning_mhz, kerr_shift
        )

    # ------------------------------------------------------------ the work

    def _lines(self, order: Any) -> Lines:
        return find_lines(self.curve, self.radius_um, order)

    def _in_band(self, name: str, wavelength_um: float) -> float:
        """Frequency of a wavelength in the solved band, rad/ps."""
        wavelength = inputs.number(name, wavelength_um, "um")
        omega = omega_from_um(wavelength)
        if not inside(self.curve, omega):
            short, long = self.curve.band_um
            raise OutOfRange(
                f"{name} = {wavelength:g} um is outside the solved band {short:g} to {long:g} um; "
                "choose one inside or solve a wider band"
            )
        return float(snap(self.curve, omega))

    def _orders(self, short_um: float | None, long_um: float | None) -> np.ndarray:
        """Orders of all resonances between two wavelengths, if they are not too many."""
        low, high = self._order_range(short_um, long_um)
        check_number(self.curve, self.radius_um, high - low + 1)
        return np.arange(low, high + 1)

    def _order_range(self, short_um: float | None, long_um: float | None) -> tuple[int, int]:
        """Lowest and highest order between two wavelengths."""
        low, high = order_range(self.curve, self.radius_um)
        if long_um is not None:
            omega = self._in_band("long end", long_um)
            low = math.ceil(self.radius_um * float(self.curve.beta_rad_per_um(omega)))
        if short_um is not None:
            omega = self._in_band("short end", short_um)
            high = math.floor(self.radius_um * float(self.curve.beta_rad_per_um(omega)))
        if high < low:
            short, long = self.curve.band_um
            raise OutOfRange(
                f"no resonance of the ring of radius {self.radius_um:g} um lies between "
                f"{short_um or short:g} and {long_um or long:g} um; widen the band"
            )
        return low, high

    def _pump(self, order: int) -> tuple[dict[str, Any], dict[str, Any]]:
        """Wavelength in um and frequency in THz of a resonance, and their error bars."""

        def both(curve: Curve) -> np.ndarray:
            omega = find_lines(curve, self.radius_um, [order]).omega_rad_per_ps[0]
            return np.array([um_from_omega(omega), omega / TWO_PI])

        return values_with_bars(self.curve, ("pump_um", "pump_thz"), both)

    def _coefficients(self, curve: Curve, order: int) -> np.ndarray:
        """D1 .. D4 in rad/ps about a resonance."""
        omega = find_lines(curve, self.radius_um, [order]).omega_rad_per_ps[0]
        betas = [float(curve.beta_rad_per_um(omega, k)) for k in (1, 2, 3, 4)]
        return ring_dispersion(betas, self.radius_um)
