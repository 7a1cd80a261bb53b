"""What dispersion means for four-wave mixing: channels and rings.

A curve comes in (`modesolve.dispersion`, or anything that has the `Curve` protocol), and
every number goes out with its error bar::

    curve = modesolve.dispersion(section, 1.2, 2.0, mode="TE0")
    channel = phasematch.Channel(curve, length_mm=10, loss_db_per_cm=0.2)
    channel.map(pump_um, signal_um, pump_w)        # mismatch, gain, efficiency, idler
    ring = phasematch.Ring(curve, radius_um=100, q_intrinsic=2e6, q_coupling=2e6)
    ring.pairs(pump_um=1.55, count=60)             # which resonances line up

The rooms are in the order of the work::

    curve_protocol  what is needed of a curve; bars of what follows from it
    mixing          energy, mismatch, gain; weak_mixing: with loss
    waves           the three waves of a channel
    quadrature, conversion, pair_flux
                    its band and its flux
    channel         `Channel`
    resonances, cavity, bend_note
                    where lines are, what light does in them, what bending changes
    ring            `Ring`; ring_power: with light in it
    reasons, caution
                    why numbers are missing; what goes with pump powers
    design_*, starter, outputs, study
                    design files and their running
    report, figures, exit_codes, cli*
                    the command

Importing the package loads next to nothing; each public name loads its own room when it is
first used, so that the command is ready for an interrupt at once. Neither click nor
Matplotlib is loaded by any of them.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

import phasematch.guard  # noqa: F401 - first: it looks for hidden packages

if TYPE_CHECKING:
    from phasematch.caution import LASER_CAUTION
    from phasematch.channel import Channel
    from phasematch.channel_results import ChannelMap, ConversionBand, PairFlux
    from phasematch.curve_protocol import Curve, error_bar
    from phasematch.ring import Ring
    from phasematch.ring_results import (
        DetuningMap,
        IntegratedDispersion,
        PairRates,
        PairTable,
        Resonances,
        RingDispersion,
        StimulatedIdler,
    )

#: Where each public name lives.
_ROOMS = {
    "caution": ("LASER_CAUTION",),
    "channel": ("Channel",),
    "channel_results": ("ChannelMap", "ConversionBand", "PairFlux"),
    "curve_protocol": ("Curve", "error_bar"),
    "ring": ("Ring",),
    "ring_results": (
        "DetuningMap",
        "IntegratedDispersion",
        "PairRates",
        "PairTable",
        "Resonances",
        "RingDispersion",
        "StimulatedIdler",
    ),
}
_HOME = {name: room for room, names in _ROOMS.items() for name in names}

__all__ = [
    "LASER_CAUTION",
    "Channel",
    "ChannelMap",
    "ConversionBand",
    "Curve",
    "DetuningMap",
    "IntegratedDispersion",
    "PairFlux",
    "PairRates",
    "PairTable",
    "Resonances",
    "Ring",
    "RingDispersion",
    "StimulatedIdler",
    "error_bar",
]


def __getattr__(name: str) -> Any:
    """A public name, from its room."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"phasematch.{_HOME[name]}"), name)


def __dir__() -> list[str]:
    """The public names."""
    return __all__
