"""The verbs ``idlermap export curve``, ``betas`` and ``taper``: tables for other tools."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click
import numpy as np

from materials.common.errors import NoGuidedMode, OutOfRange
from modesolve.cross_section import LARGEST_UM, SMALLEST_UM
from phasematch.cli_parts import (
    check_file,
    design_argument,
    finish,
    notes,
    output_options,
    read,
    save,
    working,
)

if TYPE_CHECKING:
    from modesolve.tables import BetaTable, DispersionTable, TaperTable


@click.group()
def export() -> None:
    """Write tables for circuit, layout and propagation tools.

    Each goes to the file of -o, or to stdout as CSV.
    """


_target = output_options("File to write (.csv or .h5).")


def _hand_over(result: DispersionTable | BetaTable | TaperTable, output: str | None) -> int:
    """The table to its file or to stdout, its notes to stderr; gives the exit code."""
    if output is None:
        click.echo(result.csv_text(), nl=False)
    notes(result.notes)
    save(result, output)
    return finish(result)


@export.command()
@design_argument
@click.option("--points", type=click.IntRange(2, 100_000), help="Rows, instead of band.points.")
@_target
def curve(
    design: str,
    changes: tuple[str, ...],
    points: int | None,
    output: str | None,
    replace: bool,
) -> int:
    """n_eff, n_g, beta2, D, area and gamma against wavelength."""
    from phasematch.study import curve_table, solve_curve

    check_file(output, replace, design)
    if points is not None:
        changes = (*changes, f"band.points={points}")
    checked = read(design, changes)
    with working() as tell:
        result = curve_table(checked, solve_curve(checked, tell))
    return _hand_over(result, output)


@export.command()
@design_argument
@click.option("--pump-um", type=float, help="Instead of mode.wavelength_um.")
@click.option("--orders", type=click.IntRange(1, 6), default=4, show_default=True)
@_target
def betas(
    design: str,
    changes: tuple[str, ...],
    pump_um: float | None,
    orders: int,
    output: str | None,
    replace: bool,
) -> int:
    """beta_k about a pump, in ps^k/km."""
    from modesolve.tables import beta_table
    from phasematch.study import solve_curve

    check_file(output, replace, design)
    checked = read(design, changes)
    pump = checked.reference_um if pump_um is None else pump_um
    with working() as tell:
        solved = solve_curve(checked, tell)
        result = beta_table(solved, pump, orders=orders, inputs=checked.as_dict())
    return _hand_over(result, output)


@export.command()
@design_argument
@click.option("--from-um", type=float, required=True, help="Narrowest core.")
@click.option("--to-um", type=float, required=True, help="Widest core.")
@click.option("--points", type=click.IntRange(2, 2001), default=11, show_default=True)
@click.option("--wavelength-um", type=float, help="Instead of mode.wavelength_um.")
@_target
def taper(
    design: str,
    changes: tuple[str, ...],
    from_um: float,
    to_um: float,
    points: int,
    wavelength_um: float | None,
    output: str | None,
    replace: bool,
) -> int:
    """n_eff, n_g and area against core width.

    Widths where the mode is missing are NaN with the reason; the exit code is then 3, or 4
    when it is missing at all of them.
    """
    from modesolve.tables import taper_table
    from phasematch.study import section_of

    check_file(output, replace, design)
    for option, width in (("--from-um", from_um), ("--to-um", to_um)):
        if not SMALLEST_UM <= width <= LARGEST_UM:
            raise OutOfRange(
                f"{option} = {width:g} um: allowed core widths are {SMALLEST_UM:g} to "
                f"{LARGEST_UM:g} um"
            )
    checked = read(design, changes)
    mode = checked.tables.mode
    with working() as tell:
        result = taper_table(
            section_of(checked),
            np.linspace(from_um, to_um, points).round(9).tolist(),
            checked.reference_um if wavelength_um is None else wavelength_um,
            mode.label,
            progress=tell,
        )
    if result.failed == points:
        raise NoGuidedMode(f"no width has a value; at {from_um:g} um: {result.reason[0]}")
    return _hand_over(result, output)
