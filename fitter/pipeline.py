"""The main job, step by step: read, fit, predict, compare, write."""

from __future__ import annotations

from fitter.assembly import assemble
from fitter.fitting.fit import fit
from fitter.interface import Model
from fitter.part import Part

__all__ = ["fit_part"]


def fit_part(part: Part, *, use_gate_charge: bool = False) -> Model:
    """Fit a model to a part.

    Parameters
    ----------
    part : Part
        As from `fitter.read_part`.
    use_gate_charge : bool
        Fit the gate-charge data, too, instead of keeping them as a check.

    Returns
    -------
    Model

    Raises
    ------
    FitError
        Where the data cannot carry a fit.
    """
    return assemble(part, fit(part, use_gate_charge=use_gate_charge), Model)
