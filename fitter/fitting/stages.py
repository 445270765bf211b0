"""Parts of the fit that can be done one after the other: the channel, its temperature laws, the body diode."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from fitter.errors import FitError
from fitter.fitting import observations, start_values
from fitter.fitting.assumptions import GATE_CHARGE_ONLY, GateAssumption
from fitter.fitting.blocks import Block, model_space
from fitter.fitting.misfit import widening
from fitter.fitting.outliers import Outlier, set_aside
from fitter.fitting.solve import Solution, solve
from fitter.fitting.space import Values
from fitter.models.channel import CHANNEL
from fitter.models.diode import BODY_DIODE, transit_time_from_charge, transit_time_from_time
from fitter.models.temperature import TEMPERATURE
from fitter.models.transistor import DEFINITIONS
from fitter.models.types import scalar
from fitter.part import Part, Quantity

__all__ = [
    "UNSEEN_CHANNEL",
    "Stage",
    "fit_body_diode",
    "fit_channel",
    "fit_gate_charge",
    "fit_temperature",
    "recovery_transit_time",
]

#: How much farther from its points the transfer curve may come to lie for the sake of output curves.
_WORSE = 1.25
#: Factors on the output curves' standard deviations that are tried for that.
_OUTPUT_WIDENINGS = (1.0, 4.0, 12.0, 36.0, 100.0)

#: What is assumed of temperature laws that no curve given shows. Threshold: over ten datasheets -2.6 to
#: -10 mV/C. Gain factor: mobility that phonons limit, T^-1.5. Drain resistance: RDS(on) at 150 C over 25 C is 2.3
#: to 2.4
#: for superjunction parts, 1.2 to 1.9 for silicon carbide ones.
_ASSUMED_LAWS = {"vth_tc": -6e-3, "k_exponent": 1.5, "rd_exponent": 2.0, "w_exponent": 1.0}
#: What is taken of the channel where no curve given shows it. Bulk-charge factor: over devices built from doping and
#: oxides, with output curves, it came out between 1.3 and 3.9.
UNSEEN_CHANNEL = {"alpha": 2.0, "lambda": 0.0, "r_d": 0.0}
#: Silicon's and silicon carbide's band gap [V]: what the activation energy is taken as where no hot curve shows it.
_SILICON, _SILICON_CARBIDE = 1.12, 3.23
#: A junction that drops more than this at a small current [V] is not silicon.
_MORE_THAN_SILICON = 1.5


@dataclass(frozen=True, kw_only=True)
class Stage:
    """What one stage of the fit hands on.

    Parameters
    ----------
    blocks : tuple of Block
        With mis-clicked points marked.
    free : tuple of str
        Free parameters.
    fixed : mapping of str to float
        Fixed parameters [SI].
    outliers : tuple of Outlier
        Points set aside.
    solution : Solution
        The stage's fit.
    """

    blocks: tuple[Block, ...]
    free: tuple[str, ...]
    fixed: Mapping[str, float]
    outliers: tuple[Outlier, ...]
    solution: Solution


def fit_channel(part: Part) -> Stage:
    """The channel alone, led by the transfer curve: that is what sets the plateau.

    Where the square law fits all curves, output curves count in full. Where it does not (carriers that reach their
    saturation velocity, say), they count as much as can be without the transfer curve being met much worse for it.
    """
    blocks = observations.channel_blocks(part)
    outputs = [block for block in blocks if block.group == Quantity.OUTPUT]
    leading = [block for block in blocks if block.group != Quantity.OUTPUT]
    begin = start_values.carrying(start_values.channel_start(part), part)
    start: Values = {CHANNEL[field].name: value for field, value in begin.items()}
    fixed = dict(UNSEEN_CHANNEL)
    if "rds_on (table)" in {block.name for block in blocks}:
        del fixed["r_d"]
    free = tuple(d.name for d in CHANNEL.values() if d.name not in fixed)
    rough = solve(leading, model_space(free, fixed, leading), start, robust=True, rough=True)
    marked, outliers = set_aside(rough)
    solution = solve(marked, model_space(free, fixed, marked), rough.values, rough=True)
    if not outputs:
        return Stage(blocks=marked, free=free, fixed=fixed, outliers=outliers, solution=solution)

    allowed = _WORSE * widening(solution, Quantity.TRANSFER)
    free = tuple(d.name for d in CHANNEL.values())
    start = {**UNSEEN_CHANNEL, **solution.values, "lambda": 1e-3}
    every = (*marked, *outputs, observations.modulation_block(part))
    rough = solve(every, model_space(free, {}, every), start, robust=True, rough=True)
    marked, outliers = set_aside(rough)
    start = rough.values
    for weight in _OUTPUT_WIDENINGS:
        weighed = tuple(replace(b, inflation=weight) if b.group == Quantity.OUTPUT else b for b in marked)
        solution = solve(weighed, model_space(free, {}, weighed), start, rough=True)
        found = widening(solution, Quantity.TRANSFER)
        if found <= allowed:
            break
        start = solution.values
    if weight > 1.0:
        # The balance between the two kinds of curve stays as it was found, or each would give way to the other in turn.
        factors = {Quantity.TRANSFER: found, Quantity.OUTPUT: weight * found}
        weighed = tuple(
            replace(b, inflation=factors[Quantity(b.group)], held=True) if b.group in factors else b for b in weighed
        )
    return Stage(blocks=weighed, free=free, fixed={}, outliers=outliers, solution=solution)


def fit_temperature(part: Part, channel: Stage) -> Stage | None:
    """The temperature laws, with the channel at 25 degC as it was found; None where nothing hot is given.

    Parameters
    ----------
    part : Part
        The data.
    channel : Stage
        As from `fit_channel`.

    Returns
    -------
    Stage or None
    """
    blocks = observations.hot_blocks(part)
    if not blocks:
        return None
    groups = {block.group for block in blocks}
    seen = set()
    if groups & {observations.HOT_TRANSFER, observations.HOT_OUTPUT}:
        seen |= {"vth_tc", "k_exponent"}
    if Quantity.VGS_TH_TEMPERATURE in groups:
        # Far below the currents of a transfer curve: the two together show the bend between them.
        seen |= {"vth_tc", "w_exponent"} if seen else {"vth_tc"}
    if Quantity.RDS_ON_TEMPERATURE in groups:
        seen.add("rd_exponent")
    free = tuple(d.name for d in TEMPERATURE.values() if d.name in seen)
    fixed = {name: value for name, value in _ASSUMED_LAWS.items() if name not in seen}
    held = {**channel.fixed, **{name: scalar(channel.solution.values[name]) for name in channel.free}, **fixed}
    rough = solve(blocks, model_space(free, held, blocks), _ASSUMED_LAWS, robust=True, rough=True)
    marked, outliers = set_aside(rough)
    solution = solve(marked, model_space(free, held, marked), rough.values, rough=True)
    return Stage(blocks=marked, free=free, fixed=fixed, outliers=outliers, solution=solution)


def fit_gate_charge(part: Part, found: Values, untold: Sequence[str]) -> Stage:
    """What only the gate charge shows (Cacc, Cch, the share of Cgs over the body), with all else held as found.

    Parameters
    ----------
    part : Part
        The data.
    found : mapping of str to float
        Every other parameter of the model.
    untold : sequence of str
        Parameters that the other data leave fixed and the slope of a digitized plateau shows: lambda.

    Returns
    -------
    Stage

    Raises
    ------
    FitError
        Where there are no gate-charge data, or the channel found cannot carry the test's current.
    """
    blocks = observations.gate_charge_blocks(part)
    if not blocks:
        raise FitError(
            "there are no gate-charge data to fit: digitize a gate_charge curve or state qg, qgs and qgd, or fit "
            "without --use-gate-charge"
        )
    told = tuple(untold) if part.curves_of(Quantity.GATE_CHARGE) else ()
    blocks += [observations.modulation_block(part)] if "lambda" in told else []
    free = (*GATE_CHARGE_ONLY, *told)
    start = GateAssumption.of(part).start(found)
    held = {name: scalar(value) for name, value in start.items() if name in DEFINITIONS and name not in free}
    rough = solve(blocks, model_space(free, held, blocks), start, robust=True, rough=True)
    marked, outliers = set_aside(rough)
    return Stage(blocks=marked, free=free, fixed={}, outliers=outliers, solution=rough)


def recovery_transit_time(part: Part) -> tuple[float, float] | None:
    """The body diode's transit time from the stated QRR or, without it, tRR, with its standard error.

    Parameters
    ----------
    part : Part
        With QRR or tRR, and the IF and dI/dt they were measured at.

    Returns
    -------
    value, standard_error : float
        [s]; None where neither is stated.
    """
    table = part.stated.body_diode
    if table is None or table.i_f is None or table.di_dt is None:
        return None
    for stated, solve_for in ((table.q_rr, transit_time_from_charge), (table.t_rr, transit_time_from_time)):
        if stated is not None and stated.typ:
            error = observations.TABLE_ERROR["recovery"]
            low, value, high = (
                solve_for(stated.typ * factor, table.i_f, table.di_dt) for factor in (1.0 - error, 1.0, 1.0 + error)
            )
            return value, 0.5 * (high - low)
    return None


def fit_body_diode(part: Part) -> Stage | None:
    """The body diode from its forward curves, or from the stated VSD alone; None where neither is given.

    Parameters
    ----------
    part : Part
        The data.

    Returns
    -------
    Stage or None
    """
    blocks = observations.body_diode_blocks(part)
    if not blocks:
        return None
    begin = start_values.body_diode_start(part)
    start = {BODY_DIODE[field].name: value for field, value in begin.items()}
    fixed: dict[str, float] = {}
    if not any(block.group == observations.HOT_DIODE for block in blocks):
        wide = start_values.small_current_drop(part) > _MORE_THAN_SILICON
        fixed = {"eg_d": _SILICON_CARBIDE if wide else _SILICON, "rdio_exponent": 0.0}
    if not any(block.group == Quantity.BODY_DIODE for block in blocks):
        fixed |= {"n_d": 1.1, "r_dio": 0.0}
    free = tuple(d.name for d in BODY_DIODE.values() if d.name not in fixed)
    rough = solve(blocks, model_space(free, fixed, blocks), start, robust=True, rough=True)
    marked, outliers = set_aside(rough)
    solution = solve(marked, model_space(free, fixed, marked), rough.values, rough=True)
    return Stage(blocks=marked, free=free, fixed=fixed, outliers=outliers, solution=solution)
