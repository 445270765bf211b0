"""The model as a user holds it: a fitted model that can also write itself."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Literal

import pandas as pd

from fitter.errors import ModelFileError
from fitter.model import FittedModel
from fitter.models.temperature import REFERENCE
from fitter.writers import elements, model_file, netlist, tables
from fitter.writers.folder import write_file

__all__ = ["Model", "load_model"]


class Model(FittedModel):
    """A model fitted to a part, with what it can write; see `FittedModel` for what it can compute."""

    def subcircuit(self, t_j: float = REFERENCE, form: Literal["expressions", "elements"] = "expressions") -> str:
        """The SPICE subcircuit, nodes in the order drain, gate, source.

        Parameters
        ----------
        t_j : float
            Junction temperature [degC].
        form : {"expressions", "elements"}
            With expressions in controlled sources, or with plain elements only, which any SPICE-compatible simulator
            takes; its channel has a sharp threshold.

        Raises
        ------
        OperatingPointError
            Where the model knows nothing of that temperature.
        """
        write = elements.element_subcircuit if form == "elements" else netlist.subcircuit
        return write(self, t_j=t_j)

    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the model file.

        Parameters
        ----------
        path : path-like
            The file, usually ``model.json``.

        Raises
        ------
        OutputError
            Where it cannot be written.
        """
        write_file(Path(path), model_file.model_text(self).encode())

    def to_frame(self) -> pd.DataFrame:
        """The parameter set in SI: name, value, stderr, unit, origin."""
        return tables.parameters_frame(self)

    def checks_frame(self) -> pd.DataFrame:
        """Stated against fitted, in the units of the datasheet, as in ``checks.csv``."""
        return tables.checks_frame(self)

    def curves_frame(self) -> pd.DataFrame:
        """Each digitized point beside the fitted value, as in ``curves.csv``; empty in a loaded model."""
        return tables.curves_frame(self)


def load_model(path: str | os.PathLike[str]) -> Model:
    """Read a model file.

    Parameters
    ----------
    path : path-like
        As written by `Model.save` or ``fetwright fit``.

    Returns
    -------
    Model
        It computes what the saved one did; its part has no curves.

    Raises
    ------
    ModelFileError
        Where the file cannot be read or is no model file.
    """
    path = Path(path)
    try:
        if not path.is_file():
            raise ModelFileError(f"{path}: no such file; `fetwright fit` writes one")
        if path.stat().st_size > model_file.LARGEST:
            raise ModelFileError(f"{path}: a model file has at most {model_file.LARGEST} bytes")
        text = path.read_text(encoding="utf-8")
    except (OSError, ValueError) as error:
        raise ModelFileError(f"{path}: cannot be read as a text file ({error})") from error
    try:
        return model_file.model_from_text(text, Model)
    except ModelFileError as error:
        raise ModelFileError(f"{path}: {error}") from error
