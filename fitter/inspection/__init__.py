"""A second pair of eyes: judging a part's data by themselves and against each other, without fitting anything."""

from fitter.inspection.finding import Finding, Severity
from fitter.inspection.inspect import inspect

__all__ = ["Finding", "Severity", "inspect"]
