"""Text that every simulator reads the same way: numbers, continued lines, comments that cannot be escaped from."""

from __future__ import annotations

import re
import textwrap
import unicodedata

import numpy as np
from numpy.typing import ArrayLike

from fitter.errors import OutputError

__all__ = ["comment", "harmless", "number", "scalar", "signed", "statement"]

#: Lines stay below 80 characters.
_LINE_WIDTH = 79
_COMMENT_MARK = "* "

#: All that free text may contain; braces, quotes, backslashes, semicolons and the like have a meaning somewhere.
_FORBIDDEN = re.compile(r"[^A-Za-z0-9 ,.:;'^()/%=+_-]")
#: A word that looks like a simulator's command.
_LEADING_DOTS = re.compile(r"(?<!\S)\.+(?=[A-Za-z])")


def scalar(value: ArrayLike) -> float:
    """A parameter as one plain number.

    Parameters
    ----------
    value : array_like
        A number, or an array without dimensions.

    Returns
    -------
    float
    """
    return float(np.asarray(value))


def number(value: float) -> str:
    """A number with ten digits, in a form that is one word in every simulator.

    Parameters
    ----------
    value : float
        Any finite number.

    Returns
    -------
    str

    Raises
    ------
    OutputError
        Where the value is not finite.

    Examples
    --------
    >>> number(0.1), number(-2.5e-9), number(1 / 3)
    ('0.1', '-2.5e-09', '0.3333333333')
    """
    if not np.isfinite(value):
        raise OutputError(f"a parameter of the model leads to {value}, which no simulator takes")
    return f"{value:.10g}"


def signed(value: float) -> str:
    """A number as a further term of a sum: its sign, a space, its magnitude.

    Parameters
    ----------
    value : float
        Any finite number.

    Returns
    -------
    str

    Examples
    --------
    >>> signed(3.0), signed(-0.5)
    ('+ 3', '- 0.5')
    """
    return f"{'-' if value < 0.0 else '+'} {number(abs(value))}"


def statement(text: str) -> str:
    """A statement cut at its spaces into lines below 80 characters, the further ones continued with ``+``.

    Parameters
    ----------
    text : str
        The statement on one line; where it has a space, a line may end.

    Returns
    -------
    str
        Without a line end after the last line.

    Examples
    --------
    >>> print(statement("R1 a b " + " ".join(["1"] * 40)))
    R1 a b 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1 1
    + 1 1 1 1
    """
    return textwrap.fill(text, _LINE_WIDTH, subsequent_indent="+ ", break_long_words=False, break_on_hyphens=False)


def harmless(text: str) -> str:
    r"""Free text as plain ASCII on one line, without any character that a simulator could take for more than text.

    Letters with accents lose them; what else is not allowed becomes a question mark; dots before a word go.

    Parameters
    ----------
    text : str
        Whatever a user typed.

    Returns
    -------
    str

    Examples
    --------
    >>> harmless("f\u00fcr 48 V\n.control\nshell {rm}\\")
    'fur 48 V control shell ?rm??'
    """
    plain = "".join(c for c in unicodedata.normalize("NFKD", text) if not unicodedata.combining(c))
    one_line = " ".join("".join(c if c.isprintable() else " " for c in plain).split())
    return _LEADING_DOTS.sub("", _FORBIDDEN.sub("?", one_line))


def comment(text: str = "", indent: str = "") -> str:
    """Text as comment lines below 80 characters.

    Parameters
    ----------
    text : str
        Any text; it is made harmless first.
    indent : str
        What further lines begin with, after the comment's mark.

    Returns
    -------
    str
        Without a line end after the last line.

    Examples
    --------
    >>> comment("Verify on the bench.")
    '* Verify on the bench.'
    >>> comment()
    '*'
    """
    lines = textwrap.wrap(
        harmless(text),
        _LINE_WIDTH - len(_COMMENT_MARK),
        subsequent_indent=indent,
        break_on_hyphens=False,
    )
    return "\n".join(_COMMENT_MARK + line for line in lines) if lines else _COMMENT_MARK.rstrip()
