"""The two guides of the benchmarks, with the converged index of their lowest TE mode."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path

from reference.finite_element_guides import Guide, channel

import modesolve
from materials.common.constants import C_UM_PER_PS, omega_from_um
from modesolve.eigen import dissection_order
from modesolve.layout import Layout, decay_constant, operators_on
from modesolve.maps import Axis, Box
from modesolve.operators import Boundary, topology_of

CONVERGED = tomllib.loads(
    (Path(__file__).parents[1] / "reference" / "channel_values.toml").read_text(encoding="utf-8")
)

#: Symmetry class of TE0: Ey vanishes on the mirror plane.
TE_BOUNDARY = Boundary()
#: On a quarter, Hx vanishes on the horizontal one.
TE_QUARTER = Boundary(bottom="magnetic")


def forget() -> None:
    """Empty what the package keeps of grids, so that a timed solve starts from nothing."""
    for kept in (dissection_order, topology_of, operators_on):
        kept.cache_clear()


@dataclass(frozen=True)
class Case:
    """A core in silica at 1.55 um and the error in n_eff at which methods are compared."""

    name: str
    entry: str
    target: float

    @cached_property
    def section(self) -> modesolve.CrossSection:
        """The cross-section as a user states it."""
        stated = CONVERGED[self.entry]
        keys = ("core", "cladding", "substrate", "width_um", "height_um")
        return modesolve.CrossSection(**{key: stated[key] for key in keys})

    @property
    def n_eff(self) -> float:
        """Converged index; its uncertainty is 4e-10 at most."""
        return CONVERGED[self.entry]["n_eff"]["value"]

    @property
    def wavelength_um(self) -> float:
        return CONVERGED[self.entry]["wavelength_um"]

    @property
    def omega(self) -> float:
        return omega_from_um(self.wavelength_um)

    @property
    def k0(self) -> float:
        """Vacuum wavenumber, rad/um."""
        return self.omega / C_UM_PER_PS

    @cached_property
    def layout(self) -> Layout:
        return self.section.layout()

    @cached_property
    def quarter_layout(self) -> Layout:
        """The same with the horizontal mirror plane too, which the package does not use."""
        whole = self.layout
        up = Axis((0.0, 0.5 * self.section.height_um), low="mirror", high="open")
        return replace(whole, up=up, fill=tuple(column[1:] for column in whole.fill))

    @cached_property
    def decay_um(self) -> float:
        """Length over which the field beside the core falls by e."""
        background = self.section.cladding.index(self.wavelength_um)
        return 1.0 / decay_constant(self.omega, self.n_eff, background)

    def box(self, decays: float) -> Box:
        """A box that reaches so many decay lengths out on the open sides."""
        width = decays * self.decay_um
        return Box(right=width, bottom=width, top=width)

    @property
    def elements_guide(self) -> Guide:
        """The same guide for the finite elements, which use both mirror planes."""
        return channel(self.section.width_um, self.section.height_um, mirror_y=True)


NITRIDE = Case("nitride 1.6 x 0.8", "nitride-1600x800-in-silica-TE", 1e-7)
SILICON = Case("silicon 0.5 x 0.22", "silicon-500x220-in-silica-TE", 5e-7)
CASES = (NITRIDE, SILICON)
