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
    from fitter.errors import FitterError
    from fitter.interface import Model
    from fitter.pipeline import fit_part
    from fitter.reader import read_part

__all__ = ["FitterError", "Model", "fit_part", "read_part"]

_HOMES = {
    "FitterError": "fitter.errors",
    "Model": "fitter.interface",
    "fit_part": "fitter.pipeline",
    "read_part": "fitter.reader",
}


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module 'fitter' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return sorted(__all__)
