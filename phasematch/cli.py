"""The command ``idlermap``: data on stdout, progress, notes and errors on stderr."""

from __future__ import annotations

import contextlib
import os
import signal
import sys
import traceback
from typing import Any

import click

from materials.common.errors import DesignFileError, IdlermapError, SolverError, StorageError
from materials.common.files import check_free
from materials.common.results import package_version
from phasematch.cli_export import export
from phasematch.cli_materials import materials_group
from phasematch.cli_parts import (
    DESIGN,
    check_file,
    design_argument,
    finish,
    notes,
    out,
    output_options,
    read,
    replace_option,
    save,
    say,
    working,
)
from phasematch.exit_codes import FAULT, GOOD, INTERRUPTED, STORAGE, exit_code, help_text

COMPLETION = """
\b
Shell completion, for bash (likewise zsh, fish), in the shell's start-up file:
  eval "$(_IDLERMAP_COMPLETE=bash_source idlermap)"
"""


# ---------------------------------------------------------------- verbs


@click.group(
    epilog=f"{help_text()}\n{COMPLETION}",
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80},
)
@click.version_option(package_version(), prog_name="idlermap")
def command() -> None:
    """Phase matching and resonance alignment for four-wave mixing on chips.

    A design file says what the waveguide is; "idlermap new" writes one to start from.
    Results go to stdout, everything else to stderr.
    """


@command.command(short_help="Run a design: results and figures into a folder.")
@design_argument
@click.option("-o", "--output", "folder", required=True, help="Folder for the results.")
@replace_option("Replace the results in a folder that holds some.")
def run(design: str, changes: tuple[str, ...], folder: str, replace: bool) -> int:
    """Run a design: tables, maps and figures into a folder, a summary on stdout."""
    from phasematch.outputs import check_output
    from phasematch.report import show, summary
    from phasematch.study import run_design

    checked = read(design, changes)
    check_output(checked, folder, replace=replace)
    with working() as tell:
        outcome = run_design(checked, folder, replace=replace, progress=tell)
    show(out(), *summary(outcome))
    notes(outcome.notes)
    say(f"results are in {folder}")
    return finish(*outcome.results)


@command.command()
@design_argument
@click.option("--wavelength-um", type=float, help="Instead of mode.wavelength_um.")
@click.option("--count", type=int, help="Most modes to list, instead of mode.count.")
@output_options("Also write the result here (.csv or .h5).")
def modes(
    design: str,
    changes: tuple[str, ...],
    wavelength_um: float | None,
    count: int | None,
    output: str | None,
    replace: bool,
) -> int:
    """List the guided modes at one wavelength."""
    from modesolve.mode import solve_modes
    from modesolve.tables import mode_table
    from phasematch.report import modes_report
    from phasematch.study import section_of

    check_file(output, replace, design)
    checked = read(design, changes)
    table = checked.tables.mode
    wavelength = checked.reference_um if wavelength_um is None else wavelength_um
    with working() as tell:
        tell(f"modes at {wavelength:g} um")
        found = solve_modes(
            section_of(checked), wavelength, table.count if count is None else count
        )
    result = mode_table(found)
    out().print(modes_report(result))
    notes(result.notes)
    save(result, output)
    return finish(result)


@command.command("dispersion", short_help="Dispersion over the band.")
@design_argument
@output_options("Also write the result here (.csv or .h5).")
def dispersion_verb(
    design: str, changes: tuple[str, ...], output: str | None, replace: bool
) -> int:
    """Index, group index, D, area and gamma over the band, zero dispersion."""
    from phasematch.report import dispersion_report
    from phasematch.study import curve_table, solve_curve

    check_file(output, replace, design)
    checked = read(design, changes)
    with working() as tell:
        result = curve_table(checked, solve_curve(checked, tell))
    out().print(dispersion_report(result))
    notes(result.notes)
    save(result, output)
    return finish(result)


@command.command(short_help="Conversion band and pair flux of the channel.")
@design_argument
@output_options("Also write the result here (.csv or .h5).")
def channel(design: str, changes: tuple[str, ...], output: str | None, replace: bool) -> int:
    """Conversion band and pair flux of the channel; -o writes its map."""
    from phasematch import study
    from phasematch.report import channel_report

    check_file(output, replace, design)
    checked = read(design, changes)
    table = checked.tables.channel
    if table is None:
        raise study.missing_table(checked, "channel")
    with working() as tell:
        results = study.solve_channel(checked, study.solve_curve(checked, tell))
    out().print(channel_report(table, results.band, results.flux))
    notes(results.notes)
    save(results.map, output)
    return finish(*results.parts)


@command.command(short_help="Which resonance pairs of the ring are aligned.")
@design_argument
@output_options("Also write the result here (.csv or .h5).")
def ring(design: str, changes: tuple[str, ...], output: str | None, replace: bool) -> int:
    """Resonance pairs of the ring around its pump: which are aligned, by how much."""
    from phasematch import study
    from phasematch.report import ring_report, show

    check_file(output, replace, design)
    checked = read(design, changes)
    table = checked.tables.ring
    if table is None:
        raise study.missing_table(checked, "ring")
    with working() as tell:
        results = study.solve_ring(checked, study.solve_ring_curve(checked, tell))
    show(out(), *ring_report(table, results))
    notes(results.notes)
    save(results.pairs, output)
    return finish(*results.parts)


@command.command()
@click.argument("file", type=click.Path())
@replace_option()
def new(file: str, replace: bool) -> None:
    """Write a commented design to start from; "-" writes it to stdout."""
    from materials.common.files import write_text
    from phasematch.starter import starter_text

    if file == "-":
        click.echo(starter_text(), nl=False)
        return
    check_free(file, replace=replace)
    write_text(file, starter_text())
    say(f"wrote {file}")


@command.command(short_help="Check design files without running them.")
@click.argument("design", type=DESIGN, nargs=-1, required=True)
@click.option("--resolved", is_flag=True, help="Print the design with every default filled in.")
def check(design: tuple[str, ...], resolved: bool) -> int:
    """Check design files without running them; every problem of every file is listed."""
    problems: list[str] = []
    code = GOOD
    for path in design:
        try:
            checked = read(path, ())
        except DesignFileError as exc:
            problems += exc.args[0]
        except StorageError as exc:
            say(str(exc))
            code = STORAGE
        else:
            click.echo(checked.to_toml() if resolved else f"{path}: good", nl=not resolved)
    if problems:
        raise DesignFileError(tuple(problems))
    return code


command.add_command(export)
command.add_command(materials_group)


# ---------------------------------------------------------------- entry point


def main(arguments: list[str] | None = None) -> None:
    """Entry point of the command: run it and turn errors into lines and exit codes."""
    try:
        signal.signal(signal.SIGTERM, _stop)
        signal.signal(signal.SIGINT, signal.default_int_handler)
        code = command.main(args=arguments, prog_name="idlermap", standalone_mode=False)
    except (click.Abort, KeyboardInterrupt):
        say("interrupted; nothing was left half written")
        sys.exit(INTERRUPTED)
    except click.ClickException as exc:
        _say_usage(exc)
        sys.exit(exc.exit_code)
    except DesignFileError as exc:
        for line in exc.args[0]:
            click.echo(line, err=True)
        sys.exit(exit_code(exc))
    except IdlermapError as exc:
        say(str(exc))
        if isinstance(exc, SolverError):
            say("please report this, with the design file and the line above")
        sys.exit(exit_code(exc))
    except SystemExit as exc:  # how click ends when the reader of stdout has gone away
        gone = "PacifyFlushWrapper" in type(sys.stdout).__name__
        sys.exit(STORAGE if gone else exc.code)
    except OSError as exc:  # those of files are `StorageError`: this is stdout's
        _stdout_failed(exc)
        sys.exit(STORAGE)
    except Exception:
        traceback.print_exc()
        say("this is a bug of Idlermap's own; please report it with the lines above")
        sys.exit(FAULT)
    sys.exit(code if isinstance(code, int) else 0)


def _say_usage(error: click.ClickException) -> None:
    """One line on wrong usage; a command without arguments shows its help."""
    if type(error).__name__ == "NoArgsIsHelpError":
        error.show()
        return
    context = getattr(error, "ctx", None)
    verb = "idlermap" if context is None else context.command_path
    say(f'{" ".join(error.format_message().split())} See "{verb} --help".')


def _stdout_failed(error: OSError) -> None:
    """Say that stdout could not be written; a reader that has gone away needs no word."""
    if not isinstance(error, BrokenPipeError):
        say(f"cannot write to stdout: {error.strerror or error}; check that the disk has room")
    # what is left in the buffer goes nowhere, or Python would complain at its exit
    with contextlib.suppress(OSError, ValueError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _stop(number: int, frame: Any) -> None:
    """Leave by way of the clean-up when told to terminate."""
    raise click.Abort
