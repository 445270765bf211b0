"""A whole fit, killed: whatever the moment, its output folder holds the old files or the new, and the user's own."""

from __future__ import annotations

import os
import random
import re
import shutil
import signal
import subprocess
import sys
import time
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
DEMO = ROOT / "digitized_curves" / "camper_van_p40v"
#: Two parts that differ in their names only: each has a subcircuit file that the other has not.
NAMES = ("FIRST", "SECOND")
USERS_OWN = {"notes.txt": b"measured on Tuesday", "scope/shot.png": b"\x89PNG"}
#: A run that takes longer is stuck.
LONGEST = 120.0

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="elsewhere a folder is not replaced in a single step")


def lean_part(folder, name):
    """A demo part with what a fit needs and no more, under another name."""
    head, *entries = re.split(r"(?=^\[\[curve\]\]|^\[stated)", (DEMO / "part.toml").read_text("utf-8"), flags=re.M)
    wanted = r'"(?:ciss|coss|crss)"|transfer_25C|^\[stated\.(?:threshold|on_resistance)\]'
    head, named = re.subn(r'^name = ".*?"', f'name = "{name}"', head, flags=re.M)
    assert named == 1
    folder.mkdir()
    (folder / "part.toml").write_text(head + "".join(entry for entry in entries if re.search(wanted, entry)), "utf-8")
    for file in ("capacitance.csv", "transfer_25C.csv"):
        shutil.copy(DEMO / file, folder)
    return folder


@dataclass(frozen=True)
class Parts:
    """Two lean parts, what a fit of each writes, and how long it takes."""

    folders: tuple[Path, ...]
    outputs: tuple[dict[str, bytes], ...]
    whole_run: float
    writing: float


def start(part, out, log):
    """A fit as a process of its own."""
    command = [sys.executable, "-m", "fitter", "fit", str(part), "--out", str(out)]
    env = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONPATH": str(ROOT)}
    with log.open("wb") as said:
        return subprocess.Popen(command, env=env, stdin=subprocess.DEVNULL, stdout=said, stderr=said)


def beside(out):
    """Names of what lies beside an output folder."""
    return sorted(path.name for path in out.parent.iterdir() if path != out)


def wait_until(condition, process):
    """Wait for a condition, or for the end of a process."""
    latest = time.monotonic() + LONGEST
    while process.poll() is None and not condition():
        assert time.monotonic() < latest
        time.sleep(0.0005)


def finish(part, out, log):
    """A fit that nobody kills."""
    process = start(part, out, log)
    assert process.wait(timeout=LONGEST) == 0, log.read_text()


def output(out):
    """All files below a folder but the user's own."""
    files = {str(path.relative_to(out)): path.read_bytes() for path in out.rglob("*") if path.is_file()}
    return {name: content for name, content in files.items() if name not in USERS_OWN}


@pytest.fixture(scope="module")
def parts(tmp_path_factory):
    base = tmp_path_factory.mktemp("parts")
    folders = tuple(lean_part(base / name.lower(), name) for name in NAMES)
    out, log = base / "outputs" / "model", base / "log"
    out.parent.mkdir()
    begin = time.monotonic()
    finish(folders[0], out, log)
    whole_run = time.monotonic() - begin
    first = output(out)
    # The second writes over the first: how long does it have something beside the folder?
    process = start(folders[1], out, log)
    wait_until(lambda: beside(out), process)
    begin = time.monotonic()
    wait_until(lambda: not beside(out), process)
    writing = time.monotonic() - begin
    assert process.wait(timeout=LONGEST) == 0, log.read_text()
    outputs = (first, output(out))
    for name, files in zip(NAMES, outputs, strict=True):
        assert {f"{name}.lib", "model.json", "sheet.pdf"} <= files.keys()
    assert outputs[0].keys() ^ outputs[1].keys() == {"FIRST.lib", "SECOND.lib"}
    assert outputs[0]["model.json"] != outputs[1]["model.json"]
    return Parts(folders=folders, outputs=outputs, whole_run=whole_run, writing=writing)


def kill_often(parts, base, kills, seed, seconds=float("inf")):
    """Kill fits one after the other, and look at the folder after each kill.

    In turn a fit is killed at any moment of its run, while it makes its new folder, and right after that has taken its
    place. Each is a fit of the part whose output is not there.

    Returns
    -------
    dict of str to int
        How many kills left the old files, how many the new, how many left something beside the folder.
    """
    moments = random.Random(seed)
    out, log = base / "outputs" / "model", base / "log"
    for name, content in (parts.outputs[0] | USERS_OWN).items():
        (out / name).parent.mkdir(parents=True, exist_ok=True)
        (out / name).write_bytes(content)
    there, count = 0, {"old": 0, "new": 0, "left beside": 0}
    latest = time.monotonic() + seconds
    for attempt in range(3 * kills):
        if count["old"] + count["new"] == kills or time.monotonic() > latest:
            break
        share, before = moments.random(), beside(out)
        process = start(parts.folders[1 - there], out, log)
        if attempt % 3 == 0:
            with suppress(subprocess.TimeoutExpired):
                process.wait(timeout=share * parts.whole_run)
        elif attempt % 3 == 1:
            wait_until(lambda before=before: set(beside(out)) - set(before), process)
            time.sleep(share * parts.writing)
        else:
            place = out.stat().st_ino
            wait_until(lambda place=place: out.stat().st_ino != place, process)
            time.sleep(share * share * parts.writing)
        process.send_signal(signal.SIGKILL)
        # A fit that was faster than its kill has passed and is none that counts.
        killed = process.wait() == -signal.SIGKILL
        assert killed or process.returncode == 0, log.read_text()
        found = output(out)
        assert found in parts.outputs, f"kill {attempt} left a mixture: {sorted(found)}"
        for name, content in USERS_OWN.items():
            assert (out / name).read_bytes() == content
        left = beside(out)
        assert all(name.startswith(f".{out.name}.fetwright-") for name in left)
        assert len(left) <= 1, "what killed runs leave accumulates"
        now = parts.outputs.index(found)
        if killed:
            count["old" if now == there else "new"] += 1
            count["left beside"] += len(left)
        there = now
    finish(parts.folders[1 - there], out, log)
    assert output(out) == parts.outputs[1 - there]
    assert {name: (out / name).read_bytes() for name in USERS_OWN} == USERS_OWN
    assert beside(out) == []
    return count


def test_a_kill_at_any_moment_of_a_fit_leaves_the_old_output_or_the_new(parts, tmp_path):
    count = kill_often(parts, tmp_path, kills=6, seed=6)
    assert count["old"] + count["new"] == 6
    assert min(count["old"], count["new"]) > 0


@pytest.mark.slow
def test_two_hundred_kills_leave_the_old_output_or_the_new_and_nothing_accumulates(parts, tmp_path):
    count = kill_often(parts, tmp_path, kills=200, seed=200)
    assert count["old"] + count["new"] == 200
    # Kills came before and after the new folder took its place, and while it was being made.
    assert min(count.values()) > 0
