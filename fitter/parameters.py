"""What a parameter is: its name, unit, bounds and meaning, and the value that a fit gave it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

__all__ = ["Origin", "Parameter", "ParameterDefinition"]

Origin = Literal["fitted", "fixed", "assumed", "not determined"]


@dataclass(frozen=True, kw_only=True)
class ParameterDefinition:
    """A model parameter, described once, beside its equation.

    Parameters
    ----------
    name : str
        Name in tables, model files and the Python interface.
    unit : str
        SI unit; empty for a pure number.
    meaning : str
        One line for people.
    lower, upper : float
        Physical bounds [unit].
    scale : {"log", "linear"}
        How a fit moves it: by its logarithm, or as it is.
    typical : float
        The size [unit] that counts as one for a parameter on a linear scale.
    """

    name: str
    unit: str
    meaning: str
    lower: float
    upper: float
    scale: Literal["log", "linear"]
    typical: float = 1.0


@dataclass(frozen=True, kw_only=True)
class Parameter:
    """A parameter of a finished model.

    Parameters
    ----------
    name : str
        As in its definition.
    value : float
        Value in SI [unit].
    stderr : float or None
        Standard error [unit]; None where there is none to give.
    unit : str
        SI unit; empty for a pure number.
    origin : {"fitted", "fixed", "assumed", "not determined"}
        Where the value comes from.
    meaning : str
        One line for people.
    note : str
        What is worth saying about this value, such as that it ended on its bound.
    """

    name: str
    value: float
    stderr: float | None
    unit: str
    origin: Origin
    meaning: str
    note: str = ""
