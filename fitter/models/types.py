"""The types that the equations compute with."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["Numbers", "Value", "scalar"]

#: Real or complex numbers; complex only where derivatives are taken.
Numbers = NDArray[Any]

#: What a parameter's value can be: a number, or an array of them that broadcasts.
Value = float | Numbers


def scalar(value: Value) -> float:
    """A parameter's value as one real number; the imaginary part, which carries a derivative, is dropped."""
    return float(np.asarray(value).real)
