"""What a fit sees: blocks of residuals, each the points of one curve, one table value, or one prior.

A clicked point is off along both axes: `point` independently for every point, `axis` in common for a whole curve.
The independent part enters as an effective variance, sigma^2 = sigma_y^2 + g^2 sigma_x^2 with the curve's slope g
(J. Orear, Am. J. Phys. 50 (1982) 912). The common part is a nuisance parameter along each axis, in units of its
own standard deviation, with a residual of its own, so that it widens the intervals rather than biases the fit.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fitter.fitting.space import ParameterSpace, Values
from fitter.models.transistor import DEFINITIONS
from fitter.models.types import Numbers
from fitter.parameters import ParameterDefinition

__all__ = [
    "EXPECTED",
    "READ",
    "TABLE",
    "Block",
    "PathBlock",
    "PointsBlock",
    "ScalarBlock",
    "model_space",
    "nuisance",
]

Array = NDArray[np.float64]

#: Step of the slope, as a share of the points' spread along x.
_SLOPE_STEP = 1e-6
#: A point's true x is looked for within this many standard deviations of the clicked one.
_FARTHEST = 3.0


def nuisance(block: str, axis: str) -> ParameterDefinition:
    """Definition of the common shift of a block along an axis, in units of its standard deviation."""
    return ParameterDefinition(
        name=f"shift {axis} of {block}", unit="", meaning=f"axis placement of {block} along {axis}",
        lower=-50.0, upper=50.0, scale="linear",
    )  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class _Digitized:
    """What the two kinds of digitized curves share.

    Parameters
    ----------
    name : str
        Unique name.
    group : str
        Curves of one group share the widening for a misfit of the model's form.
    model_parameters : tuple of str
        Parameters of the model that the curve depends on.
    x, y : ndarray, shape (n,)
        Points in the axes' own coordinates: ln(value) on a log axis.
    sigma_x, sigma_y : ndarray, shape (n,)
        Standard deviation of each point along x and y, in the same coordinates.
    shift_x, shift_y : float
        Standard deviation of the common error along each axis; 0 leaves its nuisance parameter out.
    inflation : float
        Factor on the standard deviations for a misfit of the model's form; 1 where there is none.
    held : bool
        Whether that factor stays as it is, whatever the misfit.
    used : ndarray of bool, shape (n,)
        False for points that the fit leaves aside.
    """

    name: str
    group: str
    model_parameters: tuple[str, ...]
    x: Array
    y: Array
    sigma_x: Array
    sigma_y: Array
    shift_x: float = 0.0
    shift_y: float = 0.0
    inflation: float = 1.0
    held: bool = False
    used: NDArray[np.bool_] = field(default_factory=lambda: np.ones(0, dtype=bool))

    def __post_init__(self) -> None:
        if self.used.size != self.x.size:
            object.__setattr__(self, "used", np.ones(self.x.size, dtype=bool))

    @property
    def nuisances(self) -> tuple[str, ...]:
        """Names of the nuisance parameters."""
        return tuple(d.name for d in self.nuisance_definitions)

    @property
    def nuisance_definitions(self) -> tuple[ParameterDefinition, ...]:
        """Definitions of the nuisance parameters."""
        shifts = (("x", self.shift_x), ("y", self.shift_y))
        return tuple(nuisance(self.name, axis) for axis, sigma in shifts if sigma > 0.0)

    @property
    def parameters(self) -> tuple[str, ...]:
        """Model parameters and nuisance parameters."""
        return self.model_parameters + self.nuisances

    @property
    def points(self) -> int:
        """Number of points."""
        return int(self.x.size)

    @property
    def used_points(self) -> int:
        """Number of points that the fit does not leave aside."""
        return int(np.count_nonzero(self.used))

    def _shifts(self, values: Values) -> tuple[Numbers, Numbers]:
        """The common errors along x and y in the axes' coordinates."""
        along = [
            values[nuisance(self.name, axis).name] for axis, s in (("x", self.shift_x), ("y", self.shift_y)) if s > 0.0
        ]
        x = np.asarray(along.pop(0)) * self.shift_x if self.shift_x > 0.0 else np.zeros(())
        y = np.asarray(along.pop(0)) * self.shift_y if self.shift_y > 0.0 else np.zeros(())
        return x, y

    def _with_priors(self, residuals: Numbers, values: Values) -> Numbers:
        residuals = np.where(self.used, residuals / self.inflation, 0.0)
        priors = [np.asarray(values[name]) for name in self.nuisances]
        shape = np.broadcast_shapes((*residuals.shape[:-1], 1), *(np.shape(p) or (1,) for p in priors))
        rows = [np.broadcast_to(residuals, shape[:-1] + residuals.shape[-1:])]
        rows += [np.broadcast_to(p, shape) for p in priors]
        return np.concatenate(rows, axis=-1)


@dataclass(frozen=True, kw_only=True)
class PointsBlock(_Digitized):
    """A curve y(x) that the model gives at any x.

    Parameters
    ----------
    function : callable
        Takes values and x in its axis' coordinate, shape (..., m); returns y in its axis' coordinate.
    begins : float
        Lowest x, in the axis' coordinate, for which the model has a curve.
    looks : int
        How often a point's true x is looked for, by the tangent at the last one. 0 takes the slope at the clicked x:
        enough where the curve is nearly straight over a reading error.
    """

    function: Callable[[Values, Numbers], Numbers]
    begins: float = -np.inf
    looks: int = 0

    def curve(self, values: Values) -> tuple[Numbers, Numbers]:
        """The model and its slope at the clicked x, common errors applied, in the axes' coordinates."""
        shift_x, shift_y = self._shifts(values)
        here, slope = self._tangent(values, self.x - shift_x)
        return here + shift_y, slope

    def _tangent(self, values: Values, x: Numbers) -> tuple[Numbers, Numbers]:
        """The model and its slope at x; left of where it begins, along its tangent there."""
        inside = np.where(np.real(x) < self.begins, self.begins, x)
        step = _SLOPE_STEP * max(float(np.ptp(self.x)), 1e-9)
        both = self.function(values, np.concatenate([inside, inside + step], axis=-1))
        here, next_to_it = both[..., : self.x.size], both[..., self.x.size :]
        slope = (next_to_it - here) / step
        return here + slope * (x - inside), slope

    def deviations(self, values: Values) -> Numbers:
        """Distance of every point, used or not, in standard deviations of its reading error, shape (..., n)."""
        shift_x, shift_y = self._shifts(values)
        x, y = self.x - shift_x, self.y - shift_y
        at = x
        for look in range(self.looks + 1):
            model, slope = self._tangent(values, at)
            off = y - model - slope * (x - at)
            variance = self.sigma_y**2 + slope**2 * self.sigma_x**2
            if look < self.looks:
                moved = slope * off * self.sigma_x**2 / variance
                far = np.abs(np.real(moved)) > _FARTHEST * self.sigma_x
                at = x + np.where(far, _FARTHEST * self.sigma_x * np.sign(np.real(moved)), moved)
        return np.asarray(off / np.sqrt(variance))

    def fitted(self, values: Values) -> Numbers:
        """The model at every point's x, without the common errors, in the axis' coordinate, shape (..., n)."""
        return self.function(values, np.maximum(self.x, self.begins))

    def residuals(self, values: Values) -> Numbers:
        """Residuals and priors in standard deviations, shape (..., points + nuisances)."""
        return self._with_priors(self.deviations(values), values)


@dataclass(frozen=True, kw_only=True)
class PathBlock(_Digitized):
    """A curve that the model gives as a path of points (x, y), such as the gate charge.

    The residual is the distance from the path in standard deviations: along a straight stretch that is the same as the
    effective variance, and it has no step where a point passes from one stretch to the next.

    Parameters
    ----------
    function : callable
        Takes values, returns x and y of the path, each of shape (..., m), in the axes' coordinates.
    """

    function: Callable[[Values], tuple[Numbers, Numbers]]

    def deviations(self, values: Values) -> Numbers:
        """Distance of every point from the path in standard deviations, positive above it, shape (..., n)."""
        shift_x, shift_y = self._shifts(values)
        path_x, path_y = self.function(values)
        lead = np.broadcast_shapes(path_x.shape[:-1], np.shape(shift_x)[:-1], np.shape(shift_y)[:-1])
        path_x, path_y = (np.broadcast_to(p, (*lead, p.shape[-1])) for p in (path_x, path_y))
        x, y = (self.x - shift_x) + np.zeros((*lead, 1)), (self.y - shift_y) + np.zeros((*lead, 1))
        nearest = np.broadcast_to(self._nearest(x.real, y.real, path_x.real, path_y.real), (*lead, self.x.size))
        start = [np.take_along_axis(p, nearest, axis=-1) for p in (path_x, path_y)]
        stop = [np.take_along_axis(p, nearest + 1, axis=-1) for p in (path_x, path_y)]
        along_x, along_y = (stop[0] - start[0]) / self.sigma_x, (stop[1] - start[1]) / self.sigma_y
        off_x, off_y = (x - start[0]) / self.sigma_x, (y - start[1]) / self.sigma_y
        return np.asarray((off_y * along_x - off_x * along_y) / np.sqrt(along_x**2 + along_y**2))

    def fitted(self, values: Values) -> Numbers:
        """The path at every point's x, without the common errors, in the axis' coordinate, shape (n,)."""
        path_x, path_y = self.function(values)
        return np.asarray(np.interp(self.x, np.real(path_x), np.real(path_y)))

    def residuals(self, values: Values) -> Numbers:
        """Residuals and priors in standard deviations, shape (..., points + nuisances)."""
        return self._with_priors(self.deviations(values), values)

    def _nearest(self, x: Array, y: Array, path_x: Array, path_y: Array) -> NDArray[np.intp]:
        """Index of the stretch nearest to each point; all rows share their real parts, so the first one decides."""
        first = (0,) * (x.ndim - 1)
        x, y, path_x, path_y = (a[first] for a in (x, y, path_x, path_y))
        dx, dy = np.diff(path_x) / self.sigma_x[:, None], np.diff(path_y) / self.sigma_y[:, None]
        ox = (x[:, None] - path_x[:-1]) / self.sigma_x[:, None]
        oy = (y[:, None] - path_y[:-1]) / self.sigma_y[:, None]
        along = np.clip((ox * dx + oy * dy) / (dx**2 + dy**2 + 1e-300), 0.0, 1.0)
        return np.asarray(np.argmin((ox - along * dx) ** 2 + (oy - along * dy) ** 2, axis=-1))


@dataclass(frozen=True, kw_only=True)
class ScalarBlock:
    """One figure that the model gives and a table or an assumption states.

    Parameters
    ----------
    name : str
        Unique name; it ends in `TABLE`, `EXPECTED` or `READ`, which says where the figure comes from.
    parameters : tuple of str
        Parameters of the model that it depends on.
    function : callable
        Takes values, returns the model's figure, shape () or (k, 1).
    stated : float
        The stated figure, in the same unit.
    sigma : float
        Its standard deviation, likewise.
    """

    name: str
    parameters: tuple[str, ...]
    function: Callable[[Values], Numbers]
    stated: float
    sigma: float
    inflation: float = 1.0
    held: bool = False
    group: str = ""
    nuisances: tuple[str, ...] = ()
    nuisance_definitions: tuple[ParameterDefinition, ...] = ()
    points: int = 1
    used_points: int = 1

    def residuals(self, values: Values) -> Numbers:
        """One residual in standard deviations."""
        figure = np.asarray(self.function(values))
        residual = (self.stated - figure) / (self.sigma * self.inflation)
        return residual if residual.ndim else residual[None]


#: Residuals that belong together, in standard deviations: the data first, then the priors of its nuisance parameters.
Block = PointsBlock | PathBlock | ScalarBlock

#: How the name of a scalar block ends: a table value, what is expected before any point is seen, what was read off a
#: curve that another block holds.
TABLE, EXPECTED, READ = " (table)", " (expected)", " (read)"

#: Stand-ins for parameters on which none of a fit's blocks depends.
_UNSEEN = {
    "c_gs": 1e-12, "c_ch": 1e-9, "c_acc": 1e-12,
    "c0_gd": 1e-12, "phi_gd": 1.0, "m_gd": 0.5, "cf_gd": 1e-11,
    "c0_ds": 1e-12, "phi_ds": 1.0, "m_ds": 0.5, "cf_ds": 1e-11,
    "s_gs": 0.0, "v_th": 1.0, "k": 1.0, "w": 0.1, "lambda": 0.0, "alpha": 1.0, "r_s": 0.0, "r_d": 0.0,
}  # fmt: skip


def model_space(names: Sequence[str], fixed: Mapping[str, float], blocks: Sequence[Block]) -> ParameterSpace:
    """Space in which some parameters of the model and the nuisance parameters of some blocks are free.

    Parameters
    ----------
    names : sequence of str
        Free parameters of the model.
    fixed : mapping of str to float
        Values of the others [SI]; those on which no block depends may be absent.
    blocks : sequence of Block
        What will be fitted.

    Returns
    -------
    ParameterSpace
    """
    nuisances = [d for b in blocks for d in b.nuisance_definitions]
    held = {name: value for name, value in _UNSEEN.items() if name not in names}
    return ParameterSpace(free=(*(DEFINITIONS[name] for name in names), *nuisances), fixed={**held, **fixed})
