"""A small part folder for the reader's tests, and edits of it. The part is invented."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import pytest

from fitter.errors import PartFolderError, Problem
from fitter.part import Curve, Part, Quantity
from fitter.reader import read_part

PART = """\
[part]
name = "TESTPART"
channel = "n"
vds_max_V = 80
vgs_max_V = 20
notes = "Invented."

[[curve]]
quantity = "ciss"
file = "capacitance.csv"
x_axis = { scale = "log", from = 0.1, to = 100 }
y_axis = { scale = "log", from = 10, to = 10000 }

[[curve]]
quantity = "coss"
file = "capacitance.csv"
x_axis = { scale = "log", from = 0.1, to = 100 }
y_axis = { scale = "log", from = 10, to = 10000 }

[[curve]]
quantity = "crss"
file = "capacitance.csv"
x_axis = { scale = "log", from = 0.1, to = 100 }
y_axis = { scale = "log", from = 10, to = 10000 }

[[curve]]
quantity = "transfer"
file = "transfer.csv"
x_axis = { scale = "linear", from = 0, to = 6 }
y_axis = { scale = "linear", from = 0, to = 200 }
vds_V = 10
"""

CAPACITANCE = """\
vds_V,ciss_pF,coss_pF,crss_pF
0.1,4900,3500,500
1,4500,2500,300
10,4000,1000,60
80,3900,500,20
"""

TRANSFER = """\
vgs_V,id_A
3.5,2
4,20
5,120
"""

AXES = """\
x_axis = { scale = "linear", from = 0, to = 100 }
y_axis = { scale = "linear", from = 0, to = 100 }
"""


def curve(quantity: str, file: str, *lines: str, axes: str = AXES) -> str:
    """The part file's entry of a further curve."""
    return f'\n[[curve]]\nquantity = "{quantity}"\nfile = "{file}"\n' + axes + "\n".join(lines) + "\n"


def make_folder(
    folder: Path,
    edits: Mapping[str, str] | None = None,
    *,
    append: str = "",
    files: Mapping[str, str | bytes | None] | None = None,
) -> Path:
    """Write the part folder, with edits of the part file's text, further text in it, and further files.

    A file that is None is left out. A text to be edited must be there, so that no test tests nothing.
    """
    text = PART
    for old, new in (edits or {}).items():
        if old not in text:
            raise ValueError(f"the part file has no {old!r}")
        text = text.replace(old, new)
    contents: dict[str, str | bytes | None] = {
        "capacitance.csv": CAPACITANCE,
        "transfer.csv": TRANSFER,
        "part.toml": text + append,
    }
    contents.update(files or {})
    folder.mkdir(exist_ok=True)
    for name, content in contents.items():
        if content is None:
            continue
        path = folder / name
        path.parent.mkdir(exist_ok=True)
        path.write_bytes(content.encode() if isinstance(content, str) else content)
    return folder


def only(part: Part, quantity: Quantity) -> Curve:
    """The one curve of a quantity."""
    (found,) = part.curves_of(quantity)
    return found


def problems_of(folder: Path) -> tuple[Problem, ...]:
    """The problems of a folder that cannot be read; each is a message that stands on its own."""
    with pytest.raises(PartFolderError) as caught:
        read_part(folder)
    found = caught.value.problems
    for problem in found:
        text = str(problem)
        assert text.isprintable(), "a message stands on one line"
        assert len(text) < 500
        assert problem.found
        assert "expected" in problem.expected or "did you mean" in problem.expected or "mend" in problem.expected
    return found


def messages(folder: Path) -> list[str]:
    """The problems as texts."""
    return [str(problem) for problem in problems_of(folder)]


def check(folder: Path, *expected: str | tuple[str, ...]) -> None:
    """There are exactly these problems, each holding all of its fragments."""
    found = messages(folder)
    assert len(found) == len(expected), "\n".join(found)
    for message, fragments in zip(found, expected, strict=True):
        for fragment in (fragments,) if isinstance(fragments, str) else fragments:
            assert fragment in message
