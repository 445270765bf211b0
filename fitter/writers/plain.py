"""Dataclasses as plain data and back: what comes back is checked against the types the classes declare."""

from __future__ import annotations

import math
import types
from collections.abc import Mapping
from dataclasses import MISSING, fields, is_dataclass
from typing import Any, Literal, TypeVar, Union, get_args, get_origin, get_type_hints

from fitter.errors import ModelFileError

__all__ = ["from_plain", "to_plain"]

T = TypeVar("T")

_LONGEST_TEXT = 4000
_MOST_ITEMS = 20000
_LARGEST_WHOLE = 10**300


def to_plain(value: Any, leave_out: tuple[str, ...] = ()) -> Any:  # noqa: ANN401
    """A dataclass, tuple or mapping as dicts, lists, numbers and texts.

    Parameters
    ----------
    value : object
        What to turn.
    leave_out : tuple of str
        Fields of the outermost dataclass to leave out.
    """
    if is_dataclass(value):
        return {f.name: to_plain(getattr(value, f.name)) for f in fields(value) if f.name not in leave_out}
    if isinstance(value, Mapping):
        return {key: to_plain(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [to_plain(item) for item in value]
    return value


def from_plain(kind: type[T], data: object, where: str) -> T:
    """Plain data as an instance of a type, checked all the way down.

    Parameters
    ----------
    kind : type
        A dataclass, or one of the types its fields may have.
    data : object
        As from a JSON file.
    where : str
        Place in the file, for messages.

    Returns
    -------
    object
        Of that type.

    Raises
    ------
    ModelFileError
        Where the data are not of that type: a missing or unknown key, a wrong kind of value, a number that is not
        finite.
    """
    return _from_plain(kind, data, where)  # type: ignore[no-any-return]


def _from_plain(kind: Any, data: Any, where: str) -> Any:  # noqa: ANN401
    origin, arguments = get_origin(kind), get_args(kind)
    if origin in (Union, types.UnionType):
        if data is None and type(None) in arguments:
            return None
        others = [a for a in arguments if a is not type(None)]
        return _from_plain(others[0], data, where)
    if origin is Literal:
        if data not in arguments or isinstance(data, bool):
            raise _wrong(where, data, " or ".join(repr(a) for a in arguments))
        return data
    if origin is tuple:
        if not isinstance(data, list) or len(data) > _MOST_ITEMS:
            raise _wrong(where, data, "a list")
        return tuple(_from_plain(arguments[0], item, f"{where}[{i}]") for i, item in enumerate(data))
    if origin is not None and issubclass(origin, Mapping):
        if not isinstance(data, dict) or len(data) > _MOST_ITEMS:
            raise _wrong(where, data, "a table")
        return {
            _from_plain(str, key, where): _from_plain(arguments[1], item, f"{where}.{key}")
            for key, item in data.items()
        }
    if is_dataclass(kind):
        return _dataclass(kind, data, where)
    if kind is float:
        # A whole number may be too large for a float, and too large to be tried.
        whole = isinstance(data, int) and not isinstance(data, bool) and abs(data) < _LARGEST_WHOLE
        if not whole and not (isinstance(data, float) and math.isfinite(data)):
            raise _wrong(where, data, "a finite number")
        return float(data)
    if kind is int:
        if isinstance(data, bool) or not isinstance(data, int):
            raise _wrong(where, data, "a whole number")
        return data
    if kind is bool:
        if not isinstance(data, bool):
            raise _wrong(where, data, "true or false")
        return data
    if kind is str:
        if not isinstance(data, str) or len(data) > _LONGEST_TEXT or any(ord(c) < 32 for c in data):
            raise _wrong(where, data, f"a text of one line, at most {_LONGEST_TEXT} characters")
        return data
    raise TypeError(f"no rule for {kind}")


def _dataclass(kind: Any, data: Any, where: str) -> Any:  # noqa: ANN401
    if not isinstance(data, dict):
        raise _wrong(where, data, "a table")
    hints = get_type_hints(kind)
    known = {f.name: f for f in fields(kind)}
    for key in data:
        if key not in known:
            raise ModelFileError(f"{where}: unknown key {str(key)[:40]!r}")
    missing = [n for n, f in known.items() if n not in data and f.default is MISSING and f.default_factory is MISSING]
    if missing:
        raise ModelFileError(f"{where}: key {missing[0]!r} is missing")
    return kind(**{key: _from_plain(hints[key], value, f"{where}.{key}") for key, value in data.items()})


def _short(found: object) -> str:
    """What was found, in a few characters; a huge whole number is not even turned into text."""
    huge = isinstance(found, int) and abs(found) >= _LARGEST_WHOLE
    return "a huge number" if huge else repr(str(found)[:40])


def _wrong(where: str, found: object, expected: str) -> ModelFileError:
    return ModelFileError(f"{where}: found {_short(found)}, expected {expected}")
