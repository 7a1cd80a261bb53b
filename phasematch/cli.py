"""The command ``idlermap``: data on stdout, progress, notes and errors on stderr."""

from __future__ import annotations

import os
import signal
import sys
import traceback
from typing import Any

import click

from materials.common.errors import DesignFileError, IdlermapError, StorageError
from materials.common.results import make_provenance
from phasematch.cli_export import export
from phasematch.cli_materials import materials_group
from phasematch.cli_parts import (
    BUG,
    DESIGN,
    INTERRUPTED,
    USAGE,
    check_file,
    design_argument,
    exit_code,
    notes,
    out,
    output_options,
    progress,
    read,
    save,
    say,
)

EXIT_CODES = """
\b
Exit codes:
  0    good
  1    a bug of Idlermap's own
  2    wrong usage, or problems in the design file (one line each)
  3    finished, but some points have no value
  4    an input out of range, or no guided mode
  5    a file or folder could not be read or written
  130  interrupted
"""

COMPLETION = """
\b
Shell completion, for bash (likewise zsh, fish), in the shell's start-up file:
  eval "$(_IDLERMAP_COMPLETE=bash_source idlermap)"
"""


# ---------------------------------------------------------------- verbs


@click.group(
    epilog=EXIT_CODES + COMPLETION,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80},
)
@click.version_option(make_provenance().version, prog_name="idlermap")
def command() -> None:
    """Phase matching and resonance alignment for four-wave mixing on chips.

    A design file says what the waveguide is; "idlermap new" writes one to start from.
    Results go to stdout, everything else to stderr.
    """


@command.command(short_help="Run a design: results and figures into a folder.")
@design_argument
@click.option("-o", "--output", "folder", required=True, help="Folder for the results.")
@click.option("--replace", is_flag=True, help="Replace the results in a folder that holds some.")
def run(design: str, changes: tuple[str, ...], folder: str, replace: bool) -> None:
    """Run a design: tables, maps and figures into a folder, a summary on stdout."""
    from phasematch.report import show, summary
    from phasematch.study import run_design

    checked = read(design, changes)
    with progress() as tell:
        outcome = run_design(checked, folder, replace=replace, progress=tell)
    show(out(), *summary(outcome))
    notes(outcome.notes)
    say(f"results are in {folder}")


@command.command()
@design_argument
@click.option("--wavelength-um", type=float, help="Instead of mode.wavelength_um.")
@click.option("--count", type=int, help="Most modes to list, instead of mode.count.")
@output_options
def modes(
    design: str,
    changes: tuple[str, ...],
    wavelength_um: float | None,
    count: int | None,
    output: str | None,
    replace: bool,
) -> None:
    """List the guided modes at one wavelength."""
    from modesolve.mode import solve_modes
    from modesolve.tables import mode_table
    from phasematch.report import modes_report
    from phasematch.study import section_of

    check_file(output, replace)
    checked = read(design, changes)
    table = checked.tables.mode
    wavelength = checked.reference_um if wavelength_um is None else wavelength_um
    with progress() as tell:
        tell(f"modes at {wavelength:g} um")
        found = solve_modes(
            section_of(checked), wavelength, table.count if count is None else count
        )
    result = mode_table(found)
    out().print(modes_report(result))
    notes(result.notes)
    save(result, output)


@command.command("dispersion", short_help="Dispersion over the band.")
@design_argument
@output_options
def dispersion_verb(
    design: str, changes: tuple[str, ...], output: str | None, replace: bool
) -> None:
    """Index, group index, D, area and gamma over the band, zero dispersion."""
    from phasematch.report import dispersion_report
    from phasematch.study import curve_table, solve_curve

    check_file(output, replace)
    checked = read(design, changes)
    with progress() as tell:
        result = curve_table(checked, solve_curve(checked, tell))
    out().print(dispersion_report(result))
    notes(result.notes)
    save(result, output)


@command.command(short_help="Conversion band and pair flux of the channel.")
@design_argument
@output_options
def channel(design: str, changes: tuple[str, ...], output: str | None, replace: bool) -> None:
    """Conversion band and pair flux of the channel; -o writes its map."""
    from phasematch import study
    from phasematch.report import channel_report

    check_file(output, replace)
    checked = read(design, changes)
    table = checked.tables.channel
    if table is None:
        raise study.missing_table(checked, "channel")
    with progress() as tell:
        results = study.channel_results(checked, study.solve_curve(checked, tell))
    out().print(channel_report(table, results.band, results.flux))
    notes(results.notes)
    save(results.map, output)


@command.command(short_help="Which resonance pairs of the ring are aligned.")
@design_argument
@output_options
def ring(design: str, changes: tuple[str, ...], output: str | None, replace: bool) -> None:
    """Resonance pairs of the ring around its pump: which are aligned, by how much."""
    from phasematch import study
    from phasematch.report import ring_report, show

    check_file(output, replace)
    checked = read(design, changes)
    table = checked.tables.ring
    if table is None:
        raise study.missing_table(checked, "ring")
    with progress() as tell:
        results = study.ring_results(checked, study.solve_curve(checked, tell))
    show(out(), *ring_report(table, results))
    notes(results.notes)
    save(results.pairs, output)


@command.command()
@click.argument("file", type=click.Path(dir_okay=False))
@click.option("--replace", is_flag=True, help="Replace an existing file.")
def new(file: str, replace: bool) -> None:
    """Write a commented design to start from."""
    from materials.common.files import write_text
    from phasematch.starter import starter_text

    if os.path.exists(file) and not replace:
        raise StorageError(f"{file} exists; give another name, or --replace to replace it")
    write_text(file, starter_text())
    say(f"wrote {file}")


@command.command(short_help="Check design files without running them.")
@click.argument("design", type=DESIGN, nargs=-1, required=True)
@click.option("--resolved", is_flag=True, help="Print the design with every default filled in.")
def check(design: tuple[str, ...], resolved: bool) -> None:
    """Check design files without running them; every problem is listed."""
    problems: list[str] = []
    for path in design:
        try:
            checked = read(path, ())
        except DesignFileError as exc:
            problems += exc.args[0]
        else:
            click.echo(checked.to_toml() if resolved else f"{path}: good", nl=not resolved)
    if problems:
        raise DesignFileError(tuple(problems))


command.add_command(export)
command.add_command(materials_group)


# ---------------------------------------------------------------- entry point


def main(arguments: list[str] | None = None) -> None:
    """Entry point of the command: run it and turn errors into lines and exit codes."""
    signal.signal(signal.SIGTERM, _stop)
    try:
        code = command.main(args=arguments, prog_name="idlermap", standalone_mode=False)
    except click.Abort:
        say("interrupted; nothing was left half written")
        sys.exit(INTERRUPTED)
    except click.ClickException as exc:
        exc.show()
        sys.exit(exc.exit_code)
    except DesignFileError as exc:
        for line in exc.args[0]:
            click.echo(line, err=True)
        sys.exit(USAGE)
    except IdlermapError as exc:
        say(str(exc))
        sys.exit(exit_code(exc))
    except Exception:
        traceback.print_exc()
        say("this is a bug of Idlermap's own; please report it with the lines above")
        sys.exit(BUG)
    sys.exit(code if isinstance(code, int) else 0)


def _stop(number: int, frame: Any) -> None:
    """Leave by way of the clean-up when asked to terminate."""
    sys.exit(128 + number)
