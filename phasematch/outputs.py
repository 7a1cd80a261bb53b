"""The files a run writes, and the checks of its output folder before any work is done."""

from __future__ import annotations

import os

from materials.common.errors import StorageError
from materials.common.folders import LISTING, check_target
from phasematch.design_file import Design

_TABLES = ("modes.csv", "dispersion.csv", "dispersion.h5", "mode_field.h5")
_CHANNEL = ("channel_map.h5", "conversion_band.csv", "pair_flux.csv")
_RING = ("ring_pairs.csv", "ring_pairs.h5", "detuning_map.h5", "ring_dispersion.csv")
_ABOUT = ("design.toml", "summary.txt", LISTING)


def file_names(design: Design) -> tuple[str, ...]:
    """Names of all files that running a design writes into its folder."""
    channel, ring = design.tables.channel, design.tables.ring
    names, figures = list(_TABLES), ["mode_field", "dispersion"]
    if channel is not None:
        names += _CHANNEL
        figures.append("channel_map")
    if ring is not None:
        names += [*_RING, *(["pair_rates.csv"] if ring.pump_w > 0 else [])]
        figures += ["ring_misalignment", "detuning_map"]
    suffix = design.tables.output.figures
    drawn = [] if suffix == "none" else [f"{figure}.{suffix}" for figure in figures]
    return (*names, *drawn, *_ABOUT)


def check_output(design: Design, folder: str | os.PathLike[str], *, replace: bool = False) -> None:
    """Refuse an output folder in which a run would destroy what no run wrote.

    Raises
    ------
    StorageError
        As `check_target`, or when the design itself is a file that the run would replace.
    """
    check_target(folder, replace=replace)
    names = file_names(design)
    for name in names if os.path.exists(design.source) else ():
        place = os.path.join(folder, name)
        if os.path.exists(place) and os.path.samefile(place, design.source):
            raise StorageError(
                f"{design.source} is the design and would be replaced by a result of that name; "
                "give another output folder, or copy the design elsewhere first"
            )
    check_target(folder, replace=replace, names=names)
