"""A new part folder is written whole or not at all, over nothing, and says what to fill in."""

from __future__ import annotations

import re
import stat
import tomllib
from pathlib import Path

import pytest
from part_folders import CAPACITANCE, TRANSFER

from fitter import new_folder
from fitter.errors import OutputError, PartFolderError
from fitter.new_folder import write_new_folder
from fitter.part import Quantity
from fitter.reader import read_part
from fitter.reading.schema import CURVES, STATED

CSV_FILES = {
    "ciss.csv": "vds_V,ciss_pF",
    "coss.csv": "vds_V,coss_pF",
    "crss.csv": "vds_V,crss_pF",
    "transfer_25C.csv": "vgs_V,id_A",
    "gate_charge.csv": "qg_nC,vgs_V",
    "output.csv": "vds_V,id_A",
    "body_diode_25C.csv": "vsd_V,is_A",
    "rds_on_temperature.csv": "tj_C,rds_on_mohm",
    "vgs_th_temperature.csv": "tj_C,vgs_th_V",
}


def names(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_what_is_written(tmp_path):
    written = write_new_folder(tmp_path / "new")
    assert {path.name for path in written} == {*CSV_FILES, "part.toml"}
    assert written[-1] == tmp_path / "new" / "part.toml"
    assert all(path.is_file() for path in written)
    assert names(tmp_path) == ["new"]
    assert len(names(tmp_path / "new")) == len(written)
    for name, header in CSV_FILES.items():
        assert (tmp_path / "new" / name).read_bytes() == f"{header}\n".encode()
    tomllib.loads(written[-1].read_text(encoding="utf-8"))


def test_others_may_read_it_as_they_may_other_folders(tmp_path):
    (tmp_path / "usual").mkdir()
    write_new_folder(tmp_path / "new")
    assert stat.S_IMODE((tmp_path / "new").stat().st_mode) == stat.S_IMODE((tmp_path / "usual").stat().st_mode)


def test_reading_it_says_what_to_fill_in(tmp_path):
    write_new_folder(tmp_path / "new")
    with pytest.raises(PartFolderError) as caught:
        read_part(tmp_path / "new")
    found = {(problem.file, problem.place): problem for problem in caught.value.problems}
    assert {place for file, place in found if file == "part.toml"} == {
        *("part.name", "part.channel", "part.vds_max_V", "part.vgs_max_V", "curve 4.vds_V"),
        *(f"curve {n}.{along}_axis" for n in (1, 2, 3, 4) for along in "xy"),
    }
    for (file, _), problem in found.items():
        if file == "part.toml":
            assert problem.found == "nothing is filled in yet"
            assert "expected" in problem.expected
            assert problem.line is not None
        else:
            assert problem.found == "there is a header but no point"
            assert "fill them in" in problem.expected
    assert {file for file, _ in found if file != "part.toml"} == {
        "ciss.csv",
        "coss.csv",
        "crss.csv",
        "transfer_25C.csv",
    }


def filled_in(text: str) -> str:
    """The part file with everything that is commented out put to use, and a figure in every place."""
    text = re.sub(r"^# (?=\[|[a-z_A-Z0-9]+ = )", "", text, flags=re.MULTILINE)
    text = text.replace('name = "fill in"', 'name = "FILLED"').replace('channel = "fill in"', 'channel = "n"')
    text = text.replace('scale = "fill in"', 'scale = "log"')
    text = text.replace('from = "fill in", to = "fill in"', "from = 0.1, to = 1000")
    return text.replace('"fill in"', "50")


def test_everything_in_it_can_be_filled_in(tmp_path):
    folder = tmp_path / "new"
    write_new_folder(folder)
    path = folder / "part.toml"
    path.write_text(filled_in(path.read_text(encoding="utf-8")), encoding="utf-8")
    for name in CSV_FILES:
        with (folder / name).open("a", encoding="utf-8") as stream:
            stream.write("1,10\n2,20\n")
    part = read_part(folder)
    assert {curve.quantity for curve in part.curves} == set(Quantity) == set(CURVES)
    assert part.package.l_s == pytest.approx(50e-9)
    for group, schema in STATED.items():
        stated = getattr(part.stated, group)
        assert stated is not None, group
        for figure in (*schema.conditions, *schema.values):
            assert getattr(stated, figure.name) is not None, figure.key


def test_the_smallest_filling_in(tmp_path):
    folder = tmp_path / "new"
    write_new_folder(folder)
    path = folder / "part.toml"
    text = path.read_text(encoding="utf-8").replace('name = "fill in"', 'name = "A"')
    text = text.replace('channel = "fill in"', 'channel = "n"')
    text = re.sub(r"^[xy]_axis = .*\n", "", text, flags=re.MULTILINE).replace('"fill in"', "50")
    path.write_text(text, encoding="utf-8")
    for name, column in (("ciss.csv", 1), ("coss.csv", 2), ("crss.csv", 3)):
        rows = [line.split(",") for line in CAPACITANCE.splitlines()]
        (folder / name).write_text("".join(f"{row[0]},{row[column]}\n" for row in rows))
    (folder / "transfer_25C.csv").write_text(TRANSFER)
    assert len(read_part(folder).curves) == 4


# Where it may be written


def test_an_empty_folder_is_filled(tmp_path):
    (tmp_path / "empty").mkdir()
    write_new_folder(tmp_path / "empty")
    assert (tmp_path / "empty" / "part.toml").is_file()
    assert names(tmp_path) == ["empty"]


def test_the_current_folder_is_filled_and_stays_the_current_one(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    before = Path.cwd().stat().st_ino
    write_new_folder(".")
    assert Path("part.toml").is_file()
    assert tmp_path.stat().st_ino == before
    assert {path.name for path in tmp_path.iterdir()} == {*CSV_FILES, "part.toml"}


def test_a_link_to_an_empty_folder_is_followed(tmp_path):
    (tmp_path / "empty").mkdir()
    (tmp_path / "link").symlink_to("empty")
    write_new_folder(tmp_path / "link")
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "empty" / "part.toml").is_file()


@pytest.mark.parametrize("name", ["part.toml", "ciss.csv", "something.txt", ".hidden"])
def test_nothing_is_ever_overwritten(tmp_path, name):
    folder = tmp_path / "old"
    folder.mkdir()
    (folder / name).write_text("precious")
    with pytest.raises(OutputError, match=re.escape(f"old: the folder is not empty, it holds '{name}'")):
        write_new_folder(folder)
    assert (folder / name).read_text() == "precious"
    assert names(folder) == [name]
    assert names(tmp_path) == ["old"]


def test_a_file_in_the_way(tmp_path):
    (tmp_path / "file").write_text("precious")
    with pytest.raises(OutputError, match="there is a file of this name already"):
        write_new_folder(tmp_path / "file")
    with pytest.raises(OutputError, match=r"make that first|cannot be written"):
        write_new_folder(tmp_path / "file" / "new")
    assert (tmp_path / "file").read_text() == "precious"


def test_no_folder_above(tmp_path):
    with pytest.raises(OutputError, match=r"there is no folder '.*nowhere' to write it into; make that first"):
        write_new_folder(tmp_path / "nowhere" / "new")
    assert names(tmp_path) == []


@pytest.mark.parametrize("name", ["nul\0", "x" * 5000])
def test_names_that_cannot_be(tmp_path, name):
    with pytest.raises(OutputError, match="cannot be written"):
        write_new_folder(tmp_path / name)
    assert names(tmp_path) == []


# When writing fails half-way


@pytest.mark.parametrize("current", [True, False])
@pytest.mark.parametrize("exists", [True, False])
def test_all_or_nothing(tmp_path, monkeypatch, current, exists):
    folder = tmp_path / "new"
    if exists or current:
        folder.mkdir()
    if current:
        monkeypatch.chdir(folder)
    # A name that no file can have makes the last but one fail.
    name = "x" * 5000
    files = dict(new_folder._FILES)
    part = files.pop("part.toml")
    monkeypatch.setattr(new_folder, "_FILES", files | {name: "", "part.toml": part})
    with pytest.raises(OutputError, match="new: cannot be written"):
        write_new_folder(folder)
    assert names(tmp_path) == (["new"] if exists or current else [])
    assert not folder.exists() or names(folder) == []


def test_a_folder_that_is_filled_meanwhile_is_left_alone(tmp_path, monkeypatch):
    folder = tmp_path / "new"
    really_make = new_folder.tempfile.mkdtemp

    def other_program(**options):
        folder.mkdir()
        (folder / "part.toml").write_text("of the other")
        return really_make(**options)

    monkeypatch.setattr(new_folder.tempfile, "mkdtemp", other_program)
    with pytest.raises(OutputError, match="new: cannot be written"):
        write_new_folder(folder)
    assert (folder / "part.toml").read_text() == "of the other"
    assert names(tmp_path) == ["new"]
