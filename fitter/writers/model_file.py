"""The model file: everything that a later command needs, as JSON.

Numbers are written so that they come back exactly; what is read is checked wholly before any of it is used.
"""

from __future__ import annotations

import json
import math
import re
from dataclasses import MISSING, dataclass, fields
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from fitter.comparison import Comparison
from fitter.errors import FitterError, ModelFileError
from fitter.fitting.assumptions import ACCUMULATION_RATIO, ON_STATE_RATIO, GateAssumption
from fitter.fitting.forms import FormTrial
from fitter.fitting.intervals import Estimate
from fitter.fitting.misfit import BlockStatistics
from fitter.fitting.space import ParameterSpace
from fitter.model import FittedModel, Validity
from fitter.models.channel import CHANNEL, Channel
from fitter.models.diode import BODY_DIODE, BodyDiode
from fitter.models.temperature import TEMPERATURE, TemperatureLaws
from fitter.models.transistor import DEFINITIONS, Transistor
from fitter.models.types import scalar
from fitter.parameters import Parameter
from fitter.part import Notice, Part
from fitter.writers.plain import from_plain, to_plain
from fitter.writers.tables import SHOWN

__all__ = ["FORMAT", "FORMAT_VERSION", "LARGEST", "model_from_text", "model_text"]

FORMAT = "fetwright model"
FORMAT_VERSION = 1

Model = TypeVar("Model", bound=FittedModel)

#: Most characters of a model file.
LARGEST = 4_000_000
_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,31}")
_FREE = {**DEFINITIONS, ON_STATE_RATIO.name: ON_STATE_RATIO, ACCUMULATION_RATIO.name: ACCUMULATION_RATIO}


@dataclass(frozen=True, kw_only=True)
class _StoredEstimate:
    free: tuple[str, ...]
    coordinates: tuple[float, ...]
    covariance: tuple[tuple[float, ...], ...]
    fixed: dict[str, float]
    assumption: GateAssumption | None


@dataclass(frozen=True, kw_only=True)
class _Correlation:
    first: str
    second: str
    coefficient: float


@dataclass(frozen=True, kw_only=True)
class _Stored:
    format: str
    format_version: int
    version: str
    part: Part
    used_gate_charge: bool
    parameters: dict[str, Parameter]
    estimate: _StoredEstimate
    correlations: tuple[_Correlation, ...]
    statistics: tuple[BlockStatistics, ...]
    trials: tuple[FormTrial, ...]
    checks: tuple[Comparison, ...]
    notices: tuple[Notice, ...]
    validity: Validity


def model_text(model: FittedModel) -> str:
    """The model file's text.

    Parameters
    ----------
    model : FittedModel
        What to store. Digitized points are not stored; they stand in ``curves.csv``.

    Returns
    -------
    str
        JSON.
    """
    space = model.estimate.space
    stored = _StoredEstimate(
        free=space.names,
        coordinates=tuple(float(u) for u in model.estimate.coordinates),
        covariance=tuple(tuple(float(c) for c in row) for row in model.estimate.covariance),
        fixed={name: float(value) for name, value in space.fixed.items()},
        assumption=space.complete if isinstance(space.complete, GateAssumption) else None,
    )
    correlations = [_Correlation(first=a, second=b, coefficient=r) for (a, b), r in model.correlations.items()]
    data = {
        "format": FORMAT,
        "format_version": FORMAT_VERSION,
        "version": model.version,
        "part": to_plain(model.part, leave_out=("curves",)),
        "used_gate_charge": model.used_gate_charge,
        "parameters": to_plain(model.parameters),
        "estimate": to_plain(stored),
        "correlations": to_plain(correlations),
        "statistics": to_plain(model.statistics),
        "trials": to_plain(model.trials),
        "checks": to_plain(model.checks),
        "notices": to_plain(model.notices),
        "validity": to_plain(model.validity),
    }
    return json.dumps(data, indent=1, allow_nan=False, ensure_ascii=True) + "\n"


def model_from_text(text: str, kind: type[Model]) -> Model:
    """A model from a model file's text.

    Parameters
    ----------
    text : str
        As from `model_text`.
    kind : type
        `FittedModel` or a class derived from it.

    Returns
    -------
    FittedModel
        Of that class; its part has no curves.

    Raises
    ------
    ModelFileError
        Where the text is no model file of this format, or anything in it is not what it should be.
    """
    if len(text) > LARGEST:
        raise ModelFileError(f"the model file has {len(text)} characters; at most {LARGEST} are read")
    try:
        data = json.loads(text)
    except (ValueError, RecursionError) as error:
        raise ModelFileError(f"the model file is not JSON: {str(error)[:120]}") from error
    if not isinstance(data, dict) or data.get("format") != FORMAT:
        raise ModelFileError(f"this is no model file: its key 'format' should be {FORMAT!r}")
    if data.get("format_version") != FORMAT_VERSION:
        found = str(data.get("format_version"))[:20]
        raise ModelFileError(f"the model file has format version {found}; this tool reads {FORMAT_VERSION}: fit again")
    stored = from_plain(_Stored, data, "model file")
    if not _NAME.fullmatch(stored.part.name):
        raise ModelFileError("model file.part.name: expected a letter, then letters, digits, underscores; at most 32")
    estimate = _estimate(stored.estimate)
    _check_values(stored, estimate)
    _check_rest(stored)
    return kind(
        part=stored.part,
        parameters=stored.parameters,
        estimate=estimate,
        correlations={(c.first, c.second): c.coefficient for c in stored.correlations},
        statistics=stored.statistics,
        trials=stored.trials,
        checks=stored.checks,
        notices=stored.notices,
        validity=stored.validity,
        used_gate_charge=stored.used_gate_charge,
        version=stored.version,
    )


def _estimate(stored: _StoredEstimate) -> Estimate:
    where = "model file.estimate"
    unknown = [name for name in (*stored.free, *stored.fixed) if name not in _FREE]
    if unknown:
        raise ModelFileError(f"{where}: unknown parameter {unknown[0][:40]!r}")
    given = {*stored.free, *stored.fixed}
    for kind, group in ((Channel, CHANNEL), (TemperatureLaws, TEMPERATURE), (BodyDiode, BODY_DIODE)):
        needed = [group[f.name].name for f in fields(kind) if f.default is MISSING]
        missing = [name for name in needed if name not in given]
        # There is always a channel; temperature laws and body diode need not be there, but not a part of them only.
        if missing and (kind is Channel or any(d.name in given for d in group.values())):
            raise ModelFileError(f"{where}: parameter {missing[0]!r} is missing")
    n = len(stored.free)
    if len(set(stored.free)) != n or len(stored.coordinates) != n:
        raise ModelFileError(f"{where}: {n} free parameters need as many coordinates, each name once")
    if len(stored.covariance) != n or any(len(row) != n for row in stored.covariance):
        raise ModelFileError(f"{where}.covariance: expected {n} rows of {n} numbers")
    covariance: NDArray[np.float64] = np.array(stored.covariance, dtype=float).reshape(n, n)
    if np.any(np.diag(covariance) < 0.0) or not np.allclose(covariance, covariance.T, rtol=1e-6, atol=0.0):
        raise ModelFileError(f"{where}.covariance: expected a symmetric matrix with no negative variance")
    sigma = np.sqrt(np.diag(covariance))
    if np.any(np.abs(covariance) > np.outer(sigma, sigma) * (1.0 + 1e-6)):
        raise ModelFileError(f"{where}.covariance: a correlation lies beyond -1 to 1")
    space = ParameterSpace(
        free=tuple(_FREE[name] for name in stored.free), fixed=stored.fixed, complete=stored.assumption
    )
    coordinates = np.array(stored.coordinates, dtype=float)
    lower, upper = space.bounds()
    # A coordinate on its bound may have been rounded across it.
    slack = 1e-9 * (1.0 + np.abs(coordinates))
    if np.any(coordinates < lower - slack) or np.any(coordinates > upper + slack):
        raise ModelFileError(f"{where}.coordinates: a parameter lies outside its bounds")
    return Estimate(space=space, coordinates=coordinates, covariance=covariance)


def _check_values(stored: _Stored, estimate: Estimate) -> None:
    """The parameter table must say what the estimate says: both are read, by people and by the commands."""
    try:
        values = estimate.values
        Transistor.from_values(values)
    except (KeyError, FitterError) as error:
        raise ModelFileError(f"model file.estimate: parameter {error} is missing") from error
    for name, parameter in stored.parameters.items():
        if name != parameter.name or not _NAME.fullmatch(name):
            raise ModelFileError(f"model file.parameters.{name[:40]}: its name should be {name[:40]!r}")
        if name in values and not math.isclose(parameter.value, scalar(values[name]), rel_tol=1e-6, abs_tol=1e-30):
            raise ModelFileError(f"model file.parameters.{name}: its value is not the one the estimate gives")


def _check_rest(stored: _Stored) -> None:
    """What types alone do not say."""
    part, known = stored.part, stored.validity
    if part.v_ds_max <= 0.0 or part.v_gs_max <= 0.0:
        raise ModelFileError("model file.part: ratings must be above zero")
    package = (part.package.r_g, part.package.l_g, part.package.l_d, part.package.l_s)
    if any(x is not None and x < 0.0 for x in package):
        raise ModelFileError("model file.part.package: a resistance or inductance is negative")
    for name in ("capacitance_v_ds", "current_v_ds", "v_gs", "i_d", "t_j"):
        ends = getattr(known, name)
        if ends is not None and (len(ends) != 2 or ends[0] > ends[1]):
            raise ModelFileError(f"model file.validity.{name}: expected a lowest and a highest value")
    for check in stored.checks:
        if check.quantity not in SHOWN:
            raise ModelFileError(f"model file.checks: unknown quantity {check.quantity[:40]!r}")
    for c in stored.correlations:
        if c.first not in _FREE or c.second not in _FREE or abs(c.coefficient) > 1.0 + 1e-9:
            raise ModelFileError("model file.correlations: an unknown parameter, or a coefficient beyond -1 to 1")
