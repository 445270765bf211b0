"""An output folder that appears all at once or not at all."""

from __future__ import annotations

import ctypes
import ctypes.util
import os
import re
import shutil
import tempfile
from collections.abc import Collection, Mapping
from pathlib import Path

from fitter.errors import OutputError

__all__ = ["replace_folder", "write_file"]

_MARK = ".fetwright-"
_AT_FDCWD = -100
_RENAME_EXCHANGE = 2


def replace_folder(target: Path, files: Mapping[str, bytes], own: Collection[str]) -> None:
    """Write files into a folder so that it holds either all the old ones or all the new ones, whenever it is looked at.

    The new folder is made whole beside the old one and then takes its place in one step. Files in the old folder
    that are not the tool's own are in the new one, too.

    Parameters
    ----------
    target : Path
        The folder; made where it is not there.
    files : mapping of str to bytes
        New files by name.
    own : collection of str
        Names of files that an earlier run may have written: they do not outlive it.

    Raises
    ------
    OutputError
        Where the folder cannot be written; then nothing has changed.
    """
    target = Path(os.path.abspath(target))  # noqa: PTH100 - Path.resolve would follow a link that the user set up on purpose
    if target.is_symlink():
        target = target.resolve()
    if target.exists() and not target.is_dir():
        raise OutputError(f"{target.name}: there is a file of that name; choose another --out")
    new: Path | None = None
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        _sweep(target)
        new = Path(tempfile.mkdtemp(prefix=f".{target.name}{_MARK}{os.getpid()}-", dir=target.parent))
        for name, content in files.items():
            _write_through(new / name, content)
        if target.is_dir():
            _carry_over(target, new, {*own, *files})
        new.chmod(0o777 & ~_umask())
        _put_in_place(new, target)
    except OSError as error:
        raise OutputError(f"{target}: cannot be written ({error.strerror or error}); nothing was changed") from error
    finally:
        if new is not None and new.exists():
            shutil.rmtree(new, ignore_errors=True)


def write_file(target: Path, content: bytes) -> None:
    """Write one file so that it is either the old one or the new one, whenever it is looked at.

    Parameters
    ----------
    target : Path
        The file.
    content : bytes
        All of it.

    Raises
    ------
    OutputError
        Where it cannot be written; then nothing has changed.
    """
    new: str | None = None
    try:
        handle, new = tempfile.mkstemp(prefix=f".{target.name}{_MARK}", dir=target.parent)
        os.close(handle)
        _write_through(Path(new), content)
        Path(new).chmod(0o666 & ~_umask())
        Path(new).replace(target)
    except OSError as error:
        if new is not None:
            Path(new).unlink(missing_ok=True)
        raise OutputError(f"{target}: cannot be written ({error.strerror or error}); nothing was changed") from error


def _write_through(path: Path, content: bytes) -> None:
    """Write and wait until the disk has it: a full disk shows here, before anything is put in place."""
    with path.open("wb") as f:
        f.write(content)
        f.flush()
        os.fsync(f.fileno())


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _carry_over(old: Path, new: Path, own: Collection[str]) -> None:
    """Give the new folder what the old one holds beside the tool's own files: linked, or else copied."""
    for entry in old.iterdir():
        if entry.name in own:
            continue
        if entry.is_dir() and not entry.is_symlink():
            shutil.copytree(entry, new / entry.name, symlinks=True, copy_function=_link_or_copy)
        else:
            _link_or_copy(str(entry), str(new / entry.name))


def _link_or_copy(source: str, target: str) -> None:
    try:
        os.link(source, target, follow_symlinks=False)
    except OSError:
        shutil.copy2(source, target, follow_symlinks=False)


def _put_in_place(new: Path, target: Path) -> None:
    """Exchange the two folders in one step where the system can; else move the old one aside first."""
    if not target.exists():
        new.rename(target)
        return
    if _exchange(new, target):
        return
    aside = Path(tempfile.mkdtemp(prefix=f".{target.name}{_MARK}{os.getpid()}-", dir=target.parent)) / "old"
    target.rename(aside)
    try:
        new.rename(target)
    except OSError:
        aside.rename(target)
        raise
    finally:
        shutil.rmtree(aside.parent, ignore_errors=True)


def _exchange(first: Path, second: Path) -> bool:
    """Linux's renameat2 with RENAME_EXCHANGE; False where the system or the file system has no such thing."""
    name = ctypes.util.find_library("c") if os.name == "posix" else None
    renameat2 = getattr(ctypes.CDLL(name, use_errno=True), "renameat2", None) if name else None
    if renameat2 is None:
        return False
    done = renameat2(_AT_FDCWD, os.fsencode(first), _AT_FDCWD, os.fsencode(second), _RENAME_EXCHANGE)
    return bool(done == 0)


def _sweep(target: Path) -> None:
    """Remove what runs that were killed left beside the target; those of living processes stay."""
    left = re.compile(re.escape(f".{target.name}{_MARK}") + r"(\d+)-")
    for entry in target.parent.iterdir():
        found = left.match(entry.name)
        if found and not _alive(int(found[1])):
            shutil.rmtree(entry, ignore_errors=True)


def _alive(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except (OSError, OverflowError):
        return True
    return True
