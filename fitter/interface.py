"""The model as a user holds it: a fitted model that can also write itself."""

from __future__ import annotations

from fitter.model import FittedModel

__all__ = ["Model"]


class Model(FittedModel):
    """A model fitted to a part, with what it can write."""
