"""The verbs ``idlermap materials list`` and ``show``."""

from __future__ import annotations

import click
from rich.table import Table

from materials.common.printing import format_number
from phasematch.cli_parts import out


@click.group("materials")
def materials_group() -> None:
    """What the material catalogue holds."""


@materials_group.command("list")
@click.argument("text", required=False)
def list_materials(text: str | None) -> None:
    """List the materials, or those with TEXT in key or name."""
    import materials

    table = Table(box=None, padding=(0, 2, 0, 0), pad_edge=False)
    for column in ("key", "name", "range um", "n2", "dn/dT"):
        table.add_column(column, no_wrap=column != "name")
    for entry in materials.entries():
        if text and text.lower() not in f"{entry.key} {entry.name}".lower():
            continue
        span = "any" if entry.range_um is None else "{:g} to {:g}".format(*entry.range_um)
        known = ["yes" if v is not None else "-" for v in (entry.n2_m2_per_w, entry.dn_dt_per_k)]
        table.add_row(entry.key, entry.name, span, *known)
    out().print(table)


@materials_group.command("show")
@click.argument("key")
@click.option("--wavelength-um", type=float, multiple=True, help="Where to evaluate; repeatable.")
@click.option("--extrapolate", is_flag=True, help="Also outside the measured range.")
def show_material(key: str, wavelength_um: tuple[float, ...], extrapolate: bool) -> None:
    """Index, dispersion, sources and caveats of one material."""
    import materials

    medium = materials.load(key)
    if extrapolate:
        medium = medium.allow_extrapolation()
    low, high = medium.range_um or (1.55, 1.55)
    wavelengths = wavelength_um or (min(max(1.55, low), high),)
    click.echo(f"{medium.key}: {medium.name}, {medium.form}")
    span = "any" if medium.range_um is None else f"{low:g} to {high:g} um"
    degrees = medium.temperature_degc
    at = "not stated" if degrees is None else f"{degrees:g} degC"
    click.echo(f"range {span}; temperature {at}; axis {medium.axis or 'none'}")
    for name, value in (
        ("index", medium.citation),
        ("n2", _value(medium.n2_m2_per_w, "m2/W", medium.n2_citation)),
        ("dn/dT", _value(medium.dn_dt_per_k, "1/K", medium.dn_dt_citation)),
        ("spread of n2", medium.n2_spread),
        ("two-photon absorption", _value(medium.two_photon_m_per_w, "m/W", "")),
        ("missing", ", ".join(medium.missing)),
        *(("note", caveat) for caveat in medium.caveats),
    ):
        if value:
            click.echo(click.wrap_text(f"{name}: {value}", 80, subsequent_indent="  "))
    table = Table(box=None, padding=(0, 2, 0, 0), pad_edge=False)
    for column in ("um", "n", "n_g", "beta2 ps2/km"):
        table.add_column(column, justify="right")
    for w in wavelengths:
        values = (medium.index(w), medium.group_index(w), medium.beta2_ps2_per_km(w))
        table.add_row(f"{w:g}", *(format_number(v, digits=8) for v in values))
    out().print(table)


def _value(value: float | None, unit: str, citation: str) -> str:
    if value is None:
        return ""
    return f"{value:g} {unit}" + (f" ({citation})" if citation else "")
