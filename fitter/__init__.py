"""Compact switching-MOSFET models from digitized datasheet curves.

>>> import fitter
>>> part = fitter.read_part("digitized_curves/cargo_80v")  # doctest: +SKIP
>>> model = fitter.fit_part(part)  # doctest: +SKIP

Units are SI throughout, temperatures degrees Celsius. What is public is loaded when it is first used, so that
importing the package costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from fitter.errors import (
        ExtrapolationWarning,
        FitError,
        FitterError,
        ModelFileError,
        OperatingPointError,
        OutputError,
        PartFolderError,
    )
    from fitter.inspection import inspect
    from fitter.interface import Model, load_model
    from fitter.pipeline import fit_part
    from fitter.plots import (
        plot_body_diode,
        plot_capacitances,
        plot_gate_charge,
        plot_on_resistance,
        plot_output,
        plot_residuals,
        plot_threshold,
        plot_transfer,
    )
    from fitter.reader import read_part

_HOMES = {
    "ExtrapolationWarning": "fitter.errors",
    "FitError": "fitter.errors",
    "FitterError": "fitter.errors",
    "Model": "fitter.interface",
    "ModelFileError": "fitter.errors",
    "OperatingPointError": "fitter.errors",
    "OutputError": "fitter.errors",
    "PartFolderError": "fitter.errors",
    "fit_part": "fitter.pipeline",
    "inspect": "fitter.inspection",
    "load_model": "fitter.interface",
    "plot_body_diode": "fitter.plots",
    "plot_capacitances": "fitter.plots",
    "plot_gate_charge": "fitter.plots",
    "plot_on_resistance": "fitter.plots",
    "plot_output": "fitter.plots",
    "plot_residuals": "fitter.plots",
    "plot_threshold": "fitter.plots",
    "plot_transfer": "fitter.plots",
    "read_part": "fitter.reader",
}

__all__ = [
    "ExtrapolationWarning",
    "FitError",
    "FitterError",
    "Model",
    "ModelFileError",
    "OperatingPointError",
    "OutputError",
    "PartFolderError",
    "fit_part",
    "inspect",
    "load_model",
    "plot_body_diode",
    "plot_capacitances",
    "plot_gate_charge",
    "plot_on_resistance",
    "plot_output",
    "plot_residuals",
    "plot_threshold",
    "plot_transfer",
    "read_part",
]


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module 'fitter' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return sorted(__all__)
