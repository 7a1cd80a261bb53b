"""Physical constants and unit conversions in the working set um, ps, THz, W.

``C_UM_PER_PS`` is exact by definition of the metre (um/ps is the same number as
um THz); the others follow from the exact SI constants of 2019, or from CODATA
2018 where a measured value remains.
"""

from __future__ import annotations

import math
from typing import Any

#: Speed of light in vacuum, um/ps (= um THz), exact.
C_UM_PER_PS = 299.792458

#: Reduced Planck constant, W ps^2 (1.054571817646e-34 J s).
HBAR_W_PS2 = 1.054571817646e-10

#: One ps^2/um (or ps^3/um, ps^4/um) in ps^2/km.
PER_UM_TO_PER_KM = 1e9

#: One 1/um in 1/m, and back.
PER_UM_TO_PER_M = 1e6
PER_M_TO_PER_UM = 1e-6

#: Im(beta) in 1/um to power loss in dB/cm: 20 log10(e) dB times 1e4 um.
DB_PER_CM_PER_IM_BETA = 20.0 * math.log10(math.e) * 1e4

#: Power grown by a factor of e, in dB: 10 log10(e).
DB_PER_E_FOLD = 10.0 / math.log(10.0)

TWO_PI = 2.0 * math.pi

#: An angular frequency of 1 rad/ps as a frequency: in MHz, and in Hz.
RAD_PER_PS_TO_MHZ = 1e6 / TWO_PI
RAD_PER_PS_TO_HZ = 1e12 / TWO_PI

#: A rate of one in each ps, in 1/s.
PER_PS_TO_PER_S = 1e12


def omega_from_um(wavelength_um: Any) -> Any:
    """Angular frequency in rad/ps of a vacuum wavelength in um."""
    return TWO_PI * C_UM_PER_PS / wavelength_um


def um_from_omega(omega_rad_per_ps: Any) -> Any:
    """Vacuum wavelength in um of an angular frequency in rad/ps."""
    return TWO_PI * C_UM_PER_PS / omega_rad_per_ps


def middle_um(short_um: float, long_um: float) -> float:
    """The wavelength in the middle of a band, counted in frequency.

    Examples
    --------
    >>> round(middle_um(1.2, 2.0), 12)
    1.5
    """
    return 2.0 * short_um * long_um / (short_um + long_um)


def dispersion_from_beta2(beta2_ps2_per_km: Any, wavelength_um: Any) -> Any:
    """Dispersion D in ps/(nm km) from beta2 in ps2/km: D = -2 pi c beta2 / lambda^2.

    In these units 2 pi c / lambda^2 comes in rad/(ps um); a further 1e-3 turns
    1/um into 1/nm.
    """
    return -1e-3 * TWO_PI * C_UM_PER_PS / wavelength_um**2 * beta2_ps2_per_km
