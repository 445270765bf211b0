"""The command ``fetwright``: arguments in, what is shown out.

Whatever takes long to import is imported inside the commands, so that help texts and shell completion come at once.
"""

from __future__ import annotations

import gc
import io
import os
import sys
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from enum import StrEnum
from pathlib import Path
from typing import Annotated, Optional

import typer

from fitter.errors import ExtrapolationWarning, FitterError, OutputError

__all__ = ["app", "main"]

#: Exit statuses besides 0.
LIMIT_VIOLATED, BAD_INPUT, OWN_FAULT, INTERRUPTED = 1, 2, 3, 130

app = typer.Typer(
    name="fetwright",
    help="Fit a compact switching-MOSFET model to digitized datasheet curves, and see how far to trust it.",
    epilog="Begin with `fetwright new FOLDER`, fill it in, then `fetwright check FOLDER` and `fetwright fit FOLDER`. "
    "Typical values are no limits: verify on the bench.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
)


class Form(StrEnum):
    """Form of a subcircuit."""

    EXPRESSIONS = "expressions"
    ELEMENTS = "elements"


class LoadKind(StrEnum):
    """Load of a gate-charge test."""

    CURRENT = "current"
    RESISTIVE = "resistive"


PartFolder = Annotated[
    Path, typer.Argument(metavar="FOLDER", help="The part folder: part.toml and the curves' CSV files.")
]
ModelFile = Annotated[Path, typer.Argument(metavar="MODEL.json", help="A model file, as written by `fetwright fit`.")]
Junction = Annotated[float, typer.Option("--tj", metavar="C", help="Junction temperature in degrees Celsius.")]


@app.callback(invoke_without_command=True)
def _root(
    version: Annotated[bool, typer.Option("--version", help="Show the version and stop.")] = False,
) -> None:
    if version:
        from fitter.version import VERSION

        typer.echo(f"fetwright {VERSION}")
        raise typer.Exit


@app.command()
def new(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="Folder to write; it must be new or empty.")],
) -> None:
    """Write a part folder to fill in: a commented part.toml, and CSV files with headers only."""
    from fitter.new_folder import write_new_folder

    for path in write_new_folder(folder):
        typer.echo(path)


@app.command()
def check(folder: PartFolder) -> None:
    """Read a part folder and judge the data without fitting: what is missing, out of order, inconsistent."""
    from fitter import screen
    from fitter.inspection import inspect
    from fitter.reader import read_part

    part = read_part(folder)
    findings = inspect(part)
    screen.show_reading(part)
    screen.show_findings(findings)
    if any(finding.severity == "stop" for finding in findings):
        raise typer.Exit(BAD_INPUT)


@app.command()
def fit(
    folder: PartFolder,
    out: Annotated[
        Optional[Path],  # noqa: UP045 - typer reads this annotation
        typer.Option("--out", metavar="DIR", help="Folder to write into; `model` inside the part folder by default."),
    ] = None,
    use_gate_charge: Annotated[
        bool,
        typer.Option("--use-gate-charge", help="Fit the gate-charge data, too, instead of keeping them as a check."),
    ] = False,
    leave_out: Annotated[
        bool,
        typer.Option("--leave-out", help="Predict each curve and table value from all the others, too."),
    ] = False,
    limits: Annotated[
        bool,
        typer.Option("--limits", help="Add a weak and a strong variant, at the stated min and max, to the subcircuit."),
    ] = False,
    strict: Annotated[
        bool,
        typer.Option("--strict", help="Exit with status 1 where the fitted model violates a stated limit."),
    ] = False,
) -> None:
    """Fit the model: read, check, fit, predict the gate charge, compare it with what is stated, write everything."""
    from fitter import screen
    from fitter.pipeline import fit_folder, output_target, write_outputs
    from fitter.variants import variants

    target = output_target(folder, out)
    model = fit_folder(folder, use_gate_charge=use_gate_charge, leave_out=leave_out)
    corners = variants(model) if limits else ()
    files = write_outputs(model, target, corners)
    screen.show_model(model)
    screen.show_limits(model, corners)
    screen.show_left_out(model)
    screen.show_files(target, files)
    if strict and any(c.verdict == "outside limit" for c in model.checks):
        raise typer.Exit(LIMIT_VIOLATED)


@app.command("next")
def next_(folder: PartFolder) -> None:
    """Say what to digitize next: how much each missing curve or table value would narrow the intervals, best first."""
    from fitter import screen
    from fitter.pipeline import next_to_digitize

    model, found = next_to_digitize(folder)
    screen.show_prospects(model, found)


@app.command()
def netlist(
    model: ModelFile,
    out: Annotated[
        Optional[Path],  # noqa: UP045
        typer.Option("--out", metavar="FILE", help="File to write; the screen by default."),
    ] = None,
    form: Annotated[
        Form, typer.Option("--form", help="With expressions, or of plain elements only, for any simulator.")
    ] = Form.EXPRESSIONS,
    tj: Junction = 25.0,
) -> None:
    """Write the subcircuit again from a finished model, at another junction temperature if wanted."""
    from fitter.interface import load_model
    from fitter.writers.folder import write_file

    loaded = load_model(model)
    with _told(loaded.extrapolation(tj)):
        text = loaded.subcircuit(t_j=tj, form=form.value)
    if out is None:
        typer.echo(text, nl=False)
    else:
        write_file(out, text.encode(), mark=b"* Fitted by fetwright")
        typer.echo(out)


@app.command()
def decks(
    model: ModelFile,
    out: Annotated[Path, typer.Option("--out", metavar="DIR", help="Folder to write into.")],
    tj: Junction = 25.0,
) -> None:
    """Write ready-to-run circuits that repeat what the datasheet measures, each with the values to expect."""
    from fitter.interface import load_model
    from fitter.writers.decks import deck_files
    from fitter.writers.folder import replace_folder

    loaded = load_model(model)
    with _told(loaded.extrapolation(tj)):
        files = {name: text.encode() for name, text in deck_files(loaded, tj).items()}
    foreign = [name for name in files if (out / name).exists() and b"fetwright" not in (out / name).read_bytes()[:4000]]
    if foreign:
        raise OutputError(f"{out / foreign[0]}: there is a file that this command did not write; choose another --out")
    replace_folder(out, files, files)
    for name in files:
        typer.echo(out / name)


@app.command()
def charge(
    model: ModelFile,
    vdd: Annotated[float, typer.Option("--vdd", metavar="V", help="Supply of the load circuit in volts.")],
    i_d: Annotated[float, typer.Option("--id", metavar="A", help="Load current in amperes.")],
    vgs: Annotated[float, typer.Option("--vgs", metavar="V", help="Gate-source voltage at the end in volts.")],
    load: Annotated[
        LoadKind, typer.Option("--load", help="Constant current with a free-wheel diode, or a resistor.")
    ] = (LoadKind.CURRENT),
    tj: Junction = 25.0,
    out: Annotated[
        Optional[Path],  # noqa: UP045
        typer.Option("--out", metavar="FILE.csv", help="Write the curve, in the columns of gate_charge.csv."),
    ] = None,
) -> None:
    """Gate charge at your own operating point: QG, QGS, QGD and the plateau with their 95 % intervals."""
    from fitter import screen
    from fitter.interface import load_model
    from fitter.writers import tables
    from fitter.writers.folder import write_file

    loaded = load_model(model)
    with _told(loaded.extrapolation(tj), *loaded.beyond(vdd, i_d, vgs)):
        found = loaded.gate_charge_intervals(vdd, i_d, vgs, load.value, tj)
        curve = loaded.gate_charge(vdd, i_d, vgs, load.value, tj)
    if out is not None:
        frame = tables.gate_charge_frame(curve)
        write_file(out, tables.csv_text(frame).encode(), mark=",".join(tables.GATE_CHARGE_COLUMNS).encode())
    s = loaded.sign
    where = f"VDD {s * abs(vdd):g} V, ID {s * abs(i_d):g} A, VGS {s * abs(vgs):g} V, {load.value} load, Tj {tj:g} C"
    screen.show_gate_charge(loaded, found, where)
    if out is not None:
        typer.echo(out)


@contextmanager
def _told(*messages: str) -> Iterator[None]:
    """Say once on stderr that a result extrapolates, in place of the warnings that a program would get."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ExtrapolationWarning)
        yield
    for message in filter(None, messages):
        typer.echo(f"fetwright: note: {message}", err=True)


def main() -> None:
    """Run the command; the one place where an error becomes a message and an exit status."""
    # The matrices are small: threads that wait for each other cost more than they save, on a busy machine twentyfold.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    # A command runs for seconds: looking for cycles of garbage costs more than it frees.
    gc.disable()
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")  # a screen that lacks a character gets a question mark
    try:
        try:
            app()
        finally:
            sys.stdout.flush()
    except SystemExit as end:
        if isinstance(end.__context__, BrokenPipeError):
            raise SystemExit(0) from None  # whoever read the output has gone
        if end.code == INTERRUPTED:
            typer.echo("fetwright: interrupted", err=True)
        raise
    except FitterError as error:
        _fail(f"fetwright: {error}", BAD_INPUT)
    except MemoryError:
        _fail("fetwright: out of memory", BAD_INPUT)
    except BrokenPipeError:
        # Writing to the closed pipe once more at exit would complain.
        sys.stderr.close()
        raise SystemExit(0) from None
    except OSError as error:
        _fail(f"fetwright: {error.strerror or error}", BAD_INPUT)
    except Exception as error:
        import traceback

        place = traceback.extract_tb(error.__traceback__)[-1]
        where = f"{Path(place.filename).name}, line {place.lineno}"
        _fail(
            f"fetwright: this is a fault of the tool, not of your data: {type(error).__name__}: {error} ({where}). "
            "Nothing was written. Please report it with this line, the command, `fetwright --version` and, if you may "
            "share it, the part folder.",
            OWN_FAULT,
        )


def _fail(message: str, status: int) -> None:
    typer.echo(message, err=True)
    raise SystemExit(status)
