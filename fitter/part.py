"""What a part folder says, as read: one transistor's curves, table values and ratings.

All values are in SI, temperatures in degrees Celsius, and of the polarity of an n-channel part: for a p-channel
part the reader has reversed every voltage and current, so that nothing below needs to know the channel's type.
Arrays are read-only.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Literal

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "Axis",
    "Curve",
    "Notice",
    "Package",
    "Part",
    "Quantity",
    "Stated",
    "StatedBodyDiode",
    "StatedCapacitance",
    "StatedGateCharge",
    "StatedOnResistance",
    "StatedOutputCharge",
    "StatedThreshold",
    "StatedTransconductance",
    "StatedValues",
]

Array = NDArray[np.float64]
Load = Literal["current", "resistive"]


class Quantity(StrEnum):
    """What a digitized curve shows."""

    CISS = "ciss"
    COSS = "coss"
    CRSS = "crss"
    TRANSFER = "transfer"
    OUTPUT = "output"
    GATE_CHARGE = "gate_charge"
    BODY_DIODE = "body_diode"
    RDS_ON_TEMPERATURE = "rds_on_temperature"
    VGS_TH_TEMPERATURE = "vgs_th_temperature"


@dataclass(frozen=True, kw_only=True)
class Axis:
    """A printed axis.

    Parameters
    ----------
    scale : {"linear", "log"}
        How the axis is divided.
    start, end : float
        Its ends in SI, start < end; for a log axis both are positive.
    printed : bool
        False where the ends were taken from the data because the part folder does not give them.
    """

    scale: Literal["linear", "log"]
    start: float
    end: float
    printed: bool = True

    @property
    def length(self) -> float:
        """Length in the axis' own coordinate: ln(end/start) on a log axis, end - start [SI] on a linear one."""
        return math.log(self.end / self.start) if self.scale == "log" else self.end - self.start


@dataclass(frozen=True, kw_only=True)
class Curve:
    """One digitized curve.

    Parameters
    ----------
    quantity : Quantity
        What it shows; x and y follow from it: VDS [V] and C [F]; VGS [V] and ID [A] (transfer); VDS [V] and
        ID [A] (output); QG [C] and VGS [V] (gate_charge); VSD [V] and IS [A] (body_diode); Tj [degC] and
        RDS(on) [ohm] or its ratio to 25 C; Tj [degC] and VGS(th) [V].
    name : str
        Unique within the part, such as ``crss`` or ``transfer 25 C``.
    file : str
        The CSV file inside the part folder.
    x, y : ndarray, shape (n,)
        Points in SI, in rising order of x.
    lines : ndarray of int, shape (n,)
        Line of each point in the file, counted from 1.
    x_column, y_column : str
        The columns' header texts.
    x_axis, y_axis : Axis
        The printed axes.
    point_error, axis_error : float
        1-sigma reading errors as a share of the axis' length.
    y_unit : str
        SI unit of y; ``""`` where y is a ratio.
    v_gs, v_ds, t_j, v_dd, i_d, frequency, load
        The conditions that belong to the quantity, in SI [V, V, degC, V, A, Hz]; None where they do not.
    """

    quantity: Quantity
    name: str
    file: str
    x: Array
    y: Array
    lines: NDArray[np.int64]
    x_column: str
    y_column: str
    x_axis: Axis
    y_axis: Axis
    point_error: float
    axis_error: float
    x_unit: str
    y_unit: str
    v_gs: float | None = None
    v_ds: float | None = None
    t_j: float | None = None
    v_dd: float | None = None
    i_d: float | None = None
    frequency: float | None = None
    load: Load | None = None


@dataclass(frozen=True, kw_only=True)
class Stated:
    """A table value in SI; any of the three may be None, not all."""

    min: float | None = None
    typ: float | None = None
    max: float | None = None


@dataclass(frozen=True, kw_only=True)
class StatedGateCharge:
    """Table of the gate-charge test: VDD [V], ID [A], VGS at the end [V]; charges [C], plateau [V]."""

    v_dd: float
    i_d: float
    v_gs: float
    load: Load = "current"
    q_g: Stated | None = None
    q_gs: Stated | None = None
    q_gd: Stated | None = None
    v_plateau: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedCapacitance:
    """Capacitances [F] at VDS [V], VGS = 0."""

    v_ds: float
    c_iss: Stated | None = None
    c_oss: Stated | None = None
    c_rss: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedThreshold:
    """VGS(th) [V] at ID [A], gate joined to drain."""

    i_d: float
    v_gs_th: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedOnResistance:
    """RDS(on) [ohm] at VGS [V] and ID [A]."""

    v_gs: float
    i_d: float
    r_ds_on: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedTransconductance:
    """Forward transconductance gfs [S] at VDS [V] and ID [A]."""

    v_ds: float
    i_d: float
    g_fs: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedOutputCharge:
    """Qoss [C], Eoss [J] and effective output capacitances [F], energy and time related, from 0 to VDS [V]."""

    v_ds: float
    q_oss: Stated | None = None
    e_oss: Stated | None = None
    c_oss_er: Stated | None = None
    c_oss_tr: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedBodyDiode:
    """VSD [V] at IS [A]; QRR [C] and tRR [s] at IF [A] and dI/dt [A/s]."""

    i_s: float | None = None
    v_sd: Stated | None = None
    i_f: float | None = None
    di_dt: float | None = None
    q_rr: Stated | None = None
    t_rr: Stated | None = None


@dataclass(frozen=True, kw_only=True)
class StatedValues:
    """All table values of a part; a group that is not given is None."""

    gate_charge: StatedGateCharge | None = None
    capacitance: StatedCapacitance | None = None
    threshold: StatedThreshold | None = None
    on_resistance: StatedOnResistance | None = None
    transconductance: StatedTransconductance | None = None
    output_charge: StatedOutputCharge | None = None
    body_diode: StatedBodyDiode | None = None


@dataclass(frozen=True, kw_only=True)
class Package:
    """Internal gate resistance [ohm] and lead inductances [H]; None where not given."""

    r_g: float | None = None
    l_g: float | None = None
    l_d: float | None = None
    l_s: float | None = None


@dataclass(frozen=True, kw_only=True)
class Notice:
    """Something the user should know; nothing stops for it.

    Parameters
    ----------
    topic : str
        What it is about: a curve's name, a table value, a parameter.
    text : str
        The whole sentence.
    """

    topic: str
    text: str


@dataclass(frozen=True, kw_only=True)
class Part:
    """One transistor as its part folder describes it.

    Parameters
    ----------
    name : str
        A letter, then letters, digits, underscores; at most 32.
    channel : {"n", "p"}
        The channel's type. Values below are of n-channel polarity either way.
    v_ds_max, v_gs_max : float
        Ratings [V].
    notes : str
        Free text.
    package : Package
        Internal gate resistance and lead inductances.
    curves : tuple of Curve
        In the order of the part file.
    stated : StatedValues
        Table values.
    digests : mapping of str to str
        SHA-256 (hex) of every input file by its name inside the folder.
    notices : tuple of Notice
        What the reader assumed or found worth saying.
    """

    name: str
    channel: Literal["n", "p"]
    v_ds_max: float
    v_gs_max: float
    notes: str = ""
    package: Package = field(default_factory=Package)
    curves: tuple[Curve, ...] = ()
    stated: StatedValues = field(default_factory=StatedValues)
    digests: Mapping[str, str] = field(default_factory=dict)
    notices: tuple[Notice, ...] = ()

    def curves_of(self, quantity: Quantity) -> tuple[Curve, ...]:
        """The curves of one quantity, in the order of the part file; empty where there are none."""
        return tuple(curve for curve in self.curves if curve.quantity is quantity)

    @property
    def supply(self) -> float:
        """VDD of the gate-charge test, or half the voltage rating where none is stated [V]."""
        table = self.stated.gate_charge
        return 0.5 * self.v_ds_max if table is None else table.v_dd

    @property
    def highest_v_ds(self) -> float:
        """Highest VDS at which a drain current was digitized; 0 where none was [V]."""
        transfer, output = self.curves_of(Quantity.TRANSFER), self.curves_of(Quantity.OUTPUT)
        return max([c.v_ds or 0.0 for c in transfer] + [float(c.x[-1]) for c in output], default=0.0)
