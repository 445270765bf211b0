"""What a part folder may say: the figures of each table and curve, their units, signs and limits.

The readers of TOML and CSV go by these tables; a new figure or curve quantity is entered here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

from fitter.part import (
    Quantity,
    StatedBodyDiode,
    StatedCapacitance,
    StatedGateCharge,
    StatedOnResistance,
    StatedOutputCharge,
    StatedThreshold,
    StatedTransconductance,
)
from fitter.units import engineering

__all__ = [
    "COLUMNS",
    "CONDITIONS",
    "CURVES",
    "LIMITS",
    "PACKAGE",
    "RATINGS",
    "STATED",
    "Condition",
    "CurveSchema",
    "Figure",
    "Limits",
    "StatedSchema",
    "excess",
    "expectation",
]


@dataclass(frozen=True)
class Limits:
    """Magnitudes beyond which a figure is a slip of the pen on any transistor.

    Parameters
    ----------
    noun : str
        What is measured in the unit, with its article.
    smallest, largest : float
        In SI; for temperatures the range itself [degC].
    """

    noun: str
    smallest: float
    largest: float


LIMITS: Mapping[str, Limits] = {
    "V": Limits("a voltage", 1e-3, 1e5),
    "A": Limits("a current", 1e-9, 1e5),
    "F": Limits("a capacitance", 1e-15, 1e-5),
    "C": Limits("a charge", 1e-13, 1e-2),
    "S": Limits("a conductance", 1e-3, 1e6),
    "ohm": Limits("a resistance", 1e-6, 1e6),
    "J": Limits("an energy", 1e-12, 1e2),
    "s": Limits("a time", 1e-12, 1.0),
    "H": Limits("an inductance", 1e-13, 1e-5),
    "Hz": Limits("a frequency", 1.0, 1e9),
    "A/s": Limits("a rate of change of current", 1e3, 1e13),
    "degC": Limits("a temperature", -100.0, 500.0),
    "": Limits("a ratio", 1e-2, 1e2),
}

Sign = Literal["positive", "not negative", "any", "magnitude"]


@dataclass(frozen=True)
class Figure:
    """A number with a unit: a key of a TOML table, or a column of a CSV file.

    Parameters
    ----------
    symbol : str
        The key or column name without its unit.
    name : str
        The attribute that holds it in the part's dataclasses.
    unit : str
        The unit that messages suggest.
    base : str
        Its SI unit.
    meaning : str
        In words.
    sign : {"positive", "not negative", "any", "magnitude"}
        What an n-channel part may have; the last takes either sign and drops it.
    """

    symbol: str
    name: str
    unit: str
    base: str
    meaning: str
    sign: Sign = "positive"

    @property
    def key(self) -> str:
        """The whole key or column name, with the suggested unit."""
        return f"{self.symbol}_{self.unit}"

    @property
    def polar(self) -> bool:
        """Whether a p-channel part has it reversed."""
        return self.base in ("V", "A", "C")


def excess(figure: Figure, value: float) -> bool:
    """Whether a single figure [SI], not a point of a curve, has a sign or size that it cannot have."""
    limits = LIMITS[figure.base]
    if figure.base == "degC":
        return not limits.smallest <= value <= limits.largest
    if value == 0.0:
        return figure.sign == "positive" or figure.sign == "magnitude"
    if value < 0.0 and figure.sign in ("positive", "not negative"):
        return True
    return not limits.smallest <= abs(value) <= limits.largest


def expectation(figure: Figure) -> str:
    """Say what a figure must be, for a message."""
    limits = LIMITS[figure.base]
    if figure.base == "degC":
        return f"expected {limits.noun} from {limits.smallest:g} to {limits.largest:g} C ({figure.meaning})"
    low, high = (engineering(end, figure.base) for end in (limits.smallest, limits.largest))
    zero = "zero or " if figure.sign == "not negative" else ""
    return f"expected {zero}{limits.noun} from {low} to {high} ({figure.meaning})"


RATINGS = (
    Figure("vds_max", "v_ds_max", "V", "V", "rated drain-source voltage"),
    Figure("vgs_max", "v_gs_max", "V", "V", "rated gate-source voltage"),
)

PACKAGE = (
    Figure("rg", "r_g", "ohm", "ohm", "internal gate resistance", "not negative"),
    Figure("lg", "l_g", "nH", "H", "gate lead inductance", "not negative"),
    Figure("ld", "l_d", "nH", "H", "drain lead inductance", "not negative"),
    Figure("ls", "l_s", "nH", "H", "source lead inductance", "not negative"),
)


@dataclass(frozen=True, kw_only=True)
class Condition:
    """A condition of a curve.

    Parameters
    ----------
    figure : Figure
        The condition.
    default : float or None
        In SI; None where there is no honest default.
    stated_in : str
        The stated group whose own condition is taken where the curve has none; empty where there is none.
    """

    figure: Figure
    default: float | None = None
    stated_in: str = ""


@dataclass(frozen=True, kw_only=True)
class CurveSchema:
    """What belongs to a curve quantity: its columns and its conditions.

    Parameters
    ----------
    x, y : Figure
        The columns. "not negative" says that points may lie below zero by a reading error only.
    conditions : tuple of Condition
        In the order in which messages name them.
    title : str
        Begins the curve's name.
    has_load : bool
        Whether the kind of load is a condition too.
    """

    x: Figure
    y: Figure
    conditions: tuple[Condition, ...]
    title: str
    has_load: bool = False


_V_GS = Figure("vgs", "v_gs", "V", "V", "gate-source voltage of the curve")
_V_GS_ANY = Figure("vgs", "v_gs", "V", "V", "gate-source voltage of the curve", "any")
_V_DS = Figure("vds", "v_ds", "V", "V", "drain-source voltage of the curve")
_V_DD = Figure("vdd", "v_dd", "V", "V", "supply voltage of the gate-charge test")
_I_D = Figure("id", "i_d", "A", "A", "drain current of the curve")
_T_J = Figure("tj", "t_j", "C", "degC", "junction temperature of the curve", "any")
_FREQUENCY = Figure("frequency", "frequency", "MHz", "Hz", "measuring frequency")

CONDITIONS = (_V_GS, _V_DS, _V_DD, _I_D, _T_J, _FREQUENCY)

_X_VDS = Figure("vds", "v_ds", "V", "V", "drain-source voltage", "not negative")
_X_VGS = Figure("vgs", "v_gs", "V", "V", "gate-source voltage", "any")
_X_QG = Figure("qg", "q_g", "nC", "C", "gate charge", "not negative")
_X_VSD = Figure("vsd", "v_sd", "V", "V", "source-drain voltage", "not negative")
_X_TJ = Figure("tj", "t_j", "C", "degC", "junction temperature", "any")
_Y_CISS = Figure("ciss", "c_iss", "pF", "F", "input capacitance")
_Y_COSS = Figure("coss", "c_oss", "pF", "F", "output capacitance")
_Y_CRSS = Figure("crss", "c_rss", "pF", "F", "reverse transfer capacitance")
_Y_ID = Figure("id", "i_d", "A", "A", "drain current", "not negative")
_Y_IS = Figure("is", "i_s", "A", "A", "source current", "not negative")
_Y_RDS_ON = Figure("rds_on", "r_ds_on", "mohm", "ohm", "on-resistance")
_Y_VGS_TH = Figure("vgs_th", "v_gs_th", "V", "V", "threshold voltage", "any")

COLUMNS = (
    _X_VDS,
    _X_VGS,
    _X_QG,
    _X_VSD,
    _X_TJ,
    _Y_CISS,
    _Y_COSS,
    _Y_CRSS,
    _Y_ID,
    _Y_IS,
    _Y_RDS_ON,
    _Y_VGS_TH,
)

_AT_ROOM = Condition(figure=_T_J, default=25.0)
_CAPACITANCE = (Condition(figure=_V_GS_ANY, default=0.0), Condition(figure=_FREQUENCY, default=1e6))

CURVES: Mapping[Quantity, CurveSchema] = {
    Quantity.CISS: CurveSchema(x=_X_VDS, y=_Y_CISS, conditions=_CAPACITANCE, title="ciss"),
    Quantity.COSS: CurveSchema(x=_X_VDS, y=_Y_COSS, conditions=_CAPACITANCE, title="coss"),
    Quantity.CRSS: CurveSchema(x=_X_VDS, y=_Y_CRSS, conditions=_CAPACITANCE, title="crss"),
    Quantity.TRANSFER: CurveSchema(x=_X_VGS, y=_Y_ID, conditions=(Condition(figure=_V_DS), _AT_ROOM), title="transfer"),
    Quantity.OUTPUT: CurveSchema(x=_X_VDS, y=_Y_ID, conditions=(Condition(figure=_V_GS), _AT_ROOM), title="output"),
    Quantity.GATE_CHARGE: CurveSchema(
        x=_X_QG,
        y=_X_VGS,
        conditions=(
            Condition(figure=_V_DD, stated_in="gate_charge"),
            Condition(figure=_I_D, stated_in="gate_charge"),
        ),
        title="gate charge",
        has_load=True,
    ),
    Quantity.BODY_DIODE: CurveSchema(
        x=_X_VSD,
        y=_Y_IS,
        conditions=(_AT_ROOM, Condition(figure=_V_GS_ANY, default=0.0)),
        title="body diode",
    ),
    Quantity.RDS_ON_TEMPERATURE: CurveSchema(
        x=_X_TJ,
        y=_Y_RDS_ON,
        conditions=(
            Condition(figure=_I_D, stated_in="on_resistance"),
            Condition(figure=_V_GS, stated_in="on_resistance"),
        ),
        title="rds_on(Tj)",
    ),
    Quantity.VGS_TH_TEMPERATURE: CurveSchema(
        x=_X_TJ,
        y=_Y_VGS_TH,
        conditions=(Condition(figure=_I_D, stated_in="threshold"),),
        title="vgs_th(Tj)",
    ),
}


@dataclass(frozen=True, kw_only=True)
class StatedSchema:
    """What belongs to a group of table values.

    Parameters
    ----------
    build : type
        The dataclass that holds the group.
    conditions, values : tuple of Figure
        The group's figures.
    needs : mapping of str to tuple of str
        By value symbol, the condition symbols that it cannot be understood without. Values that are not named
        here need all conditions, and then so does the group.
    has_load : bool
        Whether the kind of load is a condition too.
    """

    build: type[Any]
    conditions: tuple[Figure, ...]
    values: tuple[Figure, ...]
    needs: Mapping[str, tuple[str, ...]] | None = None
    has_load: bool = False


def _at(symbol: str, name: str, unit: str, base: str, meaning: str, sign: Sign = "positive") -> Figure:
    return Figure(symbol, name, unit, base, f"{meaning} at which the table gives its values", sign)


_AT_VDS = _at("vds", "v_ds", "V", "V", "drain-source voltage")
_AT_VGS = _at("vgs", "v_gs", "V", "V", "gate-source voltage")
_AT_ID = _at("id", "i_d", "A", "A", "drain current")

STATED: Mapping[str, StatedSchema] = {
    "gate_charge": StatedSchema(
        build=StatedGateCharge,
        conditions=(_at("vdd", "v_dd", "V", "V", "supply voltage"), _AT_ID, _AT_VGS),
        values=(
            Figure("qg", "q_g", "nC", "C", "total gate charge"),
            Figure("qgs", "q_gs", "nC", "C", "gate-source charge"),
            Figure("qgd", "q_gd", "nC", "C", "gate-drain charge"),
            Figure("v_plateau", "v_plateau", "V", "V", "plateau voltage"),
        ),
        has_load=True,
    ),
    "capacitance": StatedSchema(
        build=StatedCapacitance,
        conditions=(_AT_VDS,),
        values=(_Y_CISS, _Y_COSS, _Y_CRSS),
    ),
    "threshold": StatedSchema(
        build=StatedThreshold,
        conditions=(_at("id", "i_d", "mA", "A", "drain current"),),
        values=(Figure("vgs_th", "v_gs_th", "V", "V", "threshold voltage"),),
    ),
    "on_resistance": StatedSchema(
        build=StatedOnResistance,
        conditions=(_AT_VGS, _AT_ID),
        values=(_Y_RDS_ON,),
    ),
    "transconductance": StatedSchema(
        build=StatedTransconductance,
        conditions=(_AT_VDS, _AT_ID),
        values=(Figure("gfs", "g_fs", "S", "S", "forward transconductance"),),
    ),
    "output_charge": StatedSchema(
        build=StatedOutputCharge,
        conditions=(_AT_VDS,),
        values=(
            Figure("qoss", "q_oss", "nC", "C", "output charge"),
            Figure("eoss", "e_oss", "uJ", "J", "energy stored in the output capacitance"),
            Figure("coss_er", "c_oss_er", "pF", "F", "energy-related output capacitance"),
            Figure("coss_tr", "c_oss_tr", "pF", "F", "time-related output capacitance"),
        ),
    ),
    "body_diode": StatedSchema(
        build=StatedBodyDiode,
        conditions=(
            _at("is", "i_s", "A", "A", "source current"),
            _at("if", "i_f", "A", "A", "forward current"),
            _at("di_dt", "di_dt", "A_per_us", "A/s", "rate of change of current", "magnitude"),
        ),
        values=(
            Figure("vsd", "v_sd", "V", "V", "diode forward voltage"),
            Figure("qrr", "q_rr", "nC", "C", "reverse recovery charge"),
            Figure("trr", "t_rr", "ns", "s", "reverse recovery time"),
        ),
        needs={"vsd": ("is",), "qrr": ("if", "di_dt"), "trr": ("if", "di_dt")},
    ),
}
