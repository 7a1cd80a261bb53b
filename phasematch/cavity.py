"""Closed forms of a travelling-wave resonator, as pure functions of arrays.

Rates in rad/ps: Gamma = omega/Q is the energy decay rate and the full width at half
maximum, Gamma_c the part of it that goes into couplers. Powers in W, lengths in um, gamma
in 1/(W m); numbers of photons are pure. With the Hamiltonian -hbar g/2 a+ a+ a a over all
modes the pump line moves by -gN and every other by -2gN.

References
----------
Forms as in Azzini et al., Opt. Lett. 37, 3807 (2012), and Helt, Liscidini, Sipe, J. Opt.
Soc. Am. B 29, 2199 (2012), from memory; derived again from the two-mode Langevin equations.

Examples
--------
>>> float(threshold_fraction(0.5, 1.0, 1.0, 0.0))   # gN = Gamma/2, aligned: just there
1.0
"""

from __future__ import annotations

from typing import Any

import numpy as np

from materials.common.constants import C_UM_PER_PS, HBAR_W_PS2, PER_M_TO_PER_UM


def build_up(
    n_group: Any,
    length_um: Any,
    width_rad_per_ps: Any,
    coupling_rad_per_ps: Any,
    detuning_rad_per_ps: Any = 0.0,
) -> Any:
    """Circulating over bus power, B = [4 v_g Gamma_c/(L Gamma^2)]/(1 + (2 d/Gamma)^2)."""
    speed = C_UM_PER_PS / n_group
    peak = 4.0 * speed * coupling_rad_per_ps / (length_um * np.square(width_rad_per_ps))
    return peak / (1.0 + np.square(2.0 * detuning_rad_per_ps / width_rad_per_ps))


def photons_inside(
    pump_w: Any, omega_rad_per_ps: Any, width_rad_per_ps: Any, coupling_rad_per_ps: Any
) -> Any:
    """Pump photons in the ring on resonance, N = 4 Gamma_c P/(hbar omega Gamma^2)."""
    energy = HBAR_W_PS2 * omega_rad_per_ps
    return 4.0 * coupling_rad_per_ps * pump_w / (energy * np.square(width_rad_per_ps))


def kerr_shift_per_photon(
    gamma_per_w_m: Any, omega_rad_per_ps: Any, n_group: Any, length_um: Any
) -> Any:
    """Shift g = gamma v_g^2 hbar omega/L of the pump line for each of its photons, rad/ps."""
    speed = C_UM_PER_PS / n_group
    return gamma_per_w_m * PER_M_TO_PER_UM * speed**2 * HBAR_W_PS2 * omega_rad_per_ps / length_um


def line_share(omega_rad_per_ps: Any, n_group: Any, pump_rad_per_ps: Any, pump_n_group: Any) -> Any:
    """f = (omega v_g)/(omega_p v_p): what a line's own gamma and speed make of the pump's.

    Signal and idler couple at G = gN sqrt(f_s f_i) and shift by -2gN f_s and -2gN f_i.

    Notes
    -----
    From dA_s/dt = i v_s gamma_s (2 P A_s + A_p^2 A_i*), gamma_s = gamma_p omega_s/omega_p,
    and A_j = a_j sqrt(hbar omega_j v_j/L), |a_j|^2 photons in line j. In one guide G is
    sqrt(gamma_s gamma_i) P sqrt(v_s v_i), the coupling of a channel per time.
    """
    return omega_rad_per_ps * pump_n_group / (pump_rad_per_ps * n_group)


def pair_rate_inside(
    gain_rad_per_ps: Any,
    width_signal_rad_per_ps: Any,
    width_idler_rad_per_ps: Any,
    misalignment_rad_per_ps: Any,
) -> Any:
    """Pairs made inside per ps at low gain, G^2 (Gs + Gi)/(delta^2 + ((Gs + Gi)/2)^2).

    G is gN for lines alike, see `line_share`.

    ``misalignment_rad_per_ps`` is the hot one. Divide by 1 - x (`threshold_fraction`) for
    the exact number below threshold.
    """
    both = width_signal_rad_per_ps + width_idler_rad_per_ps
    return (
        np.square(gain_rad_per_ps)
        * both
        / (np.square(misalignment_rad_per_ps) + np.square(0.5 * both))
    )


def threshold_fraction(
    gain_rad_per_ps: Any,
    width_signal_rad_per_ps: Any,
    width_idler_rad_per_ps: Any,
    misalignment_rad_per_ps: Any,
) -> Any:
    """x = 4 G^2/[Gs Gi (1 + 4 delta^2/(Gs + Gi)^2)]; the pair oscillates at x = 1."""
    both = width_signal_rad_per_ps + width_idler_rad_per_ps
    detuned = 1.0 + np.square(2.0 * misalignment_rad_per_ps / both)
    product = width_signal_rad_per_ps * width_idler_rad_per_ps
    return 4.0 * np.square(gain_rad_per_ps) / (product * detuned)


def threshold_gain(
    width_signal_rad_per_ps: Any,
    width_idler_rad_per_ps: Any,
    misalignment_rad_per_ps: Any,
    *,
    coupling: Any = 1.0,
    shift: Any = 1.0,
) -> np.ndarray:
    """gN at which a pair oscillates, the laser on the pump's hot resonance, rad/ps.

    Parameters
    ----------
    width_signal_rad_per_ps, width_idler_rad_per_ps : array_like
    misalignment_rad_per_ps : array_like
        The cold one, delta_mu. The Kerr shift takes 2gN off it, so a pair can only
        oscillate where it is positive.
    coupling : array_like
        (G/gN)^2 = f_s f_i of `line_share`.
    shift : array_like
        f_s + f_i - 1, what the Kerr shift takes off over 2gN; 0 leaves the shift out, and
        a pair then oscillates whatever the sign of its misalignment.

    Returns
    -------
    ndarray
        NaN where it never oscillates. For lines alike (Gamma^2 + delta_mu^2)/(4 delta_mu).

    Notes
    -----
    x = 1 with delta = delta_mu - c y, y = 2gN, c = ``shift``, f = ``coupling``, Gamma the
    mean width and r = Gs Gi/Gamma^2 is
    (f - r c^2) y^2 + 2 r c delta_mu y - r (Gamma^2 + delta_mu^2) = 0; y is its least root.
    """
    mean = 0.5 * (np.asarray(width_signal_rad_per_ps) + width_idler_rad_per_ps)
    ratio = width_signal_rad_per_ps * width_idler_rad_per_ps / mean**2
    # half the difference over the mean, squared: 1 - r without cancellation
    less = np.square(0.5 * (width_signal_rad_per_ps - np.asarray(width_idler_rad_per_ps)) / mean)
    delta = np.asarray(misalignment_rad_per_ps, dtype=float)
    coupling, shift = np.asarray(coupling, dtype=float), np.asarray(shift, dtype=float)
    square = less * np.square(shift) + (coupling - np.square(shift))
    linear = ratio * shift * delta
    wanted = ratio * (mean**2 + delta**2)
    root = np.square(linear) + square * wanted
    good = (root >= 0.0) & ((linear > 0.0) | (shift == 0.0))
    below = linear + np.sqrt(np.where(good, root, 1.0))
    return np.where(good, 0.5 * wanted / np.where(good, below, 1.0), np.nan)


def pump_for_photons(
    photons: Any, omega_rad_per_ps: Any, width_rad_per_ps: Any, coupling_rad_per_ps: Any
) -> Any:
    """Bus power in W that keeps N photons inside: P = hbar omega Gamma^2 N/(4 Gamma_c)."""
    energy = HBAR_W_PS2 * omega_rad_per_ps
    return energy * np.square(width_rad_per_ps) * photons / (4.0 * coupling_rad_per_ps)


def stimulated_idler_w(
    gamma_per_w_m: Any,
    length_um: Any,
    pump_w: Any,
    signal_w: Any,
    build_ups: tuple[Any, Any, Any],
    frequency_ratio: Any = 1.0,
) -> Any:
    """Idler power in the bus, (omega_i/omega_s)(gamma L P_p)^2 P_s B_p^2 B_s B_i, low gain.

    ``gamma_per_w_m`` is sqrt(gamma_s gamma_i); ``build_ups`` are those of pump, signal and
    idler, each at its own detuning from its hot resonance; ``frequency_ratio`` is
    omega_i/omega_s. Times `seed_gain` it holds up to threshold.
    """
    pump, signal, idler = build_ups
    turn = gamma_per_w_m * PER_M_TO_PER_UM * length_um * pump_w
    return frequency_ratio * np.square(turn * pump) * signal_w * signal * idler


def seed_gain(
    gain_rad_per_ps: Any,
    width_signal_rad_per_ps: Any,
    width_idler_rad_per_ps: Any,
    signal_detuning_rad_per_ps: Any,
    idler_detuning_rad_per_ps: Any,
) -> Any:
    """What the pair's gain makes of a seeded idler: 1/|1 - G^2/(D_s D_i*)|^2.

    D_j = Gamma_j/2 - i d_j with the detunings d_j from the hot resonances, from the steady
    state of a_s' = -D_s a_s + i G a_i* + S and a_i' = -D_i a_i + i G a_s*. Where the seed
    sits best it is 1/(1 - x)^2.

    Examples
    --------
    >>> float(seed_gain(0.25, 1.0, 1.0, 0.0, 0.0)), (1 - 0.25) ** -2  # x = 1/4
    (1.7777777777777777, 1.7777777777777777)
    """
    signal = 0.5 * width_signal_rad_per_ps - 1j * np.asarray(signal_detuning_rad_per_ps)
    idler = 0.5 * width_idler_rad_per_ps + 1j * np.asarray(idler_detuning_rad_per_ps)
    both = signal * idler
    return np.abs(both) ** 2 / np.abs(both - np.square(gain_rad_per_ps)) ** 2
