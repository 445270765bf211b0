"""Unit names: from the printed unit to SI on the way in, and to readable figures on the way out.

Everything between the reader and the writers is in SI, temperatures in degrees Celsius.
"""

from __future__ import annotations

import math

from fitter.errors import UnitError

__all__ = ["PREFIXES", "engineering", "si_factor"]

PREFIXES = {"p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "": 1.0, "k": 1e3, "M": 1e6}
_ENGINEERING = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}


def si_factor(unit: str, base: str) -> float:
    """Factor that turns a figure in `unit` into one in the SI unit `base`.

    Parameters
    ----------
    unit : str
        A base unit with an optional prefix of p n u m k M, as in ``pF``; case counts (``mohm``, ``Mohm``).
    base : str
        The unit expected: V, A, F, C, S, ohm, J, s, H, Hz, A/s (written ``A_per_us`` and the like) or degC
        (written ``C``, without prefix).

    Returns
    -------
    float
        The factor [base per unit].

    Raises
    ------
    UnitError
        Where `unit` is not `base` with a known prefix.

    Examples
    --------
    >>> si_factor("nC", "C"), si_factor("C", "degC"), si_factor("A_per_us", "A/s")
    (1e-09, 1.0, 1000000.0)
    """
    if base == "degC":
        if unit == "C":
            return 1.0
    elif base == "A/s":
        current, per, time = unit.partition("_per_")
        if per:
            return si_factor(current, "A") / si_factor(time, "s")
    elif unit.endswith(base) and unit[: -len(base)] in PREFIXES:
        return PREFIXES[unit[: -len(base)]]
    spelled = {"degC": "'C' (degrees Celsius)", "A/s": "such as 'A_per_us'"}.get(base)
    raise UnitError(f"unit '{unit}' is not {spelled or f'{base!r} with one of the prefixes p n u m k M'}")


#: Magnitudes that have a prefix.
_LEAST_PREFIX, _MOST_PREFIX = 1e-15, 1e12


def engineering(value: float, unit: str, digits: int = 3) -> str:
    """A figure with an SI prefix, for people.

    Parameters
    ----------
    value : float
        In SI [unit].
    unit : str
        SI unit; a pure number, and a unit such as 1/V, get no prefix.
    digits : int
        Significant digits.

    Returns
    -------
    str
        Such as ``62.8 nC``.

    Examples
    --------
    >>> engineering(6.284e-8, "C"), engineering(4.6e-10, "F", 2), engineering(0.0, "V"), engineering(0.5, "")
    ('62.8 nC', '460 pF', '0 V', '0.5')
    """
    if not math.isfinite(value):
        return f"{value} {unit}".strip()
    if not unit or unit.startswith("1") or value == 0.0:
        return f"{value:.{digits}g} {unit}".strip()
    rounded = float(f"{value:.{digits}g}")
    if not _LEAST_PREFIX <= abs(rounded) < _MOST_PREFIX:
        return f"{value:.{digits}g} {unit}"
    exponent = min(max(3 * math.floor(math.log10(abs(rounded)) / 3), -15), 9)
    figure = f"{rounded / 10.0**exponent:.{digits}g}"
    if "e" in figure and 1.0 <= abs(rounded) / 10.0**exponent < 1000.0:
        figure = f"{rounded / 10.0**exponent:.0f}"
    return f"{figure} {_ENGINEERING[exponent]}{unit}"
