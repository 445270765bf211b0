"""The command as a user calls it: exit status, what the screen shows, what is written, and what is not."""

from __future__ import annotations

import csv
import importlib.metadata
import json
import os
import re
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

import pytest

import fitter
from fitter import pipeline
from fitter.cli import main
from fitter.units import engineering
from fitter.version import VERSION

ROOT = Path(__file__).resolve().parents[1]
PARTS = ROOT / "digitized_curves"
P_CHANNEL = "camper_van_p40v"
TEXTS = ("model.json", "parameters.csv", "checks.csv", "curves.csv", "gate_charge.csv")
COMMANDS = ("new", "check", "fit", "next", "netlist", "charge")


@dataclass(frozen=True)
class Outcome:
    status: int
    out: str
    err: str


def without_colour(text):
    return re.sub(r"\x1b\[[0-9;]*m", "", text)


@pytest.fixture
def run(monkeypatch, capsys):
    """``run("check", folder)``: the command inside this process."""

    def call(*arguments):
        monkeypatch.setattr(sys, "argv", ["fetwright", *map(str, arguments)])
        with pytest.raises(SystemExit) as stopped:
            main()
        said = capsys.readouterr()
        return Outcome(stopped.value.code or 0, without_colour(said.out), without_colour(said.err))

    return call


def run_outside(*arguments, stdout=subprocess.PIPE, cwd=ROOT, **environment):
    """The command as a process of its own."""
    command = [sys.executable, "-m", "fitter", *map(str, arguments)]
    env = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONPATH": str(ROOT), **environment}
    done = subprocess.run(
        command, cwd=cwd, env=env, stdin=subprocess.DEVNULL, stdout=stdout, stderr=subprocess.PIPE, timeout=120,
        check=False,
    )  # fmt: skip
    out = "" if done.stdout is None else done.stdout.decode()
    return Outcome(done.returncode, without_colour(out), without_colour(done.stderr.decode()))


def contents(folder):
    """Everything below a folder."""
    return {str(path.relative_to(folder)): path.read_bytes() if path.is_file() else None for path in folder.rglob("*")}


def refused(outcome):
    """Bad input: status 2 and one message on stderr, without a traceback."""
    assert outcome.status == 2
    assert outcome.out == ""
    assert outcome.err.startswith("fetwright: ")
    assert outcome.err.count("fetwright: ") == 1
    assert "Traceback" not in outcome.err
    assert "fault of the tool" not in outcome.err
    return outcome.err


def lean_folder(target, edits=()):
    """A part folder that is fitted quickly: capacitances, one transfer curve, gate charge."""
    source = PARTS / P_CHANNEL
    head, *entries = re.split(r"(?=^\[\[curve\]\]|^\[stated)", (source / "part.toml").read_text("utf-8"), flags=re.M)
    wanted = r'"(ciss|coss|crss|gate_charge)"|transfer_25C|^\[stated\.gate_charge\]'
    text = head + "".join(entry for entry in entries if re.search(wanted, entry))
    for old, new in edits:
        assert old in text
        text = text.replace(old, new)
    target.mkdir()
    (target / "part.toml").write_text(text, "utf-8")
    for name in ("capacitance.csv", "transfer_25C.csv", "gate_charge.csv"):
        shutil.copy(source / name, target)
    return target


FITTED = {}


@pytest.fixture
def lean(tmp_path, monkeypatch):
    """Such a folder; the same data are fitted only once, and no time is spent on drawing a sheet."""
    drawn = {"sheet.png": b"drawn elsewhere", "sheet.pdf": b"drawn elsewhere"}
    monkeypatch.setattr(pipeline, "sheet_files", lambda model: drawn)
    fit_part = pipeline.fit_part

    def fit_once(part, **options):
        key = (*part.digests.values(), *sorted(options.items()))
        if key not in FITTED:
            FITTED[key] = fit_part(part, **options)
        return FITTED[key]

    monkeypatch.setattr(pipeline, "fit_part", fit_once)
    return lean_folder(tmp_path / "part")


def exchange(folder):
    """Exchange two columns, as happens to the labels of a figure's curves."""
    text = (folder / "capacitance.csv").read_text()
    assert text.startswith("vds_V,ciss_pF,coss_pF,crss_pF\n")
    (folder / "capacitance.csv").write_text("vds_V,crss_pF,coss_pF,ciss_pF\n" + text.partition("\n")[2])
    return folder


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    """A whole run of ``fit`` as a process of its own: the part folder, the output folder, what it said."""
    base = tmp_path_factory.mktemp("finished")
    shutil.copytree(PARTS / P_CHANNEL, base / "part")
    said = run_outside("fit", "part", "--out", "made/here", cwd=base, PYTHONHASHSEED="1", LC_ALL="C", TZ="Asia/Tokyo")
    assert said.status == 0, said.err
    return base / "part", base / "made" / "here", said


@pytest.fixture(scope="module")
def model_json(finished):
    return finished[1] / "model.json"


@pytest.fixture(scope="module")
def loaded(model_json):
    return fitter.load_model(model_json)


# The command as a whole


def test_the_installed_command_is_the_module():
    (entry,) = importlib.metadata.entry_points(group="console_scripts", name="fetwright")
    assert entry.load() is main


def test_version(run):
    assert run("--version") == Outcome(0, f"fetwright {VERSION}\n", "")


def test_without_arguments_it_shows_its_commands(run):
    said = run()
    assert said.status in (0, 2)
    for command in COMMANDS:
        assert re.search(rf"\b{command}\b", said.out + said.err)


@pytest.mark.parametrize("option", ["-h", "--help"])
def test_help_lists_every_command(run, option):
    said = run(option)
    assert (said.status, said.err) == (0, "")
    for command in COMMANDS:
        assert re.search(rf"^\W*{command}\b", said.out, re.M)


@pytest.mark.parametrize(
    "command, named",
    [
        ("new", ["FOLDER"]),
        ("check", ["FOLDER"]),
        ("fit", ["FOLDER", "--out", "--use-gate-charge", "--strict", "--leave-out"]),
        ("next", ["FOLDER"]),
        ("netlist", ["MODEL.json", "--out", "--tj"]),
        ("charge", ["MODEL.json", "--vdd", "--id", "--vgs", "--load", "current", "resistive", "--tj", "--out"]),
    ],
)
def test_help_of_a_command_names_its_arguments(run, command, named):
    said = run(command, "--help")
    assert (said.status, said.err) == (0, "")
    for word in named:
        assert word in said.out


@pytest.mark.parametrize("arguments", [["--help"], ["fit", "--help"], ["--version"]])
def test_help_comes_without_what_takes_long_to_import(arguments):
    code = (
        "import sys\n"
        f"sys.argv = ['fetwright', *{arguments!r}]\n"
        "from fitter.cli import main\n"
        "try:\n    main()\nexcept SystemExit:\n    pass\n"
        "heavy = {'lmfit', 'scipy', 'pandas', 'matplotlib'} & set(sys.modules)\n"
        "sys.stderr.write(repr(sorted(heavy)))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)
    assert done.stdout
    assert done.stderr == "[]"


def test_shell_completion_can_be_installed(run):
    assert "--install-completion" in run("--help").out


def test_shell_completion_knows_the_commands():
    code = "import sys; sys.argv = ['fetwright']; from fitter.cli import main; main()"
    asked = {"_FETWRIGHT_COMPLETE": "complete_bash", "COMP_WORDS": "fetwright net", "COMP_CWORD": "1"}
    done = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, env=os.environ | asked, capture_output=True, text=True, check=False
    )
    assert done.stdout.split() == ["netlist"]


@pytest.mark.parametrize(
    "arguments",
    [
        ["no-such-command"],
        ["--no-such-option"],
        ["new"],
        ["check"],
        ["fit"],
        ["fit", "a", "b"],
        ["next"],
        ["fit", "a", "--out"],
        ["fit", "a", "--no-such-option"],
        ["netlist"],
        ["netlist", "m.json", "--tj", "warm"],
        ["charge", "m.json"],
        ["charge", "m.json", "--vdd", "20", "--id", "30"],
        ["charge", "m.json", "--vdd", "20", "--id", "30", "--vgs", "ten"],
        ["charge", "m.json", "--vdd", "20", "--id", "30", "--vgs", "10", "--load", "inductive"],
    ],
)
def test_bad_usage_has_status_2_and_says_what_is_wrong(run, arguments):
    said = run(*arguments)
    assert said.status == 2
    assert said.out == ""
    assert "Error" in said.err
    assert "Traceback" not in said.err


def test_a_fault_of_the_tool_has_status_3_and_says_so(run, monkeypatch, lean):
    def broken(*_, **__):
        raise ZeroDivisionError("what nobody thought of")

    monkeypatch.setattr(pipeline, "fit_part", broken)
    before = contents(lean)
    said = run("fit", lean)
    assert (said.status, said.out) == (3, "")
    assert "fault of the tool, not of your data" in said.err
    assert "ZeroDivisionError: what nobody thought of" in said.err
    assert "Traceback" not in said.err
    assert contents(lean) == before


def test_too_little_memory_is_no_fault_of_the_tool(run, monkeypatch, lean):
    def greedy(*_, **__):
        raise MemoryError

    monkeypatch.setattr(pipeline, "fit_part", greedy)
    assert "out of memory" in refused(run("fit", lean))


def test_an_interrupted_fit_writes_nothing_and_says_so(run, monkeypatch, lean):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(pipeline, "fit_part", interrupted)
    before = contents(lean)
    said = run("fit", lean)
    assert said.status == 130
    assert contents(lean) == before
    assert "interrupted" in said.err


@pytest.mark.skipif(os.name != "posix", reason="a pipe whose reader has gone is made the POSIX way")
def test_a_reader_that_has_gone_is_no_error(model_json):
    reading, writing = os.pipe()
    os.close(reading)
    try:
        said = run_outside("netlist", model_json, stdout=writing)
    finally:
        os.close(writing)
    assert said.err == ""
    assert said.status == 0


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="the system has no /dev/full to write to")
def test_output_that_cannot_be_written_is_no_fault_of_the_tool(model_json):
    with Path("/dev/full").open("wb") as full:
        said = run_outside("netlist", model_json, stdout=full)
    assert said.status == 2
    assert "fault of the tool" not in said.err


# new


def test_new_writes_a_part_folder_and_names_its_files(run, tmp_path):
    said = run("new", tmp_path / "mine")
    assert (said.status, said.err) == (0, "")
    named = {Path(line).name for line in said.out.splitlines()}
    assert named == {path.name for path in (tmp_path / "mine").iterdir()}
    assert "part.toml" in named


@pytest.mark.parametrize("inside", ["part.toml", "ciss.csv", "notes.txt"])
def test_new_overwrites_nothing(run, tmp_path, inside):
    folder = tmp_path / "mine"
    folder.mkdir()
    (folder / inside).write_text("all my work")
    before = contents(tmp_path)
    assert "mine" in refused(run("new", folder))
    assert contents(tmp_path) == before


def test_new_in_place_of_a_file_is_refused(run, tmp_path):
    (tmp_path / "mine").write_text("all my work")
    refused(run("new", tmp_path / "mine"))
    assert (tmp_path / "mine").read_text() == "all my work"


def test_check_of_a_new_folder_says_what_to_fill_in(run, tmp_path):
    run("new", tmp_path / "mine")
    message = refused(run("check", tmp_path / "mine"))
    assert "part.name" in message
    assert "ciss.csv" in message


# check


def test_check_of_clean_data_is_content(run, demo_folder):
    said = run("check", demo_folder)
    assert (said.status, said.err) == (0, "")
    assert "stops the fit" not in said.out


def test_check_shows_what_was_read(run):
    said = run("check", PARTS / "cargo_80v")
    assert "CB80N4" in said.out
    for curve in fitter.read_part(PARTS / "cargo_80v").curves:
        assert re.search(rf"{re.escape(curve.name)} +{curve.x.size} .*{re.escape(curve.file)}", said.out)


def test_check_writes_nothing(run, lean):
    before = contents(lean.parent)
    assert run("check", lean).status == 0
    assert contents(lean.parent) == before


def test_check_of_an_unreadable_folder_names_file_line_and_text(run, lean):
    with (lean / "transfer_25C.csv").open("a") as f:
        f.write("-5,many\n")
    lines = (lean / "transfer_25C.csv").read_text().count("\n")
    message = refused(run("check", lean))
    assert f"transfer_25C.csv:{lines}" in message
    assert "many" in message


def test_check_names_every_problem_at_once(run, tmp_path):
    folder = lean_folder(
        tmp_path / "part", [('channel = "p"', 'channel = "q"'), ("vgs_max_V = 20", "vgs_max_V = true")]
    )
    message = refused(run("check", folder))
    assert "part.channel" in message
    assert "part.vgs_max_V" in message


def test_check_of_exchanged_curves_has_status_2(run, lean):
    said = run("check", exchange(lean))
    assert said.status == 2
    assert re.search(r"^stop.*crss", said.out + said.err, re.M)
    assert "Traceback" not in said.err


@pytest.mark.parametrize("name", ["absent", "a_file"])
@pytest.mark.parametrize("command", ["check", "fit", "next"])
def test_what_is_no_folder_is_refused(run, tmp_path, command, name):
    (tmp_path / "a_file").write_text("no folder")
    assert name in refused(run(command, tmp_path / name))
    assert list(contents(tmp_path)) == ["a_file"]


def test_file_names_with_accents_can_be_shown_where_the_screen_knows_none(tmp_path):
    folder = lean_folder(tmp_path / "part", [("transfer_25C.csv", "transfert_mesur\u00e9.csv")])
    (folder / "transfer_25C.csv").rename(folder / "transfert_mesur\u00e9.csv")
    said = run_outside("check", folder, PYTHONIOENCODING="ascii")
    assert (said.status, said.err) == (0, "")
    assert "transfert_mesur" in said.out


# fit


def test_fit_writes_exactly_the_files_it_should(finished):
    _, out, _ = finished
    assert {path.name for path in out.iterdir()} == {*TEXTS, "VAN40P8.lib", "sheet.png", "sheet.pdf"}
    assert all(path.stat().st_size > 0 for path in out.iterdir())


def test_fit_leaves_the_part_folder_alone_where_out_is_given(finished):
    assert contents(finished[0]) == contents(PARTS / P_CHANNEL)


def test_fit_leaves_nothing_beside_its_folder(finished):
    assert [path.name for path in finished[1].parent.iterdir()] == ["here"]


def test_fit_of_clean_data_says_nothing_on_stderr(finished):
    assert finished[2].err == ""


def test_fit_shows_every_parameter_with_its_error(finished, loaded):
    shown = finished[2].out
    for p in loaded.parameters.values():
        error = "" if p.stderr is None else engineering(p.stderr, p.unit, 2)
        columns = [p.name, engineering(p.value, p.unit, 4), *([error] if error else []), p.origin]
        assert re.search("^ *" + " +".join(map(re.escape, columns)) + r"\b", shown, re.M), p.name


def test_fit_shows_stated_beside_fitted(finished, loaded):
    for c in loaded.checks:
        row = re.search(rf"^ *{c.quantity} .*$", finished[2].out, re.M)
        assert row, c.quantity
        assert c.verdict in row[0]
        assert ("fitted" if c.used_in_fit else "check") in row[0]


def test_fit_shows_every_notice(finished, loaded):
    assert loaded.notices
    for notice in loaded.notices:
        assert notice.text in finished[2].out


def test_fit_says_where_its_files_are(finished):
    last = finished[2].out.splitlines()[-1]
    assert last.startswith(str(Path("made/here")))
    for path in finished[1].iterdir():
        assert path.name in last


def test_a_second_run_writes_the_same_bytes(run, finished, tmp_path):
    shutil.copytree(PARTS / P_CHANNEL, tmp_path / "another place")
    said = run("fit", tmp_path / "another place")
    assert (said.status, said.err) == (0, "")
    assert contents(tmp_path / "another place" / "model") == contents(finished[1])


def test_fit_writes_into_the_part_folder_by_default(run, lean):
    assert run("fit", lean).status == 0
    assert {*TEXTS, "VAN40P8.lib"} < {path.name for path in (lean / "model").iterdir()}


def test_fit_into_its_own_part_folder_is_refused(run, lean):
    before = contents(lean)
    outcome = run("fit", lean, "--out", lean)
    assert outcome.status == 2
    assert "choose another --out" in outcome.err
    assert contents(lean) == before


def test_fit_again_replaces_what_an_earlier_run_wrote(run, lean):
    run("fit", lean)
    (lean / "model" / "my notes.txt").write_text("mine")
    text = (lean / "part.toml").read_text("utf-8")
    (lean / "part.toml").write_text(text.replace('"VAN40P8"', '"RENAMED"'), "utf-8")
    assert run("fit", lean).status == 0
    names = {path.name for path in (lean / "model").iterdir()}
    assert "RENAMED.lib" in names
    assert "VAN40P8.lib" not in names
    assert (lean / "model" / "my notes.txt").read_text() == "mine"


def test_fit_does_not_use_the_gate_charge_unless_told(run, lean):
    run("fit", lean)
    model = fitter.load_model(lean / "model" / "model.json")
    assert not model.used_gate_charge
    assert not any(c.used_in_fit for c in model.checks if c.quantity == "qg")


def test_fit_uses_the_gate_charge_where_told(run, lean):
    assert run("fit", lean, "--use-gate-charge").status == 0
    model = fitter.load_model(lean / "model" / "model.json")
    assert model.used_gate_charge
    assert all(c.used_in_fit for c in model.checks if c.quantity == "qg")
    assert model.parameters["c_acc"].origin == "fitted"


@pytest.fixture
def violated(tmp_path, lean):
    return lean_folder(tmp_path / "violated", [("typ = 52, max = 67", "typ = 30, max = 31")])


def test_a_violated_limit_has_status_1_where_strict(run, violated):
    said = run("fit", violated, "--strict")
    assert (said.status, said.err) == (1, "")
    assert re.search(r"^ *qg .*outside limit", said.out, re.M)
    assert set(TEXTS) < {path.name for path in (violated / "model").iterdir()}


def test_a_violated_limit_has_status_0_where_not_strict(run, violated):
    said = run("fit", violated)
    assert said.status == 0
    assert "outside limit" in said.out


def test_strict_with_limits_that_hold_has_status_0(run, lean):
    said = run("fit", lean, "--strict")
    assert said.status == 0
    assert "outside limit" not in said.out


def test_fit_of_an_unreadable_folder_writes_nothing(run, lean):
    (lean / "transfer_25C.csv").unlink()
    before = contents(lean.parent)
    assert "transfer_25C.csv" in refused(run("fit", lean, "--out", lean.parent / "out"))
    assert contents(lean.parent) == before


def test_fit_of_meaningless_data_writes_nothing(run, lean):
    before = contents(exchange(lean))
    assert "crss" in refused(run("fit", lean))
    assert contents(lean) == before


def test_fit_of_too_few_points_writes_nothing(run, lean):
    lines = (lean / "capacitance.csv").read_text().splitlines()
    (lean / "capacitance.csv").write_text("\n".join(lines[:7]) + "\n")
    before = contents(lean.parent)
    refused(run("fit", lean))
    assert contents(lean.parent) == before


def test_fit_does_not_write_over_a_file(run, lean):
    out = lean.parent / "out"
    out.write_text("mine")
    assert "out" in refused(run("fit", lean, "--out", out))
    assert out.read_text() == "mine"


def test_fit_that_cannot_write_leaves_what_was_there(run, lean, monkeypatch):
    run("fit", lean)
    before = contents(lean)

    def full(_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    assert "No space left on device" in refused(run("fit", lean, "--use-gate-charge"))
    assert contents(lean) == before


def test_what_is_shown_has_no_markup_of_user_text(run, tmp_path, lean):
    folder = lean_folder(tmp_path / "marked", [("transfer_25C.csv", "[bold]transfer[red].csv")])
    (folder / "transfer_25C.csv").rename(folder / "[bold]transfer[red].csv")
    assert "[bold]transfer[red].csv" in run("check", folder).out


def test_fit_predicts_each_group_of_data_where_told(run, lean):
    said = run("fit", lean, "--leave-out")
    assert (said.status, said.err) == (0, "")
    rows = (lean / "model" / "left_out.csv").read_text().splitlines()[1:]
    assert rows
    for row in rows:
        assert re.search(rf"^ *{re.escape(row.split(',')[0])} ", said.out, re.M)


def test_such_predictions_do_not_outlive_a_run_that_makes_none(run, lean):
    run("fit", lean, "--leave-out")
    run("fit", lean)
    assert not (lean / "model" / "left_out.csv").exists()


# next


def test_next_ranks_what_to_digitize_and_writes_nothing(run, lean):
    before = contents(lean)
    said = run("next", lean)
    assert (said.status, said.err) == (0, "")
    rows = re.findall(
        r"^ *(.+?) {2,}.* (\d+) % *$", said.out.partition("all that is given")[2].partition("\n")[2], re.M
    )
    gains = [int(gain) for what, gain in rows if "second time" not in what]
    assert len(gains) > 1
    assert gains == sorted(gains, reverse=True)
    assert contents(lean) == before


def test_next_of_an_unreadable_folder_is_refused(run, lean):
    (lean / "transfer_25C.csv").unlink()
    assert "transfer_25C.csv" in refused(run("next", lean))


# netlist


def test_netlist_goes_to_the_screen(run, model_json, loaded):
    assert run("netlist", model_json) == Outcome(0, loaded.subcircuit(), "")


def test_netlist_is_the_one_that_fit_wrote(run, finished):
    assert run("netlist", finished[1] / "model.json").out == (finished[1] / "VAN40P8.lib").read_text()


def test_netlist_goes_into_a_file(run, tmp_path, model_json, loaded):
    said = run("netlist", model_json, "--out", tmp_path / "part.lib")
    assert said == Outcome(0, f"{tmp_path / 'part.lib'}\n", "")
    assert (tmp_path / "part.lib").read_bytes() == loaded.subcircuit().encode()
    assert [path.name for path in tmp_path.iterdir()] == ["part.lib"]


def test_netlist_at_another_temperature(run, model_json, loaded):
    said = run("netlist", model_json, "--tj", "125")
    assert said == Outcome(0, loaded.subcircuit(t_j=125.0), "")
    assert said.out != loaded.subcircuit()


@pytest.mark.parametrize("t_j", ["300", "-150"])
def test_netlist_says_once_that_it_extrapolates(run, model_json, t_j):
    said = run("netlist", model_json, "--tj", t_j)
    assert said.status == 0
    assert said.out.rstrip().endswith(".ENDS VAN40P8")
    (line,) = said.err.splitlines()
    assert line.startswith("fetwright: note: ")
    assert f"{t_j} C" in line
    assert "extrapolate" in line


def test_the_note_comes_once_from_a_process_of_its_own(model_json):
    said = run_outside("netlist", model_json, "--tj", "300")
    assert said.status == 0
    assert len(said.err.splitlines()) == 1
    assert "Warning" not in said.err


@pytest.mark.parametrize("t_j", ["-273.15", "-300", "nan", "inf"])
def test_netlist_at_no_temperature_is_refused(run, tmp_path, model_json, t_j):
    refused(run("netlist", model_json, "--tj", t_j, "--out", tmp_path / "part.lib"))
    assert contents(tmp_path) == {}


def test_netlist_at_a_temperature_the_model_knows_nothing_of_is_refused(run, lean):
    run("fit", lean)
    message = refused(run("netlist", lean / "model" / "model.json", "--tj", "100"))
    assert "25 C" in message


@pytest.mark.parametrize("command", [["netlist"], ["charge", "--vdd", "20", "--id", "30", "--vgs", "10"]])
@pytest.mark.parametrize("text", [None, "", "{", "[]", "not json", '{"format": "fetwright model"}'])
def test_what_is_no_model_file_is_refused(run, tmp_path, command, text):
    path = tmp_path / "model.json"
    if text is not None:
        path.write_text(text)
    before = contents(tmp_path)
    assert "model.json" in refused(run(command[0], path, *command[1:], "--out", tmp_path / "out"))
    assert contents(tmp_path) == before


@pytest.mark.parametrize("out", ["absent/part.lib", "."])
def test_netlist_that_cannot_be_written_is_refused(run, tmp_path, model_json, out):
    message = refused(run("netlist", model_json, "--out", tmp_path / out))
    assert "cannot be written" in message
    assert contents(tmp_path) == {}


# charge

POINT = ("--vdd", "20", "--id", "30", "--vgs", "10")


@pytest.mark.parametrize("load", ["current", "resistive"])
def test_charge_shows_the_figures_with_their_intervals(run, model_json, loaded, load):
    said = run("charge", model_json, *POINT, "--load", load)
    assert (said.status, said.err) == (0, "")
    found = loaded.gate_charge_intervals(20.0, 30.0, 10.0, load)
    for label, name, unit in (
        ("QG", "qg", "C"), ("QGS", "qgs", "C"), ("QGD", "qgd", "C"), ("plateau", "v_plateau", "V"),
    ):  # fmt: skip
        value, low, high = (engineering(getattr(found[name], key), unit) for key in ("value", "low", "high"))
        assert re.search(rf"^ *{label} +{re.escape(value)} +{re.escape(low)} to {re.escape(high)} *$", said.out, re.M)


def test_charge_assumes_a_current_source(run, model_json):
    assert run("charge", model_json, *POINT) == run("charge", model_json, *POINT, "--load", "current")


def test_charge_of_a_p_channel_part_takes_its_signs_or_magnitudes(run, model_json):
    signed = run("charge", model_json, "--vdd", "-20", "--id", "-30", "--vgs", "-10")
    assert signed.status == 0
    assert signed == run("charge", model_json, *POINT)


@pytest.mark.parametrize("load", ["current", "resistive"])
def test_charge_writes_the_curve(run, tmp_path, model_json, loaded, load):
    out = tmp_path / "mine.csv"
    said = run("charge", model_json, *POINT, "--load", load, "--out", out)
    assert (said.status, said.err) == (0, "")
    assert said.out.splitlines()[-1] == str(out)
    header, *rows = csv.reader(out.read_text().splitlines())
    assert header == ["qg_nC", "vgs_V", "vds_V", "id_A"]
    curve = loaded.gate_charge(20.0, 30.0, 10.0, load)
    assert len(rows) == len(curve.q_g)
    first, last = ([float(cell) for cell in rows[k]] for k in (0, -1))
    assert first == pytest.approx([0.0, 0.0, -20.0, 0.0], abs=1e-6)
    assert last[0] == pytest.approx(curve.total * 1e9, rel=1e-9)
    assert last[1] == pytest.approx(-10.0)
    assert -1.0 < last[2] < 0.0
    assert last[3] == pytest.approx(-30.0, rel=0.05)


def test_charge_at_another_temperature(run, model_json, loaded):
    said = run("charge", model_json, *POINT, "--tj", "125")
    assert (said.status, said.err) == (0, "")
    assert engineering(loaded.gate_charge(20.0, 30.0, 10.0, t_j=125.0).v_plateau, "V") in said.out


@pytest.mark.parametrize(
    "arguments, said_of",
    [
        (["--vdd", "50", "--id", "30", "--vgs", "10"], ["VDD = 50 V lies above the rated 40 V"]),
        (["--vdd", "20", "--id", "30", "--vgs", "25"], ["VGS = 25 V lies above the rated 20 V"]),
        (["--vdd", "20", "--id", "170", "--vgs", "10"], ["ID = 170 A lies above"]),
        (["--vdd", "20", "--id", "30", "--vgs", "10", "--tj", "200"], ["200 C lies outside"]),
        (
            ["--vdd", "50", "--id", "30", "--vgs", "25", "--tj", "200"],
            ["200 C lies outside", "VDD = 50 V lies above", "VGS = 25 V lies above"],
        ),
    ],
)
def test_charge_says_once_where_it_goes_beyond_what_is_known(run, model_json, arguments, said_of):
    said = run("charge", model_json, *arguments)
    assert said.status == 0
    assert "QG" in said.out
    lines = said.err.splitlines()
    assert len(lines) == len(said_of)
    for line, fragment in zip(lines, said_of, strict=True):
        assert line.startswith("fetwright: note: ")
        assert fragment in line


@pytest.mark.parametrize(
    "arguments",
    [
        ["--vdd", "0", "--id", "30", "--vgs", "10"],
        ["--vdd", "nan", "--id", "30", "--vgs", "10"],
        ["--vdd", "20", "--id", "inf", "--vgs", "10"],
        ["--vdd", "20", "--id", "30", "--vgs", "0"],
        ["--vdd", "20", "--id", "30", "--vgs", "2"],
        ["--vdd", "20", "--id", "30000", "--vgs", "10"],
        ["--vdd", "20", "--id", "30", "--vgs", "10", "--tj", "-400"],
    ],
)
def test_charge_where_there_is_none_is_refused(run, tmp_path, model_json, arguments):
    refused(run("charge", model_json, *arguments, "--out", tmp_path / "mine.csv"))
    assert contents(tmp_path) == {}


@pytest.mark.parametrize(
    "option, figure", [("--vdd", "1e300"), ("--vgs", "1e200"), ("--vdd", "1e-300"), ("--id", "1e-300")]
)
def test_charge_at_an_absurd_figure_is_refused(run, tmp_path, model_json, option, figure):
    arguments = dict(zip(POINT[::2], POINT[1::2], strict=True)) | {option: figure}
    flat = [word for pair in arguments.items() for word in pair]
    refused(run("charge", model_json, *flat, "--out", tmp_path / "mine.csv"))
    assert contents(tmp_path) == {}


def test_charge_that_cannot_be_written_is_refused(run, tmp_path, model_json):
    assert "cannot be written" in refused(run("charge", model_json, *POINT, "--out", tmp_path / "absent" / "mine.csv"))


def test_a_model_file_holds_what_the_commands_need(tmp_path, run, finished):
    alone = tmp_path / "sent by mail.json"
    shutil.copy(finished[1] / "model.json", alone)
    assert run("netlist", alone).status == 0
    assert run("charge", alone, *POINT).status == 0
    assert json.loads(alone.read_text())["version"] == VERSION
