"""A channel of given length and loss: mismatch, gain, conversion and photon pairs.

One undepleted pump, degenerate. Without loss the closed forms are exact for any gain; with
loss they are those of a weak pump and of equal loss at all three waves, in which the
pump's own phase shift is left out (an error of order gamma P L). `Channel.validity_notes`
says when that matters. gamma_j = gamma_p omega_j/omega_p, gamma_p that of the mode at the
pump.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from materials.common import inputs
from materials.common.constants import DB_PER_E_FOLD, TWO_PI, omega_from_um
from materials.common.errors import InputError
from materials.common.results import ErrorBars, frozen_array
from phasematch import mixing
from phasematch.caution import power_notes
from phasematch.channel_results import ChannelMap, ConversionBand, PairFlux
from phasematch.conversion import BandEdges, find_band
from phasematch.curve_protocol import Curve, error_bar, gamma_or_nan, snap, values_with_bars
from phasematch.pair_flux import SignalRange, beyond_note, integrate_flux, signal_range
from phasematch.reasons import GAMMA_UNKNOWN
from phasematch.waves import Waves, density, log_photons, mix, photons, reasons, weak
from phasematch.weak_mixing import weak_photons_m2

__all__ = ["Channel"]

_WEAK = 0.02  # gamma P L above which the weak-pump forms get a note


@dataclass(frozen=True, slots=True, eq=False)
class Channel:
    """A straight (or evenly bent) channel.

    Parameters
    ----------
    curve : Curve
        Dispersion of the mode all waves travel in.
    length_mm : float
    loss_db_per_cm : float
        Propagation loss, the same at all three waves.

    Raises
    ------
    OutOfRange
        For a length that is not positive or a negative loss.
    """

    curve: Curve = field(repr=False)
    length_mm: float = field(kw_only=True)
    loss_db_per_cm: float = field(kw_only=True, default=0.0)

    def __post_init__(self) -> None:
        length = inputs.number("length_mm", self.length_mm, "mm")
        loss = inputs.number("loss_db_per_cm", self.loss_db_per_cm, "dB/cm", least=True)
        object.__setattr__(self, "length_mm", length)
        object.__setattr__(self, "loss_db_per_cm", loss)

    @property
    def length_m(self) -> float:
        """Length in m."""
        return self.length_mm * 1e-3

    @property
    def loss_per_m(self) -> float:
        """Power loss alpha in 1/m."""
        return self.loss_db_per_cm * 100.0 / DB_PER_E_FOLD

    @property
    def effective_length_mm(self) -> float:
        """(1 - exp(-alpha L))/alpha in mm: the lossless length of equal nonlinear phase."""
        alpha = self.loss_per_m * 1e-3
        return self.length_mm if alpha == 0.0 else -math.expm1(-alpha * self.length_mm) / alpha

    def mismatch_per_m(self, pump_um: Any, signal_um: Any, pump_w: Any = 0.0) -> Any:
        """Phase mismatch kappa = dbeta + 2 gamma P at the input, 1/m.

        Parameters
        ----------
        pump_um, signal_um : array_like, um
        pump_w : array_like, W
            0 gives the linear mismatch dbeta, also where gamma is not known.

        Returns
        -------
        float or ndarray
            The shape the arguments broadcast to; NaN where a wave leaves the solved band.

        Raises
        ------
        OutOfRange
            For wavelengths that are not positive or powers that are negative or not finite.
        """
        return inputs.scalar_or_array(self._waves(pump_um, signal_um, pump_w).kappa_per_m)

    def signal_gain(self, pump_um: Any, signal_um: Any, pump_w: Any) -> Any:
        """Signal power out over signal power in (a ratio, not dB).

        1 + H without loss; with loss exp(-alpha L) plus the idler's photons, weak pump.
        Parameters and Raises as for `mismatch_per_m`.
        """
        waves = self._waves(pump_um, signal_um, pump_w)
        passed = math.exp(-self.loss_per_m * self.length_m)
        return inputs.scalar_or_array(passed + photons(waves, self.loss_per_m, self.length_m))

    def idler_efficiency(self, pump_um: Any, signal_um: Any, pump_w: Any) -> Any:
        """Idler power out over signal power in (a ratio, not dB).

        Parameters and Raises as for `mismatch_per_m`.

        Notes
        -----
        Without loss (omega_i/omega_s) H, exact for an undepleted pump. With loss

            (gamma_i P0)^2 exp(-alpha L) |(1 - exp(-(alpha + i dbeta) L))/(alpha + i dbeta)|^2

        which holds for a weak pump, gamma P L well below 1, and equal loss.
        """
        waves = self._waves(pump_um, signal_um, pump_w)
        made = photons(waves, self.loss_per_m, self.length_m)
        return inputs.scalar_or_array(waves.idler / waves.signal * made)

    def low_gain_efficiency(self, pump_um: Any, signal_um: Any, pump_w: Any) -> Any:
        """Idler power out over signal power in to lowest order in the pump power.

        (gamma_i P L)^2 (sin(dbeta L/2)/(dbeta L/2))^2 without loss, the form of
        `idler_efficiency` with it. Parameters and Raises as for `mismatch_per_m`.
        """
        waves = self._waves(pump_um, signal_um, pump_w)
        made = weak(waves, self.loss_per_m, self.length_m).stimulated
        return inputs.scalar_or_array(waves.idler / waves.signal * made)

    def pair_flux_density(
        self, pump_um: Any, signal_um: Any, pump_w: Any, *, counted: str = "coincidences"
    ) -> Any:
        """Spontaneous pairs per second and hertz of signal bandwidth (a pure number).

        Parameters
        ----------
        pump_um, signal_um, pump_w : array_like
            As for `mismatch_per_m`.
        counted : {"coincidences", "singles"}
            With loss: pairs of which both photons come out, or photons of one arm. Without
            loss both are the number of pairs, H.

        Raises
        ------
        OutOfRange, InputError
            As for `mismatch_per_m`; or for another word in ``counted``.
        """
        _check_counted(counted)
        waves = self._waves(pump_um, signal_um, pump_w)
        return inputs.scalar_or_array(density(waves, self.loss_per_m, self.length_m, counted))

    def pair_flux_per_s(
        self,
        pump_um: Any,
        pump_w: Any,
        *,
        signal_band_um: tuple[float, float] | None = None,
        idler_band_um: tuple[float, float] | None = None,
        counted: str = "coincidences",
    ) -> Any:
        """Spontaneous photon pairs per second, exact dispersion; see `pair_flux`.

        ``pump_um`` and ``pump_w`` broadcast; scalars in, a scalar out. NaN where there is no
        value; `pair_flux` says why.
        """
        pumps, powers = np.broadcast_arrays(
            inputs.numbers("pump_um", pump_um, "um"),
            inputs.numbers("pump_w", pump_w, "W", zero_allowed=True),
        )
        _check_counted(counted)
        out = np.empty(pumps.shape)
        for index in np.ndindex(pumps.shape):
            span = self._range(float(pumps[index]), signal_band_um, idler_band_um)
            out[index] = self._flux(float(pumps[index]), float(powers[index]), span, counted)[0]
        return inputs.scalar_or_array(out)

    def pair_flux(
        self,
        pump_um: float,
        pump_w: float,
        *,
        signal_band_um: tuple[float, float] | None = None,
        idler_band_um: tuple[float, float] | None = None,
        counted: str = "coincidences",
    ) -> PairFlux:
        """Spontaneous photon pairs per second with error bar and reasons.

        Parameters
        ----------
        pump_um : float, um
        pump_w : float, W
        signal_band_um, idler_band_um : (float, float), optional
            Pass bands in um, each on one side of the pump. With one given the other photon
            may go anywhere; with none every signal above the pump's frequency is counted,
            as far as signal and idler lie in the solved band.
        counted : {"coincidences", "singles"}
            See `pair_flux_density`; the result names it.

        Returns
        -------
        PairFlux
            NaN with a reason where the pump or a filter leaves the solved band.

        Raises
        ------
        InputError
            For a filter that holds the pump, or numbers that make no sense.
        """
        pump_um = inputs.number("pump_um", pump_um, "um")
        pump_w = inputs.number("pump_w", pump_w, "W", least=True)
        _check_counted(counted)
        span = self._range(pump_um, signal_band_um, idler_band_um)
        flux, quadrature = self._flux(pump_um, pump_w, span, counted)
        bar = error_bar(self.curve, lambda c: self._on(c)._flux(pump_um, pump_w, span, counted)[0])
        filters = {"signal_band_um": signal_band_um, "idler_band_um": idler_band_um}
        notes = self.validity_notes(pump_um, pump_w)
        if span.empty:
            notes += ("no pair passes both filters: photon energy is conserved",)
        if signal_band_um is None and idler_band_um is None and not span.reason:
            notes += beyond_note(self._spectrum(pump_um, pump_w, counted), span, flux)
        reason = span.reason or ("" if np.isfinite(flux) else GAMMA_UNKNOWN)
        return PairFlux(
            pump_um=pump_um,
            pump_w=pump_w,
            counted=counted if self.loss_db_per_cm else "pairs",
            flux_per_s=flux,
            quadrature_error_per_s=quadrature,
            low_thz=span.low / TWO_PI,
            high_thz=span.high / TWO_PI,
            reason=reason,
            error=ErrorBars(flux_per_s=float(bar) + quadrature),
            **self._about(notes, **filters),
        )

    def conversion_band(
        self, pump_um: float, pump_w: float, *, level_db: float = -3.0
    ) -> ConversionBand:
        """The signal band in which the idler efficiency stays within ``level_db`` of its peak.

        Parameters
        ----------
        pump_um : float, um
        pump_w : float, W
            0 gives the band of the low-gain limit (gamma is not needed then).
        level_db : float
            Below 0.

        Returns
        -------
        ConversionBand
            About the peak that the efficiency climbs to from the pump; a higher one
            elsewhere is noted. Edges come from root finding; one that lies outside the
            solved band is NaN, with the reason.

        Raises
        ------
        OutOfRange
            For numbers that make no sense.
        """
        pump_um = inputs.number("pump_um", pump_um, "um")
        pump_w = inputs.number("pump_w", pump_w, "W", least=True)
        drop = inputs.number("-level_db", -float(level_db), "dB")
        edges = self._band(pump_um, pump_w, drop)
        values, bars = values_with_bars(
            self.curve,
            BandEdges.names,
            lambda c: self._on(c)._band(pump_um, pump_w, drop).numbers(),
        )
        return ConversionBand(
            pump_um=pump_um,
            pump_w=pump_w,
            level_db=-drop,
            **values,
            contains_pump=bool(edges.low < omega_from_um(pump_um) < edges.high),
            reason=edges.reason,
            error=ErrorBars(bars),
            **self._about(self.validity_notes(pump_um, pump_w) + edges.notes),
        )

    def map(self, pump_um: Any, signal_um: Any, pump_w: float) -> ChannelMap:
        """Mismatch, gain, efficiency and idler for every pump with every signal.

        Parameters
        ----------
        pump_um : array_like, shape (pumps,), um
        signal_um : array_like, shape (signals,), um
        pump_w : float, W

        Returns
        -------
        ChannelMap
            Arrays of shape (pumps, signals) with error bars; NaN and a reason where a wave
            leaves the solved band.

        Raises
        ------
        OutOfRange, InputError
            For numbers that make no sense or arrays that are not one-dimensional.
        """
        pumps = np.atleast_1d(inputs.numbers("pump_um", pump_um, "um"))
        signals = np.atleast_1d(inputs.numbers("signal_um", signal_um, "um"))
        if pumps.ndim != 1 or signals.ndim != 1:
            raise InputError("pump_um and signal_um of a map must be one-dimensional arrays")
        pump_w = inputs.number("pump_w", pump_w, "W", least=True)
        values, bars = values_with_bars(
            self.curve,
            ("mismatch_per_m", "gain_db", "efficiency_db"),
            lambda c: self._on(c)._stacked(pumps[:, None], signals, pump_w),
        )
        waves = self._waves(pumps[:, None], signals, pump_w)
        return ChannelMap(
            pump_um=frozen_array(pumps),
            signal_um=frozen_array(signals),
            idler_um=frozen_array(mixing.idler_um(pumps[:, None], signals)),
            **values,
            reason=frozen_array(reasons(self.curve, waves)),
            pump_w=pump_w,
            error=ErrorBars(bars),
            **self._about(
                self.validity_notes(pumps, pump_w) + self._fringes(values["mismatch_per_m"])
            ),
        )

    def validity_notes(self, pump_um: Any, pump_w: Any) -> tuple[str, ...]:
        """What to keep in mind about results at this pump: curve, validity, caution."""
        notes = list(self.curve.notes)
        power = float(np.max(pump_w))
        if power == 0.0:
            return tuple(notes)
        gamma = gamma_or_nan(self.curve, pump_um)
        phase = power * self.effective_length_mm * 1e-3
        phase *= float(np.max(gamma, initial=0.0, where=np.isfinite(gamma)))
        if self.loss_db_per_cm and phase > _WEAK:
            notes.append(
                f"gamma P L_eff reaches {phase:.2g}: the forms with loss hold for a weak pump and "
                "leave out the pump's own phase, an error of about that size"
            )
        return (*notes, *power_notes(self.curve))

    # ------------------------------------------------------------ the work

    def _fringes(self, mismatch_per_m: np.ndarray) -> tuple[str, ...]:
        """A note where the fringes of a map, pi of kappa L/2 apart, are finer than its grid."""
        steps = [
            0.5 * self.length_m * np.abs(np.diff(mismatch_per_m, axis=axis)) / math.pi
            for axis in (0, 1)
        ]
        finest = max((float(np.nanmax(s, initial=0.0)) for s in steps), default=0.0)
        if finest <= 0.5:
            return ()
        fine = np.concatenate([(s > 0.5)[np.isfinite(s)] for s in steps])
        return (
            f"fringes are finer than the grid in {100 * np.mean(fine):.2g} % of the map: points "
            "there are right, the pattern between them is not; about "
            f"{2 * finest:.2g} times as many points along each axis show it",
        )

    def _on(self, curve: Curve) -> Channel:
        return replace(self, curve=curve)

    def _about(self, notes: tuple[str, ...], **more: Any) -> dict[str, Any]:
        """Fields that every result of the channel has."""
        given = {"mode": self.curve.mode, "length_mm": self.length_mm}
        inputs = {**given, "loss_db_per_cm": self.loss_db_per_cm, **more}
        return {"inputs": inputs, "notes": notes, "provenance": self.curve.provenance}

    def _waves(self, pump_um: Any, signal_um: Any, pump_w: Any) -> Waves:
        pump_um = inputs.numbers("pump_um", pump_um, "um")
        signal_um = inputs.numbers("signal_um", signal_um, "um")
        power = inputs.numbers("pump_w", pump_w, "W", zero_allowed=True)
        gamma = gamma_or_nan(self.curve, pump_um)
        return mix(self.curve, omega_from_um(pump_um), omega_from_um(signal_um), gamma, power)

    def _stacked(self, pump_um: Any, signal_um: Any, pump_w: float) -> np.ndarray:
        """Mismatch, gain in dB, efficiency in dB, stacked along a first axis."""
        waves = self._waves(pump_um, signal_um, pump_w)
        made = log_photons(waves, self.loss_per_m, self.length_m)
        with np.errstate(invalid="ignore"):  # NaN stays NaN
            gain = DB_PER_E_FOLD * np.logaddexp(-self.loss_per_m * self.length_m, made)
        efficiency = DB_PER_E_FOLD * (made + np.log(waves.idler / waves.signal))
        efficiency = np.where(np.isfinite(efficiency), efficiency, np.nan)
        return np.stack([waves.kappa_per_m, gain, efficiency])

    def _spectrum(
        self, pump_um: float, pump_w: float, counted: str
    ) -> Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]:
        """Density of pairs and phase kappa L/2 against the signal frequency."""
        pump = float(snap(self.curve, omega_from_um(pump_um)))
        gamma = gamma_or_nan(self.curve, pump_um)
        power = np.asarray(pump_w)

        def spectrum(signal: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
            waves = mix(self.curve, pump, signal, gamma, power)
            return density(
                waves, self.loss_per_m, self.length_m, counted
            ), 0.5 * self.length_m * waves.kappa_per_m

        return spectrum

    def _range(self, pump_um: float, signal_band_um: Any, idler_band_um: Any) -> SignalRange:
        return signal_range(self.curve, omega_from_um(pump_um), signal_band_um, idler_band_um)

    def _flux(
        self, pump_um: float, pump_w: float, span: SignalRange, counted: str
    ) -> tuple[float, float]:
        """Pairs per second over a range of signals, and the quadrature's error estimate."""
        return integrate_flux(self._spectrum(pump_um, pump_w, counted), span)

    def _band(self, pump_um: float, pump_w: float, drop_db: float) -> BandEdges:
        gamma = gamma_or_nan(self.curve, pump_um)
        pump = float(snap(self.curve, omega_from_um(pump_um)))
        power = np.asarray(pump_w)

        def log_efficiency(signal: Any) -> tuple[np.ndarray, np.ndarray]:
            waves = mix(self.curve, pump, np.asarray(signal, dtype=float), gamma, power)
            if pump_w == 0.0:
                shape = weak_photons_m2(waves.dbeta_per_m, self.loss_per_m, self.length_m)
                with np.errstate(divide="ignore"):
                    level = np.log(shape.stimulated) + 2.0 * np.log(waves.idler / pump)
            else:
                level = log_photons(waves, self.loss_per_m, self.length_m) + np.log(
                    waves.idler / waves.signal
                )
            return DB_PER_E_FOLD * level, 0.5 * self.length_m * waves.kappa_per_m

        return find_band(self.curve, pump, log_efficiency, drop_db, absolute=pump_w > 0.0)


def _check_counted(counted: str) -> None:
    if counted not in ("coincidences", "singles"):
        raise InputError(f'counted = {counted!r} is not known; give "coincidences" or "singles"')
