"""The main job, step by step: read, judge, fit, predict, compare, write."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from fitter import leave_out as checks
from fitter.assembly import assemble
from fitter.errors import FitError, OperatingPointError, OutputError
from fitter.fitting.fit import fit
from fitter.inspection import inspect
from fitter.interface import Model
from fitter.part import Notice, Part, Quantity
from fitter.prospects import Prospects, prospects
from fitter.reader import read_part
from fitter.sheet import sheet_files
from fitter.variants import Variant
from fitter.writers import model_file, tables
from fitter.writers.folder import replace_folder
from fitter.writers.netlist import variant_subcircuit

__all__ = [
    "DOUBTFUL",
    "OUTPUT_FOLDER",
    "fit_folder",
    "fit_part",
    "next_to_digitize",
    "output_files",
    "output_target",
    "write_outputs",
]

#: Name of the output folder inside the part folder, unless told otherwise.
OUTPUT_FOLDER = "model"
#: Begins the notices of what the inspection found doubtful.
DOUBTFUL = "doubtful: "

_TEXT_FILES = (
    "model.json",
    "parameters.csv",
    "checks.csv",
    "curves.csv",
    "gate_charge.csv",
    "left_out.csv",
    "limits.csv",
)
_SHEET_FILES = ("sheet.png", "sheet.pdf")


def fit_part(part: Part, *, use_gate_charge: bool = False, leave_out: bool = False) -> Model:
    """Fit a model to a part.

    Parameters
    ----------
    part : Part
        As from `fitter.read_part`.
    use_gate_charge : bool
        Fit the gate-charge data, too, instead of keeping them as a check.
    leave_out : bool
        Leave out each group of data in turn, too, and predict it from the others: `Model.left_out`.

    Returns
    -------
    Model

    Raises
    ------
    FitError
        Where the data cannot carry a fit.
    """
    result = fit(part, use_gate_charge=use_gate_charge)
    return assemble(part, result, Model, checks.leave_out(part, result) if leave_out else ())


def fit_folder(folder: Path, *, use_gate_charge: bool = False, leave_out: bool = False) -> Model:
    """Read a part folder, judge it, and fit it where nothing speaks against it.

    Parameters
    ----------
    folder : Path
        The part folder.
    use_gate_charge, leave_out : bool
        As for `fit_part`.

    Returns
    -------
    Model
        What was found doubtful is among its notices.

    Raises
    ------
    PartFolderError
        Where the folder cannot be read.
    FitError
        Where a finding stops the fit, or the data cannot carry one.
    """
    return fit_part(_judged(folder), use_gate_charge=use_gate_charge, leave_out=leave_out)


def _judged(folder: Path) -> Part:
    """The part in a folder, with what was found doubtful among its notices."""
    part = read_part(folder)
    findings = inspect(part)
    stops = [str(finding) for finding in findings if finding.severity == "stop"]
    if stops:
        raise FitError("\n".join(["these data would make a meaningless model:", *stops]))
    doubts = tuple(Notice(topic=f.topic, text=f"{DOUBTFUL}{f}") for f in findings if f.severity == "doubtful")
    return replace(part, notices=part.notices + doubts)


def next_to_digitize(folder: Path) -> tuple[Model, Prospects]:
    """Fit everything that a part folder gives, and rank what could be given in addition.

    Parameters
    ----------
    folder : Path
        The part folder.

    Returns
    -------
    Model, Prospects

    Raises
    ------
    PartFolderError, FitError
        As for `fit_folder`.
    """
    part = _judged(folder)
    table = part.stated.gate_charge
    typical = table is not None and any(x is not None and x.typ for x in (table.q_g, table.q_gs, table.q_gd))
    result = fit(part, use_gate_charge=bool(part.curves_of(Quantity.GATE_CHARGE)) or typical)
    model = assemble(part, result, Model)
    return model, prospects(part, result, model.test_point())


def output_files(model: Model, limits: Sequence[Variant[Model]] = ()) -> dict[str, bytes]:
    """Everything that ``fetwright fit`` writes, by file name.

    Parameters
    ----------
    model : Model
        As from `fit_part`.
    limits : sequence of Variant
        Its weak and strong variants, if they are wanted: further subcircuits in the same file, and a table.

    Returns
    -------
    dict of str to bytes
        The same bytes for the same model.
    """
    texts = {
        "model.json": model_file.model_text(model),
        "parameters.csv": tables.csv_text(model.to_frame()),
        "checks.csv": tables.csv_text(model.checks_frame()),
        "curves.csv": tables.csv_text(model.curves_frame()),
        "gate_charge.csv": _gate_charge_text(model),
        f"{model.part.name}.lib": "\n".join([model.subcircuit(), *(variant_subcircuit(v) for v in limits)]),
    }
    if limits:
        texts["limits.csv"] = tables.csv_text(tables.limits_frame(model, limits))
    if model.left_out:
        texts["left_out.csv"] = tables.csv_text(tables.left_out_frame(model))
    return {**{name: text.encode() for name, text in texts.items()}, **sheet_files(model)}


def _gate_charge_text(model: Model) -> str:
    """The curve at the stated condition, or its stand-in; only a header where the model cannot reach it."""
    p = model.test_point()
    try:
        curve = model.gate_charge(vdd=p.v_dd, i_d=p.i_d, v_gs=p.v_gs, load=p.load)
    except OperatingPointError:
        return ",".join(tables.GATE_CHARGE_COLUMNS) + "\n"
    return tables.csv_text(tables.gate_charge_frame(curve))


def output_target(folder: Path, out: Path | None) -> Path:
    """Where the outputs of a part folder go.

    Parameters
    ----------
    folder : Path
        The part folder.
    out : Path or None
        What the user wants; None for ``model`` inside the part folder.

    Raises
    ------
    OutputError
        Where it is the part folder, or a folder that holds it: input would be mixed with output, or lost.
    """
    if out is None:
        return folder / OUTPUT_FOLDER
    try:
        inside, outside = folder.resolve(), out.resolve()
    except (OSError, RuntimeError, ValueError) as error:
        raise OutputError(f"{out}: cannot be written ({error})") from error
    if outside == inside or outside in inside.parents:
        raise OutputError(f"{out}: that holds the part folder's own files; choose another --out")
    return out


def write_outputs(model: Model, target: Path, limits: Sequence[Variant[Model]] = ()) -> tuple[str, ...]:
    """Write everything into a folder, all or nothing.

    Parameters
    ----------
    model : Model
        As from `fit_part`.
    limits : sequence of Variant
        As for `output_files`.
    target : Path
        The folder. Files in it that the tool did not write are left alone.

    Returns
    -------
    tuple of str
        Names of the files.

    Raises
    ------
    OutputError
        Where the folder cannot be written; then nothing has changed.
    """
    files = output_files(model, limits)
    taken = [name for name in files if (target / name).exists()]
    if taken and not (target / "model.json").exists():
        raise OutputError(
            f"{target}: {taken[0]} is there, but no model.json: it is not an earlier output of this tool and would be "
            "lost; choose another --out"
        )
    replace_folder(target, files, {*_TEXT_FILES, *_SHEET_FILES, *_earlier_subcircuit(target)})
    return tuple(files)


def _earlier_subcircuit(target: Path) -> tuple[str, ...]:
    """Name of the subcircuit file that an earlier run wrote for a part of another name."""
    try:
        name = json.loads((target / "model.json").read_text(encoding="utf-8"))["part"]["name"]
    except (OSError, ValueError, KeyError, TypeError, RecursionError):
        return ()
    return (f"{name}.lib",)
