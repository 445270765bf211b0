"""Output appears all at once or not at all: whatever happens on the way, a folder holds the old files or the new."""

from __future__ import annotations

import os
import random
import signal
import stat
import subprocess
import sys
import time
from contextlib import suppress
from pathlib import Path

import pytest

from fitter.errors import OutputError
from fitter.writers import folder
from fitter.writers.folder import replace_folder, write_file

ROOT = Path(__file__).resolve().parents[1]
NAMES = ("a.csv", "b.csv", "c.lib")

posix = pytest.mark.skipif(os.name != "posix", reason="processes are killed and forked the POSIX way")
not_root = pytest.mark.skipif(
    hasattr(os, "geteuid") and os.geteuid() == 0, reason="root may write into read-only folders"
)


def generation(text):
    """All the tool's own files of one run."""
    return {name: f"{text} {name}\n".encode() * 50 for name in NAMES}


def own(place):
    """The tool's own files as they are."""
    return {name: (place / name).read_bytes() for name in NAMES if (place / name).exists()}


def names(place):
    return sorted(path.name for path in place.iterdir())


def start(code, *arguments):
    """A Python process of its own."""
    env = {**os.environ, "PYTHONPATH": str(ROOT)}
    command = [sys.executable, "-c", code, *map(str, arguments)]
    return subprocess.Popen(command, env=env, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


@pytest.fixture
def target(tmp_path):
    """A folder that an earlier run wrote, with files of the user's own in it."""
    place = tmp_path / "model"
    replace_folder(place, generation("old"), NAMES)
    (place / "notes.txt").write_text("measured on Tuesday")
    (place / "scope").mkdir()
    (place / "scope" / "shot.png").write_bytes(b"\x89PNG")
    return place


# What comes out


def test_the_folder_and_its_parents_are_made(tmp_path):
    replace_folder(tmp_path / "x" / "y" / "model", generation("new"), NAMES)
    assert own(tmp_path / "x" / "y" / "model") == generation("new")


def test_old_files_give_way_to_new_ones(target):
    replace_folder(target, generation("new"), NAMES)
    assert own(target) == generation("new")


def test_files_of_an_earlier_run_do_not_outlive_it(target):
    replace_folder(target, {"a.csv": b"new"}, NAMES)
    assert own(target) == {"a.csv": b"new"}


def test_nothing_is_left_beside_the_folder(target):
    replace_folder(target, generation("new"), NAMES)
    assert names(target.parent) == ["model"]


def test_the_same_call_twice_is_no_different_from_once(target):
    replace_folder(target, generation("new"), NAMES)
    replace_folder(target, generation("new"), NAMES)
    assert own(target) == generation("new")
    assert names(target) == sorted([*NAMES, "notes.txt", "scope"])


@posix
def test_a_new_folder_has_the_usual_permissions(tmp_path):
    (tmp_path / "usual").mkdir()
    (tmp_path / "usual" / "file").write_bytes(b"")
    replace_folder(tmp_path / "model", generation("new"), NAMES)
    for made, usual in (("model", "usual"), ("model/a.csv", "usual/file")):
        assert stat.S_IMODE((tmp_path / made).stat().st_mode) == stat.S_IMODE((tmp_path / usual).stat().st_mode)


@posix
def test_a_private_folder_stays_private(target):
    target.chmod(0o700)
    replace_folder(target, generation("new"), NAMES)
    assert stat.S_IMODE(target.stat().st_mode) == 0o700


# Files of the user's own


def test_files_of_the_users_own_stay(target):
    replace_folder(target, generation("new"), NAMES)
    assert (target / "notes.txt").read_text() == "measured on Tuesday"
    assert (target / "scope" / "shot.png").read_bytes() == b"\x89PNG"
    assert names(target) == sorted([*NAMES, "notes.txt", "scope"])


def test_empty_folders_and_hidden_files_of_the_users_own_stay(target):
    (target / "empty").mkdir()
    (target / ".hidden").write_text("mine")
    replace_folder(target, generation("new"), NAMES)
    assert (target / "empty").is_dir()
    assert (target / ".hidden").read_text() == "mine"


def test_the_time_and_permissions_of_the_users_files_stay(target):
    (target / "notes.txt").chmod(0o400)
    os.utime(target / "notes.txt", (1_000_000_000, 1_000_000_000))
    replace_folder(target, generation("new"), NAMES)
    after = (target / "notes.txt").stat()
    assert after.st_mtime == 1_000_000_000
    assert stat.S_IMODE(after.st_mode) == 0o400


def test_files_that_cannot_be_linked_are_copied(target, monkeypatch):
    def no_links(*_, **__):
        raise OSError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", no_links)
    replace_folder(target, generation("new"), NAMES)
    assert (target / "notes.txt").read_text() == "measured on Tuesday"
    assert (target / "scope" / "shot.png").read_bytes() == b"\x89PNG"


def test_a_folder_of_the_users_own_in_place_of_a_file_is_not_deleted(target):
    (target / "a.csv").unlink()
    (target / "a.csv").mkdir()
    (target / "a.csv" / "thesis.txt").write_text("three years")
    with suppress(OutputError):
        replace_folder(target, generation("new"), NAMES)
    kept = [path for path in target.parent.rglob("thesis.txt") if path.read_text() == "three years"]
    assert kept


# Links


@posix
def test_links_of_the_users_own_stay_links(target, tmp_path):
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "big.dat").write_bytes(b"big")
    (target / "link").symlink_to(tmp_path / "elsewhere", target_is_directory=True)
    (target / "dangling").symlink_to(tmp_path / "nowhere")
    (target / "scope" / "inner").symlink_to("shot.png")
    replace_folder(target, generation("new"), NAMES)
    assert (target / "link").readlink() == tmp_path / "elsewhere"
    assert (target / "dangling").is_symlink()
    assert (target / "scope" / "inner").is_symlink()
    assert names(tmp_path / "elsewhere") == ["big.dat"]


@posix
def test_a_link_in_place_of_a_file_is_not_followed(target, tmp_path):
    outside = tmp_path / "outside.csv"
    outside.write_text("not the tool's")
    (target / "a.csv").unlink()
    (target / "a.csv").symlink_to(outside)
    replace_folder(target, generation("new"), NAMES)
    assert outside.read_text() == "not the tool's"
    assert not (target / "a.csv").is_symlink()
    assert own(target) == generation("new")


@posix
def test_a_folder_that_is_a_link_stays_one(target, tmp_path):
    (tmp_path / "desk").mkdir()
    (tmp_path / "desk" / "link").symlink_to(target, target_is_directory=True)
    replace_folder(tmp_path / "desk" / "link", generation("new"), NAMES)
    assert (tmp_path / "desk" / "link").is_symlink()
    assert own(target) == generation("new")
    assert (target / "notes.txt").exists()
    assert names(tmp_path / "desk") == ["link"]


@posix
def test_links_that_lead_in_a_circle_are_an_error_of_the_output(tmp_path):
    (tmp_path / "circle").symlink_to(tmp_path / "circle")
    with pytest.raises(OutputError):
        replace_folder(tmp_path / "circle", generation("new"), NAMES)


# Where it cannot be written


def test_a_file_is_not_replaced_by_a_folder(tmp_path):
    (tmp_path / "model").write_text("mine")
    with pytest.raises(OutputError, match="model"):
        replace_folder(tmp_path / "model", generation("new"), NAMES)
    assert names(tmp_path) == ["model"]
    assert (tmp_path / "model").read_text() == "mine"


def test_a_folder_below_a_file_is_an_error_of_the_output(tmp_path):
    (tmp_path / "file").write_text("mine")
    with pytest.raises(OutputError, match="cannot be written"):
        replace_folder(tmp_path / "file" / "model", generation("new"), NAMES)
    assert names(tmp_path) == ["file"]


def test_a_name_that_is_too_long_is_an_error_of_the_output(tmp_path):
    with pytest.raises(OutputError, match="cannot be written"):
        replace_folder(tmp_path / ("n" * 300), generation("new"), NAMES)
    assert names(tmp_path) == []


@not_root
def test_a_read_only_parent_is_an_error_of_the_output(target):
    target.parent.chmod(0o500)
    try:
        with pytest.raises(OutputError, match="cannot be written"):
            replace_folder(target, generation("new"), NAMES)
    finally:
        target.parent.chmod(0o700)
    assert own(target) == generation("old")


@pytest.mark.parametrize("call", ["fsync", "chmod", "mkdir"])
def test_a_system_that_refuses_leaves_what_was_there(target, monkeypatch, call):
    def refuse(*_, **__):
        raise OSError(28, "No space left on device")

    with monkeypatch.context() as refusing:
        refusing.setattr(os, call, refuse)
        with pytest.raises(OutputError, match="No space left on device"):
            replace_folder(target, generation("new"), NAMES)
    assert own(target) == generation("old")
    assert (target / "notes.txt").read_text() == "measured on Tuesday"
    assert names(target.parent) == ["model"]


@pytest.mark.parametrize("passing", [0, 1])
def test_without_exchange_a_move_that_fails_leaves_what_was_there(target, monkeypatch, passing):
    rename, calls = os.rename, []

    def refuse_once(*arguments, **options):
        calls.append(arguments)
        if len(calls) == passing + 1:
            raise OSError(13, "Permission denied")
        rename(*arguments, **options)

    with monkeypatch.context() as refusing:
        refusing.setattr(folder, "_exchange", lambda first, second: False)
        refusing.setattr(os, "rename", refuse_once)
        with pytest.raises(OutputError, match="Permission denied"):
            replace_folder(target, generation("new"), NAMES)
    assert own(target) == generation("old")
    assert (target / "notes.txt").read_text() == "measured on Tuesday"
    assert names(target.parent) == ["model"]


def test_without_exchange_new_files_come_into_place(target, monkeypatch):
    monkeypatch.setattr(folder, "_exchange", lambda first, second: False)
    replace_folder(target, generation("new"), NAMES)
    assert own(target) == generation("new")
    assert (target / "scope" / "shot.png").read_bytes() == b"\x89PNG"
    assert names(target.parent) == ["model"]


# Killed on the way

#: A killed process needs no disk: what it wrote is there for the others.
LOOP = """
import os, sys
from pathlib import Path
from fitter.writers.folder import replace_folder
target, first = Path(sys.argv[1]), int(sys.argv[2])
names = sys.argv[3:]
os.fsync = lambda _: None
print("ready", flush=True)
for k in range(first, first + 100000):
    replace_folder(target, {name: f"{k} {name}\\n".encode() * 50 for name in names}, names)
"""


def number_of(place):
    """The generation that all of the folder's own files are of."""
    found = own(place)
    assert set(found) == set(NAMES)
    (first,) = {content.split()[0] for content in found.values()}
    assert found == generation(first.decode())
    return int(first)


@posix
def test_a_kill_at_any_moment_leaves_the_old_files_or_the_new(target):
    moments = random.Random(20)
    replace_folder(target, generation("0"), NAMES)
    reached = 0
    for _ in range(20):
        process = start(LOOP, target, reached + 1, *NAMES)
        assert process.stdout.readline() == "ready\n"
        time.sleep(moments.uniform(0.0, 0.05))
        process.send_signal(signal.SIGKILL)
        process.communicate()
        assert process.returncode == -signal.SIGKILL
        now = number_of(target)
        assert now >= reached
        reached = now
        assert (target / "notes.txt").read_text() == "measured on Tuesday"
        assert (target / "scope" / "shot.png").read_bytes() == b"\x89PNG"
    assert reached > 5
    replace_folder(target, generation("new"), NAMES)
    assert names(target.parent) == ["model"]


#: Kills a run right before each of its steps in turn, then lets a second run pass. A line for each step says what
#: was there after the kill, after the second run, and beside the folder.
STEPS = """
import os, shutil, signal, sys
from pathlib import Path
from fitter.writers import folder
os.fsync = lambda _: None
base, exchange = Path(sys.argv[1]), sys.argv[2] == "exchange"
if not exchange:
    folder._exchange = lambda first, second: False
COUNTED = ("open", "os.", "shutil.", "tempfile.", "ctypes.call")
def files(word):
    return {name: f"{word} {name}".encode() for name in ("a", "b")}
def state(target):
    if not target.is_dir():
        return "absent"
    found = {name: (target / name).read_bytes() for name in ("a", "b") if (target / name).exists()}
    word = next((w for w in ("old", "new", "third") if found == files(w)), "mixed")
    return word + ("" if (target / "notes.txt").exists() and (target / "sub" / "x").exists() else " without notes")
for step in range(1000):
    place = base / str(step)
    target = place / "model"
    folder.replace_folder(target, files("old"), ("a", "b"))
    (target / "notes.txt").write_text("mine")
    (target / "sub").mkdir()
    (target / "sub" / "x").write_text("mine")
    child = os.fork()
    if child == 0:
        left = step
        def count(event, _):
            global left
            if event.startswith(COUNTED):
                left -= 1
                if left < 0:
                    os.kill(os.getpid(), signal.SIGKILL)
        sys.addaudithook(count)
        folder.replace_folder(target, files("new"), ("a", "b"))
        os._exit(0)
    status = os.waitpid(child, 0)[1]
    killed = state(target)
    folder.replace_folder(target, files("third"), ("a", "b"))
    print(killed, state(target), ",".join(os.listdir(place)), sep="|", flush=True)
    if status == 0:
        break
"""


@pytest.fixture(scope="module")
def steps(tmp_path_factory):
    """What the kill before each step leaves, by the way in which the new folder takes its place."""
    found = {}
    for way in ("exchange", "move"):
        process = start(STEPS, tmp_path_factory.mktemp(way), way)
        said, errors = process.communicate(timeout=60)
        assert process.returncode == 0, errors
        found[way] = [line.split("|") for line in said.splitlines()]
    return found


@posix
def test_a_kill_before_any_step_leaves_the_old_files_or_the_new(steps):
    killed = [line[0] for line in steps["exchange"]]
    assert len(killed) > 15
    assert killed[0] == "old"
    assert killed[-1] == "new"
    assert set(killed) == {"old", "new"}


@posix
def test_a_kill_before_any_step_is_no_hindrance_for_the_next_run(steps):
    assert {tuple(line[1:]) for line in steps["exchange"]} == {("third", "model")}


@posix
def test_without_exchange_a_kill_never_leaves_a_mixture(steps):
    assert {line[0] for line in steps["move"]} <= {"old", "new", "absent"}


@posix
def test_without_exchange_a_kill_costs_the_user_no_file(steps):
    assert {tuple(line[1:]) for line in steps["move"]} == {("third", "model")}


@posix
def test_what_a_living_process_has_beside_the_folder_stays(target):
    busy = target.parent / f".model.fetwright-{os.getpid()}-abc"
    busy.mkdir()
    replace_folder(target, generation("new"), NAMES)
    assert busy.is_dir()


@posix
def test_what_belongs_to_another_folder_stays(target):
    process = start("pass")
    process.communicate()
    for name in (f".model2.fetwright-{process.pid}-abc", f".fetwright-{process.pid}-abc", ".model.fetwright-notes"):
        (target.parent / name).mkdir()
    left = names(target.parent)
    replace_folder(target, generation("new"), NAMES)
    assert names(target.parent) == left


# Two at once

RACE = """
import os, sys
from pathlib import Path
from fitter.errors import OutputError
from fitter.writers.folder import replace_folder
target, word, names = Path(sys.argv[1]), sys.argv[2], sys.argv[3:]
os.fsync = lambda _: None
sys.stdin.readline()
done = 0
for k in range(200):
    try:
        replace_folder(target, {name: f"{word}{k} {name}\\n".encode() * 50 for name in names}, names)
        done += 1
    except OutputError:
        pass
print(done)
"""


def look(place):
    """The own files of one moment: the folder is opened once, so that its exchange does not change what is read."""
    handle = os.open(place, os.O_RDONLY)
    try:
        found = {}
        for name in NAMES:
            file = os.open(name, os.O_RDONLY, dir_fd=handle)
            with os.fdopen(file, "rb") as f:
                found[name] = f.read()
        return found
    except FileNotFoundError:  # it has been replaced and is being removed
        return None
    finally:
        os.close(handle)


@posix
def test_two_at_once_never_mix(target):
    env = {**os.environ, "PYTHONPATH": str(ROOT)}
    both = [
        subprocess.Popen(
            [sys.executable, "-c", RACE, str(target), word, *NAMES],
            env=env, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        )
        for word in ("first", "second")
    ]  # fmt: skip
    for process in both:
        process.stdin.write("go\n")
        process.stdin.flush()
    seen = set()
    while any(process.poll() is None for process in both):
        found = look(target)
        if found is not None:
            (word,) = {content.split()[0].decode() for content in found.values()}
            assert found == generation(word)
            seen.add(word)
    said = [process.communicate() for process in both]
    assert [process.returncode for process in both] == [0, 0], said
    assert all(int(out) > 0 for out, _ in said)
    assert len(seen) > 5
    assert (target / "notes.txt").read_text() == "measured on Tuesday"
    assert (target / "scope" / "shot.png").exists()
    assert names(target.parent) == ["model"]


# One file


def test_a_file_is_written(tmp_path):
    write_file(tmp_path / "part.lib", b"new")
    assert (tmp_path / "part.lib").read_bytes() == b"new"
    assert names(tmp_path) == ["part.lib"]


def test_a_file_is_replaced(tmp_path):
    (tmp_path / "part.lib").write_bytes(b"old and longer")
    write_file(tmp_path / "part.lib", b"new")
    assert (tmp_path / "part.lib").read_bytes() == b"new"


def test_a_file_that_cannot_be_written_stays_as_it_was(tmp_path, monkeypatch):
    def full(_):
        raise OSError(28, "No space left on device")

    (tmp_path / "part.lib").write_bytes(b"old")
    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OutputError, match="No space left on device"):
        write_file(tmp_path / "part.lib", b"new")
    assert (tmp_path / "part.lib").read_bytes() == b"old"
    assert names(tmp_path) == ["part.lib"]


@pytest.mark.parametrize("where", ["absent/part.lib", "file/part.lib", "folder"])
def test_a_place_where_no_file_can_be_is_an_error_of_the_output(tmp_path, where):
    (tmp_path / "file").write_bytes(b"")
    (tmp_path / "folder").mkdir()
    with pytest.raises(OutputError, match="cannot be written"):
        write_file(tmp_path / where, b"new")
    assert names(tmp_path) == ["file", "folder"]


@posix
def test_a_file_has_the_usual_permissions(tmp_path):
    (tmp_path / "usual").write_bytes(b"")
    write_file(tmp_path / "part.lib", b"new")
    assert (tmp_path / "part.lib").stat().st_mode == (tmp_path / "usual").stat().st_mode


@posix
def test_a_private_file_stays_private(tmp_path):
    (tmp_path / "part.lib").write_bytes(b"old")
    (tmp_path / "part.lib").chmod(0o600)
    write_file(tmp_path / "part.lib", b"new")
    assert stat.S_IMODE((tmp_path / "part.lib").stat().st_mode) == 0o600


@posix
def test_a_link_in_place_of_the_file_does_not_lead_elsewhere(tmp_path):
    (tmp_path / "outside").write_bytes(b"mine")
    (tmp_path / "part.lib").symlink_to(tmp_path / "outside")
    write_file(tmp_path / "part.lib", b"new")
    assert (tmp_path / "outside").read_bytes() == b"mine"
    assert (tmp_path / "part.lib").read_bytes() == b"new"


@posix
def test_what_is_no_ordinary_file_is_not_replaced_by_one(tmp_path):
    os.mkfifo(tmp_path / "pipe")
    reader = os.open(tmp_path / "pipe", os.O_RDONLY | os.O_NONBLOCK)
    try:
        write_file(tmp_path / "pipe", b"new")
    except OutputError:
        pass
    finally:
        os.close(reader)
    assert stat.S_ISFIFO((tmp_path / "pipe").stat().st_mode)


@posix
def test_what_a_killed_run_left_beside_a_file_does_not_accumulate(tmp_path):
    code = (
        "import os, signal, sys\n"
        "from pathlib import Path\n"
        "from fitter.writers.folder import write_file\n"
        "os.fsync = lambda _: os.kill(os.getpid(), signal.SIGKILL)\n"
        "write_file(Path(sys.argv[1]), b'half')\n"
    )
    (tmp_path / "part.lib").write_bytes(b"old")
    process = start(code, tmp_path / "part.lib")
    process.communicate()
    assert process.returncode == -signal.SIGKILL
    assert (tmp_path / "part.lib").read_bytes() == b"old"
    write_file(tmp_path / "part.lib", b"new")
    assert names(tmp_path) == ["part.lib"]
