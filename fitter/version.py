"""The version, from the installed distribution's metadata."""

from __future__ import annotations

from importlib.metadata import PackageNotFoundError, version

__all__ = ["VERSION"]

try:
    VERSION = version("fetwright")
except PackageNotFoundError:  # pragma: no cover - run from a source tree that was never installed
    VERSION = "0+unknown"
