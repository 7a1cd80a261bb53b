"""What goes with every pump power: the laser caution, and what such powers do besides."""

from __future__ import annotations

from typing import Any

from materials.common.caution import LASER_CAUTION

__all__ = ["LASER_CAUTION", "power_notes"]


def power_notes(curve: Any) -> tuple[str, ...]:
    """Notes of any result that states a pump power: absorption left out, and the caution.

    Parameters
    ----------
    curve : Curve
        Its cross-section tells the media; without one nothing is known of absorption.
    """
    media = () if curve.section is None else curve.section.media
    absorbing = [f"{m.two_photon_m_per_w:g} m/W for {m.key}" for m in media if m.two_photon_m_per_w]
    if not absorbing:
        return (LASER_CAUTION,)
    return (
        f"two-photon absorption ({', '.join(absorbing)}) and free carriers are not in these "
        "numbers",
        LASER_CAUTION,
    )
