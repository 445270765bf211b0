"""What no curve at VGS = 0 shows, and what is assumed of it unless the gate charge is fitted."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.space import ParameterSpace, Values
from fitter.models.transistor import GATE, Transistor
from fitter.models.types import Value, scalar
from fitter.parameters import ParameterDefinition
from fitter.part import Part, Quantity

__all__ = ["ACCUMULATION_RATIO", "ON_STATE_RATIO", "GateAssumption", "assumed_space"]

Array = NDArray[np.float64]

#: Parameters that show on gate-charge data alone; stand-ins where nothing that depends on them is fitted.
GATE_CHARGE_ONLY = {"s_gs": 0.0, "c_ch": 0.0, "c_acc": 1e-12}

ON_STATE_RATIO = ParameterDefinition(
    name="on_state_ratio", unit="", lower=0.5, upper=5.0, scale="log",
    meaning="input capacitance in the on-state over Ciss at the gate-charge test's VDD",
)  # fmt: skip
ACCUMULATION_RATIO = ParameterDefinition(
    name="accumulation_ratio", unit="", lower=0.2, upper=5.0, scale="log",
    meaning="gate-drain capacitance with the gate above the drain over that at the lowest digitized VDS",
)  # fmt: skip

#: On-state ratio assumed, and its 95 % range: read off seven published datasheet tables it ran from 1.2 to 2.3.
_RATIO, _RATIO_LOW, _RATIO_HIGH = 1.5, 1.0, 2.3
_SIGMA_RATIO = math.log(_RATIO_HIGH / _RATIO_LOW) / (2.0 * 1.96)
#: 1-sigma of ln(Cacc/Cgd(lowest VDS)): a factor of 1.5 either way at 95 % (a judgement, no source).
_SIGMA_ACCUMULATION = math.log(1.5) / 1.96
#: Share of Cgs over the body, and its 1-sigma. QGS/(Ciss Vplateau) is 0.98 to 1.00 over some published tables, a share
#: of 0 to 0.1, and 0.93 to 0.97 over devices built from oxides and doping, a share of 0.1 to 0.3.
BODY_SHARE, BODY_SHARE_SPREAD = 0.13, 0.08
#: Cch tends to 0 over this share of Ciss.
_BEND = 0.1


@dataclass(frozen=True, kw_only=True)
class GateAssumption:
    """What Cacc and Cch are assumed to be; called with values by name, it adds the two.

    Cacc = accumulation_ratio Cgd(v_low), and Cch such that Cgs + Cch + Cacc = on_state_ratio Ciss(v_dd), bent so that
    it stays above 0.

    Parameters
    ----------
    v_dd : float
        VDD of the gate-charge test, or half the voltage rating where none is stated [V].
    v_low : float
        Lowest VDS at which Crss was digitized [V]: below it Cgd is an extrapolation.
    """

    v_dd: float
    v_low: float

    @classmethod
    def of(cls, part: Part) -> GateAssumption:
        """The assumption for a part."""
        curves = part.curves_of(Quantity.CRSS) or part.curves_of(Quantity.CISS)
        return cls(
            v_dd=part.supply,
            v_low=max(0.0, min((float(c.x[0]) for c in curves), default=0.0)),
        )

    def __call__(self, values: Values) -> Values:
        """The values with c_acc and c_ch added; the ratios are at their typical values where absent."""
        bare = Transistor.from_values({**values, "c_ch": 0.0, "c_acc": 1e-12})
        c_acc = np.asarray(values.get(ACCUMULATION_RATIO.name, 1.0)) * bare.c_gd(self.v_low)
        on_state = np.asarray(values.get(ON_STATE_RATIO.name, _RATIO)) * bare.c_iss(self.v_dd)
        c_ch = on_state - values["c_gs"] * (1.0 - np.asarray(bare.s_gs)) - c_acc
        # Towards 0 along a hyperbola: a sharp end there would leave the ratio's spread out of every interval.
        bend = _BEND * bare.c_iss(self.v_dd)
        return {**values, "c_acc": c_acc, "c_ch": 0.5 * (c_ch + np.sqrt(c_ch * c_ch + bend * bend))}

    def start(self, values: Values) -> dict[str, Value]:
        """Start values for a fit of Cacc and Cch: as assumed, Cch off its bound of 0."""
        every = dict(self({**values, "s_gs": BODY_SHARE}))
        every["c_ch"] = max(scalar(every["c_ch"]), 0.1 * scalar(every["c_gs"]))
        return every


def assumed_space(
    assumption: GateAssumption, space: ParameterSpace, coordinates: Array, covariance: Array
) -> tuple[ParameterSpace, Array, Array]:
    """Add the share of Cgs over the body and the two ratios, with the spread assumed of them: every interval shows it.

    Parameters
    ----------
    assumption : GateAssumption
        What Cacc and Cch follow from.
    space, coordinates, covariance
        Of the fit without Cacc and Cch.

    Returns
    -------
    space, coordinates, covariance
        With s_gs, on_state_ratio and accumulation_ratio added.
    """
    wider = np.zeros((coordinates.size + 3, coordinates.size + 3))
    wider[:-3, :-3] = covariance
    wider[range(-3, 0), range(-3, 0)] = (
        (BODY_SHARE_SPREAD / GATE["s_gs"].typical) ** 2, _SIGMA_RATIO**2, _SIGMA_ACCUMULATION**2,
    )  # fmt: skip
    fixed = {name: value for name, value in space.fixed.items() if name not in GATE_CHARGE_ONLY}
    free = (*space.free, GATE["s_gs"], ON_STATE_RATIO, ACCUMULATION_RATIO)
    return (
        ParameterSpace(free=free, fixed=fixed, complete=assumption),
        np.concatenate([coordinates, [BODY_SHARE / GATE["s_gs"].typical, math.log(_RATIO), 0.0]]),
        wider,
    )
