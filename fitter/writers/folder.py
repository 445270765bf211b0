"""An output folder that appears all at once or not at all."""

from __future__ import annotations

import ctypes
import ctypes.util
import os
import re
import shutil
import stat
import tempfile
from collections.abc import Collection, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from fitter.errors import OutputError

__all__ = ["replace_folder", "write_file"]

#: Begin the names of what a run has beside its target: what is new, and what is set aside.
_MARK, _ASIDE = ".fetwright-", ".fetwright-aside-"
_OLD = "old"
#: Bytes of a file in which its mark stands.
_BEGINNING = 4000
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
    new: Path | None = None
    with _said(target):
        target = Path(os.path.abspath(target))  # noqa: PTH100 - a link that the user set up on purpose stays one
        if target.is_symlink():
            target = target.resolve(strict=False)
        if target.exists() and not target.is_dir():
            raise OutputError(f"{target.name}: there is a file of that name; choose another --out")
        try:
            target.parent.mkdir(parents=True, exist_ok=True)
            _sweep(target)
            new = Path(tempfile.mkdtemp(prefix=f".{target.name}{_MARK}{os.getpid()}-", dir=target.parent))
            for name, content in files.items():
                _write_through(new / name, content)
            mode = 0o777 & ~_umask()
            if target.is_dir():
                mode = stat.S_IMODE(target.stat().st_mode)
                _carry_over(target, new, {*own, *files})
            new.chmod(mode)
            _put_in_place(new, target)
        finally:
            if new is not None and new.exists():
                shutil.rmtree(new, ignore_errors=True)


def write_file(target: Path, content: bytes, mark: bytes = b"") -> None:
    """Write one file so that it is either the old one or the new one, whenever it is looked at.

    What is no ordinary file, such as a device or a pipe, is written to as it is.

    Parameters
    ----------
    target : Path
        The file.
    content : bytes
        All of it.
    mark : bytes
        What an earlier file of this kind holds near its beginning: one without it is someone else's.

    Raises
    ------
    OutputError
        Where it cannot be written, or would replace someone else's file; then nothing has changed.
    """
    new: Path | None = None
    with _said(target):
        if target.exists() and not target.is_file() and not target.is_dir():
            target.write_bytes(content)
            return
        if mark and target.is_file() and not _holds(target, mark):
            raise OutputError(f"{target}: there is a file that this command did not write; choose another --out")
        try:
            _sweep(target)
            mode = stat.S_IMODE(target.stat().st_mode) if target.exists() else 0o666 & ~_umask()
            handle, name = tempfile.mkstemp(prefix=f".{target.name}{_MARK}{os.getpid()}-", dir=target.parent)
            new = Path(name)
            os.close(handle)
            _write_through(new, content)
            new.chmod(mode)
            new.replace(target)
        finally:
            if new is not None:
                new.unlink(missing_ok=True)


def _holds(path: Path, mark: bytes) -> bool:
    """Whether a file's beginning holds a mark; an empty file belongs to nobody."""
    with path.open("rb") as f:
        beginning = f.read(_BEGINNING)
    return not beginning or mark in beginning


@contextmanager
def _said(target: Path) -> Iterator[None]:
    """Whatever the system objects to becomes an `OutputError`."""
    try:
        yield
    except OSError as error:
        raise OutputError(f"{target}: cannot be written ({error.strerror or error}); nothing was changed") from error
    except (ValueError, RuntimeError) as error:
        # A name with a zero byte, links that lead in a circle.
        raise OutputError(f"{target}: cannot be written ({error}); nothing was changed") from error


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
            if entry.is_dir() and not entry.is_symlink():
                raise OutputError(f"{entry}: a folder of that name is in the way of a file; choose another --out")
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
    aside = Path(tempfile.mkdtemp(prefix=f".{target.name}{_ASIDE}{os.getpid()}-", dir=target.parent))
    try:
        target.rename(aside / _OLD)
        try:
            new.rename(target)
        except OSError:
            (aside / _OLD).rename(target)
            raise
    finally:
        shutil.rmtree(aside, ignore_errors=True)


def _exchange(first: Path, second: Path) -> bool:
    """Linux's renameat2 with RENAME_EXCHANGE; False where the system or the file system has no such thing."""
    name = ctypes.util.find_library("c") if os.name == "posix" else None
    renameat2 = getattr(ctypes.CDLL(name, use_errno=True), "renameat2", None) if name else None
    if renameat2 is None:
        return False
    done = renameat2(_AT_FDCWD, os.fsencode(first), _AT_FDCWD, os.fsencode(second), _RENAME_EXCHANGE)
    return bool(done == 0)


def _sweep(target: Path) -> None:
    """Remove what runs that were killed left beside the target; what they had set aside goes back first."""
    left = re.compile(re.escape(f".{target.name}") + f"(?:{re.escape(_MARK)}|{re.escape(_ASIDE)})" + r"(\d+)-")
    for entry in target.parent.iterdir():
        found = left.match(entry.name)
        if not found or _alive(int(found[1])):
            continue
        if not entry.is_dir():
            entry.unlink(missing_ok=True)
            continue
        if _ASIDE in entry.name and (entry / _OLD).is_dir() and not target.exists():
            (entry / _OLD).rename(target)
        shutil.rmtree(entry, ignore_errors=True)


def _alive(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except (OSError, OverflowError):
        return True
    return True
