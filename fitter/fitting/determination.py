"""What the data cannot tell: parameters, and combinations of them, that the information matrix leaves open."""

from __future__ import annotations

import math
from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.blocks import EXPECTED
from fitter.fitting.intervals import Estimate
from fitter.fitting.solve import Solution
from fitter.models.types import scalar

__all__ = ["OPEN", "Undetermined", "expected_shares", "led_by_expectation", "spreads", "undetermined"]

Array = NDArray[np.float64]

#: A standard error of this much, as a natural logarithm: the 95 % interval reaches a factor of ten either way.
OPEN = math.log(10.0) / 1.96
#: An expectation leads a parameter where it gives this share of what is known of it, and where that is little: its
#: standard error, on the same scale, is at least so large.
_LEADING_SHARE, _LEADING_SPREAD = 0.25, 0.3
#: From here on it is worth saying: the 95 % interval reaches a factor of three either way.
_LOOSE = math.log(3.0) / 1.96
#: Loosely known parameters that are correlated this much are known together only.
_TOGETHER = 0.9

_LOW_CRSS = "points of crss at lower VDS"
_LOW_COSS = "points of coss at lower VDS"
_BEND = "more points where the curve bends"
_LOW_OUTPUT = "an output curve at low VDS"
_GATE_CHARGE = "a gate-charge curve, fitted with --use-gate-charge,"
_LOW_GATE_CHARGE = "gate-charge points below threshold"
_HOT = "a transfer curve at another junction temperature"
_FORWARD = "a body-diode curve over more decades of current"
_HOT_FORWARD = "a hot body-diode curve"
#: What would tell a parameter, by its name.
_TELLS = {
    "c_gs": "a ciss curve", "s_gs": _LOW_GATE_CHARGE, "c_ch": _GATE_CHARGE, "c_acc": _GATE_CHARGE,
    "c0_gd": _LOW_CRSS, "phi_gd": _LOW_CRSS, "m_gd": _LOW_CRSS, "cf_gd": "points of crss at higher VDS",
    "cr_gd": "points of crss at higher VDS",
    "c0_ds": _LOW_COSS, "phi_ds": _LOW_COSS, "m_ds": _LOW_COSS, "cf_ds": "points of coss at higher VDS",
    "v_th": "transfer points at small currents", "k": "transfer points at higher currents",
    "w": "transfer points below threshold, on a log axis, or the stated VGS(th)",
    "alpha": "output curves around the knee", "lambda": "an output curve in saturation",
    "r_s": _LOW_OUTPUT, "r_d": _LOW_OUTPUT,
    "vth_tc": _HOT, "k_exponent": _HOT, "rd_exponent": "RDS(on) over Tj",
    "w_exponent": "VGS(th) over Tj",
    "is_d": _FORWARD, "n_d": _FORWARD, "r_dio": _FORWARD, "eg_d": _HOT_FORWARD, "rdio_exponent": _HOT_FORWARD,
}  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Undetermined:
    """Parameters that the data leave open, alone or as a combination.

    Parameters
    ----------
    names : tuple of str
        The parameters.
    factors : tuple of float
        How far either way the 95 % interval of each reaches, as a factor.
    text : str
        What is open, and what would tell.
    """

    names: tuple[str, ...]
    factors: tuple[float, ...]
    text: str


def spreads(estimate: Estimate) -> dict[str, float]:
    """Standard error of each free parameter as a natural logarithm, or relative to its size on a linear scale.

    A linear parameter's size is its value, but no less than the typical one of its kind, and for RS and RD no less than
    their sum: what may well be zero is determined once its error is small on that scale.
    """
    sigma = np.sqrt(np.diag(estimate.covariance))
    values = {name: abs(scalar(value)) for name, value in estimate.values.items()}
    both = values["r_s"] + values["r_d"]
    sizes = values | {"r_s": both, "r_d": both}
    return {
        d.name: float(s if d.scale == "log" else s * d.typical / max(sizes[d.name], d.typical))
        for d, s in zip(estimate.space.free, sigma, strict=True)
    }


def expected_shares(solution: Solution) -> dict[str, float]:
    """Share of the information on each free parameter that expectations give, and not data.

    Parameters
    ----------
    solution : Solution
        The fit.

    Returns
    -------
    dict of str to float
        0 to 1 by the parameters' names.
    """
    rows = []
    for block in solution.blocks:
        rows += [block.name.endswith(EXPECTED)] * solution.residuals[block.name].size
    slopes, covariance = solution.jacobian[np.array(rows, dtype=bool)], solution.covariance
    # Without their rows the information is less by slopes' slopes: its inverse by the formula of Woodbury.
    reach = slopes @ covariance
    left = np.eye(len(slopes)) - reach @ slopes.T
    more = np.sum(reach * np.linalg.lstsq(left, reach, rcond=None)[0], axis=0)
    known = np.diag(covariance)
    shares = np.divide(more, known + more, out=np.zeros(known.size), where=known + more > 0.0)
    return dict(zip(solution.space.names, shares.tolist(), strict=True))


def led_by_expectation(solution: Solution, estimate: Estimate) -> set[str]:
    """Parameters that the data leave to what is expected of them.

    Parameters
    ----------
    solution : Solution
        The fit.
    estimate : Estimate
        Its parameters.

    Returns
    -------
    set of str
    """
    shares = expected_shares(solution)
    return {n for n, s in spreads(estimate).items() if s > _LEADING_SPREAD and shares.get(n, 0.0) > _LEADING_SHARE}


def undetermined(estimate: Estimate, names: Collection[str]) -> tuple[Undetermined, ...]:
    """Parameters and combinations of them that are known within no better than a factor of three.

    Parameters
    ----------
    estimate : Estimate
        The fitted parameters.
    names : collection of str
        Those to look at.

    Returns
    -------
    tuple of Undetermined
        Parameters that trade off against each other stand in one of them.
    """
    spread = {name: s for name, s in spreads(estimate).items() if name in names}
    loose = [name for name, s in spread.items() if s > _LOOSE]
    place = {name: i for i, name in enumerate(estimate.space.names)}
    sigma = np.sqrt(np.diag(estimate.covariance))
    result, left = [], list(loose)
    while left:
        group, queue = [], [left.pop(0)]
        while queue:
            i = queue.pop(0)
            group.append(i)
            linked = [
                j
                for j in left
                if abs(estimate.covariance[place[i], place[j]]) > _TOGETHER * sigma[place[i]] * sigma[place[j]]
            ]
            left = [j for j in left if j not in linked]
            queue += linked
        group = [name for name in spread if name in group]
        factors = tuple(math.exp(min(1.96 * spread[name], 50.0)) for name in group)
        result.append(Undetermined(names=tuple(group), factors=factors, text=_said(group, factors)))
    return tuple(result)


def _said(group: list[str], factors: tuple[float, ...]) -> str:
    tells = " or ".join(dict.fromkeys(_TELLS.get(name, _BEND) for name in group))
    worst = max(factors)
    reach = f"within a factor of {worst:.2g} either way" if worst < 100.0 else "by orders of magnitude"
    if len(group) == 1:
        return f"{group[0]} is open {reach}; {tells} would tell"
    what = "their sum" if set(group) == {"r_s", "r_d"} else "a combination of them"
    listed = f"{', '.join(group[:-1])} and {group[-1]}"
    return f"{listed}: only {what} is fixed, each alone is open {reach}; {tells} would separate them"
