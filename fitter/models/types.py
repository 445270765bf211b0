"""The one array type of the equations."""

from __future__ import annotations

from typing import Any

from numpy.typing import NDArray

__all__ = ["Numbers"]

#: Real or complex numbers; complex only where derivatives are taken.
Numbers = NDArray[Any]
