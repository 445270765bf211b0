"""Opening the files of a part folder, which may come from a stranger.

A file name in a part folder must not lead out of it, must not name anything but an ordinary file, and must
not make the tool read without end. Each file is read once; what is hashed is what is parsed.
"""

from __future__ import annotations

import hashlib
import os
import re
import stat
from itertools import islice
from pathlib import Path, PurePosixPath, PureWindowsPath

from fitter.errors import PartFolderError, Problem
from fitter.reading.problems import Problems, nearest, printable, quoted

__all__ = [
    "MAX_CSV_BYTES",
    "MAX_FILE_NAME",
    "MAX_TOML_BYTES",
    "MAX_TOTAL_BYTES",
    "PART_FILE",
    "InputFolder",
    "decoded",
    "file_name",
]

PART_FILE = "part.toml"
MAX_TOML_BYTES = 256 * 1024
MAX_CSV_BYTES = 2 * 1024 * 1024
MAX_TOTAL_BYTES = 20 * 1024 * 1024
MAX_FILE_NAME = 128
_LONGEST_PATH = 200
_MOST_NAMES = 500

# Absent on Windows, where there is nothing to guard against in this way.
_OPEN_FLAGS = os.O_RDONLY | getattr(os, "O_NOFOLLOW", 0) | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0)

_CONTROL_CHARACTER = re.compile(r"[^\t\r\n -\x7e\x80-\U0010ffff]")


class InputFolder:
    """A part folder, opened for reading.

    Parameters
    ----------
    folder : str or path
        The folder. A link to one is followed: the user has named it.
    problems : Problems
        Where it is noted what is wrong with the files.

    Attributes
    ----------
    digests : dict of str to str
        SHA-256 (hex) of every file read so far.

    Raises
    ------
    PartFolderError
        If there is no such folder.
    """

    def __init__(self, folder: str | os.PathLike[str], problems: Problems) -> None:
        self.digests: dict[str, str] = {}
        self._problems = problems
        self._bytes_left = MAX_TOTAL_BYTES
        given = os.fspath(folder)
        hint = f"expected a folder that holds {PART_FILE} and its CSV files"
        try:
            self._root = Path(given).resolve(strict=True)
            is_folder = self._root.is_dir()
        except FileNotFoundError:
            raise _folder_error(given, "there is no such folder", f"{hint}; check the path") from None
        except (OSError, RuntimeError, ValueError) as error:
            raise _folder_error(given, f"cannot be opened ({_reason(error)})", hint) from None
        if not is_folder:
            raise _folder_error(given, "this is not a folder", f"{hint}; give the folder, not a file in it")

    def read(self, name: str, *, largest: int) -> bytes | None:
        """Read the bytes of a file.

        Parameters
        ----------
        name : str
            As `file_name` returned it.
        largest : int
            Size limit [bytes].

        Returns
        -------
        bytes or None
            None where the file cannot be used; the problem is then noted.
        """
        expected = f"expected an ordinary file '{name}' in the part folder"
        try:
            path = (self._root / name).resolve(strict=True)
            if not path.is_relative_to(self._root):
                self._problems.add(name, "this is a link that leads out of the part folder", expected)
                return None
            if not stat.S_ISREG(path.stat().st_mode):
                self._problems.add(name, f"this is {_kind(path)}, not a file", expected)
                return None
            data = self._read_regular(path, largest)
        except FileNotFoundError:
            self._problems.add(name, "there is no such file", f"{expected}; {self._remedy(name)}")
            return None
        except (OSError, RuntimeError, ValueError) as error:
            self._problems.add(name, f"cannot be read ({_reason(error)})", f"{expected} that may be read")
            return None
        if len(data) > largest:
            self._problems.add(name, f"larger than {largest // 1024} KiB", _expected_size(name))
            return None
        self._bytes_left -= len(data)
        if self._bytes_left < 0:
            limit = MAX_TOTAL_BYTES // 1024**2
            self._problems.add(name, f"with this file, the folder's exceed {limit} MiB", _expected_size(name))
            return None
        if not data.strip():
            self._problems.add(name, "the file is empty", _expected_content(name))
            return None
        self.digests[name] = hashlib.sha256(data).hexdigest()
        return data

    def _remedy(self, name: str) -> str:
        """Say what to do about a file that is not there."""
        try:
            there = [path.name for path in islice(self._root.iterdir(), _MOST_NAMES)]
        except OSError:
            there = []
        if like := nearest(name, there):
            return f"did you mean {quoted(like)}?"
        return "'fetwright new' writes one to fill in" if name == PART_FILE else "check the name"

    @staticmethod
    def _read_regular(path: Path, largest: int) -> bytes:
        """Up to one byte more than `largest`, of a file that is still an ordinary one once it is open."""
        descriptor = os.open(path, _OPEN_FLAGS)
        with os.fdopen(descriptor, "rb") as stream:
            if not stat.S_ISREG(os.fstat(descriptor).st_mode):
                raise OSError("not an ordinary file")
            return stream.read(largest + 1)


def file_name(text: str) -> tuple[str, str]:
    """Bring a file name from a part folder into its simplest form, or say why it cannot be one.

    Parameters
    ----------
    text : str
        As entered; ``/`` separates folders.

    Returns
    -------
    name, reason : str
        One of the two is empty.

    Examples
    --------
    >>> file_name("./curves/c.csv"), file_name("../c.csv")
    (('curves/c.csv', ''), ('', 'leads out of the part folder'))
    """
    windows = PureWindowsPath(text)
    if not text.strip() or text != text.strip():
        return "", "is empty or has blanks at its ends"
    if len(text) > MAX_FILE_NAME:
        return "", f"is longer than {MAX_FILE_NAME} characters"
    if not text.isprintable():
        return "", "holds control characters"
    if text.startswith(("/", "~")) or windows.drive or windows.root:
        return "", "is an absolute path"
    if ".." in windows.parts:
        return "", "leads out of the part folder"
    if "\\" in text:
        return "", "holds a backslash, where '/' separates folders"
    path = PurePosixPath(text)
    # Such a name would be taken for a formula where a table of the files is opened in a spreadsheet.
    if not path.parts or any(part.startswith(("=", "+", "-", "@")) for part in path.parts):
        return "", "does not begin with a letter or a digit"
    return str(path), ""


def decoded(data: bytes, file: str, problems: Problems) -> str | None:
    """Decode a file in UTF-8, with or without a byte-order mark, or None with the problem noted."""
    expected = "expected a text file in UTF-8; save or export it as such"
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        problems.add(file, "this is text in UTF-16", expected, line=1)
        return None
    if data.startswith(b"PK\x03\x04"):
        problems.add(file, "this is a spreadsheet or archive", "expected plain text; export it as CSV", line=1)
        return None
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        bad = data[error.start : error.start + 1].hex()
        line = data.count(b"\n", 0, error.start) + 1
        problems.add(file, f"the byte 0x{bad} is not valid UTF-8", expected, line=line)
        return None
    control = _CONTROL_CHARACTER.search(text)
    if control:
        line = text.count("\n", 0, control.start()) + 1
        problems.add(file, f"the control character {quoted(control[0])}: this is no text", expected, line=line)
        return None
    return text


def _expected_size(name: str) -> str:
    if name == PART_FILE:
        return "expected a few kilobytes of keys and values"
    return "expected the points of a few curves; export only these"


def _expected_content(name: str) -> str:
    if name == PART_FILE:
        return "expected at least [part] and [[curve]]; 'fetwright new' writes one to fill in"
    return "expected a header line such as 'vds_V,ciss_pF' and a line for each point"


def _kind(path: Path) -> str:
    return "a folder" if path.is_dir() else "a device, pipe or socket"


def _reason(error: Exception) -> str:
    return (error.strerror if isinstance(error, OSError) else None) or str(error)


def _folder_error(folder: str, found: str, expected: str) -> PartFolderError:
    shown = printable(folder, longest=_LONGEST_PATH)
    return PartFolderError([Problem(file=shown, found=found, expected=expected)])
