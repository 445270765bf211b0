"""Whatever stands in a part folder: it is read, or one error says what is wrong where, and soon."""

from __future__ import annotations

import copy
import json
import re
import time
from pathlib import Path

import numpy as np
import pytest
from conftest import DEMO_PARTS, ROOT
from hypothesis import HealthCheck, Phase, example, given, settings
from hypothesis import strategies as st
from part_folders import CAPACITANCE, TRANSFER, make_folder

import fitter
from fitter.reading.csv_tables import MAX_ROWS
from fitter.reading.input_files import MAX_CSV_BYTES, MAX_TOML_BYTES

PARTS = ROOT / "digitized_curves"
#: Seconds of the processor that reading and judging one ordinary folder may take, however damaged; it takes some 0.05.
#: Folders as large as they may be get more.
LONGEST, LONGEST_OF_LARGE = 2.0, 20.0

fuzz = settings(
    max_examples=30,
    deadline=None,
    derandomize=True,
    phases=(Phase.explicit, Phase.generate),
    suppress_health_check=list(HealthCheck),
)


def problems_and_part(folder):
    """What is wrong with a folder, and the part where nothing is; every other exception passes, warnings included."""
    try:
        return (), fitter.read_part(folder)
    except fitter.PartFolderError as error:
        return error.problems, None


def read_and_judge(folder, longest=LONGEST):
    """The part, or None where an error says why there is none."""
    begin = time.process_time()
    problems, part = problems_and_part(folder)
    findings = () if part is None else fitter.inspect(part)
    assert time.process_time() - begin < longest
    assert (part is None) == bool(problems)
    for problem in problems:
        assert str(problem).startswith(problem.file)
        assert (folder / problem.file).is_file() or "there is no such file" in problem.found
        assert str(problem).isprintable()
        assert len(str(problem)) < 600
    for finding in findings:
        assert str(finding).isprintable()
    for curve in () if part is None else part.curves:
        assert np.all(np.isfinite([curve.x, curve.y]))
    return part


class Demo:
    """A copy of a demo part, of which one file at a time is replaced."""

    def __init__(self, name, folder):
        self.folder = folder
        self.whole = {path.name: path.read_bytes() for path in sorted((PARTS / name).iterdir()) if path.is_file()}
        folder.mkdir()
        for file, content in self.whole.items():
            (folder / file).write_bytes(content)
        self.tables = [file for file in self.whole if file.endswith(".csv")]

    def read_with(self, file, content):
        """The part with one file replaced, or None."""
        (self.folder / file).write_bytes(content)
        try:
            return read_and_judge(self.folder)
        finally:
            (self.folder / file).write_bytes(self.whole[file])


@pytest.fixture(scope="module")
def demos(tmp_path_factory):
    base = tmp_path_factory.mktemp("demos")
    return [Demo(name, base / name) for name in DEMO_PARTS]


def which(values, number):
    return values[number % len(values)]


numbers = st.integers(0, 10**6)
any_bytes = st.one_of(
    st.binary(max_size=400),
    st.text(max_size=200).map(lambda text: text.encode("utf-8", "surrogatepass")),
    st.text(alphabet=' \t\r\n,;"#.-+eE0123456789_AVC[]{}=\ufeff\u2028\0', max_size=200).map(str.encode),
)


def test_the_folders_that_are_damaged_below_are_whole(demos):
    for demo in demos:
        assert read_and_judge(demo.folder).curves


# Any bytes in one file of a part


@fuzz
@given(data=any_bytes, demo=numbers)
@example(data=b"", demo=0)
@example(data=b"\xff\xfe", demo=0)
@example(data=b"[" * 4000, demo=0)
def test_any_bytes_in_the_part_file_are_an_error_that_names_it(demos, data, demo):
    found = which(demos, demo)
    assert found.read_with("part.toml", data) is None


@fuzz
@given(data=any_bytes, demo=numbers, file=numbers)
def test_any_bytes_in_a_table_are_an_error_that_names_it(demos, data, demo, file):
    found = which(demos, demo)
    assert found.read_with(which(found.tables, file), data) is None


@fuzz
@given(data=any_bytes, demo=numbers, file=numbers, at=numbers)
def test_any_bytes_within_a_file_give_a_part_or_an_error(demos, data, demo, file, at):
    found = which(demos, demo)
    name = which(list(found.whole), file)
    whole = found.whole[name]
    at %= len(whole) + 1
    found.read_with(name, whole[:at] + data[:20] + whole[at:])


@fuzz
@given(demo=numbers, file=numbers, at=numbers)
def test_a_file_that_ends_anywhere_gives_a_part_or_an_error(demos, demo, file, at):
    found = which(demos, demo)
    name = which(list(found.whole), file)
    found.read_with(name, found.whole[name][: at % len(found.whole[name])])


@pytest.mark.parametrize("encoding", ["utf-8-sig", "utf-16", "utf-16-le", "utf-32", "latin-1", "cp037", "utf-7"])
@pytest.mark.parametrize("file", ["part.toml", "gate_charge.csv"])
def test_another_encoding_is_read_alike_or_refused(demos, file, encoding):
    (demo, *_) = demos
    text = demo.whole[file].decode() + "# 25 \u00b0C\n"
    part = demo.read_with(file, text.encode(encoding))
    # A byte-order mark does no harm; what is neither ASCII nor UTF-8 is no text that the tool knows.
    assert (part is not None) == (encoding in ("utf-8-sig", "utf-7"))


# Lines, cells, keys and values


def dropped(pieces, at, other):
    return pieces[:at] + pieces[at + 1 :]


def doubled(pieces, at, other):
    return [*pieces[:at], pieces[at], *pieces[at:]]


def exchanged(pieces, at, other):
    pieces = list(pieces)
    pieces[at], pieces[other] = pieces[other], pieces[at]
    return pieces


def moved_over(pieces, at, other):
    pieces = list(pieces)
    pieces[at] = pieces[other]
    return pieces


shuffles = st.sampled_from([dropped, doubled, exchanged, moved_over])


@settings(fuzz, max_examples=60)
@given(demo=numbers, file=numbers, edits=st.lists(st.tuples(shuffles, numbers, numbers), min_size=1, max_size=3))
def test_lines_dropped_doubled_or_exchanged_give_a_part_or_an_error(demos, demo, file, edits):
    found = which(demos, demo)
    # Every other time the part file, which has the most to say.
    name = "part.toml" if file % 2 else which(found.tables, file // 2)
    lines = found.whole[name].decode().splitlines(keepends=True)
    for edit, at, other in edits:
        if lines:
            lines = edit(lines, at % len(lines), other % len(lines))
    found.read_with(name, "".join(lines).encode())


NUMBERS = """
0 -0 0.0 1 -1 1e9 -1e9 1e-9 1e-300 5e-324 1e-400 1e5 99999 1e15 1e300 1.8e308 1e400 -1e400 nan NaN inf -inf 1e+400
0x10 1_000 1,5 1.000,5 1'000 12.5.6 1e 1e1e1 --1 +1 .5 5. 1e-5 1\u22121 \u0663 \uff11 \u00bd"""
WORDS = """
true false none null - -- n/a #N/A = =1+1 @ { } [ ] [[ ]] [] {} 1970-01-01 'x' "x" \\ \\u0000 \u00b5 \u03bc "fill" ' "
"../x.csv" "part.toml" "log" "linear" "ciss" "output" "p" """
OTHERS = (
    "", " ", "\t", "\x00", "\x1b[31m", "\u2028", "\u202e", "\ufeff", "\U0001f50c", '"fill in"', "{ typ = 1, max = 2 }",
    "9" * 39, "9" * 41, "9" * 3900, "0." + "0" * 30 + "1", "x" * 100, '"' + "\u0130" * 50 + '"', '"' * 3, "'" * 3,
)  # fmt: skip
tokens = st.sampled_from(NUMBERS.split()) | st.sampled_from(WORDS.split()) | st.sampled_from(OTHERS)


@settings(fuzz, max_examples=60)
@given(demo=numbers, file=numbers, row=numbers, column=numbers, token=tokens)
def test_any_one_cell_replaced_gives_a_part_or_an_error(demos, demo, file, row, column, token):
    found = which(demos, demo)
    name = which(found.tables, file)
    lines = found.whole[name].decode().splitlines()
    rows = [number for number, line in enumerate(lines) if line and not line.startswith("#")]
    row = which(rows, row)
    cells = lines[row].split(",")
    cells[column % len(cells)] = token
    lines[row] = ",".join(cells)
    found.read_with(name, "\n".join(lines).encode("utf-8", "surrogatepass"))


@settings(fuzz, max_examples=30)
@given(demo=numbers, file=numbers, column=numbers, token=tokens)
def test_any_one_column_replaced_gives_a_part_or_an_error(demos, demo, file, column, token):
    found = which(demos, demo)
    name = which(found.tables, file)
    header, *lines = [line for line in found.whole[name].decode().splitlines() if line and not line.startswith("#")]
    rows = [line.split(",") for line in lines]
    for cells in rows:
        cells[column % len(cells)] = token
    found.read_with(name, "\n".join([header, *(",".join(cells) for cells in rows)]).encode("utf-8", "surrogatepass"))


@settings(fuzz, max_examples=30)
@given(demo=numbers, file=numbers, column=numbers, factor=st.sampled_from([0.0, -1.0, 1e-320, 1e-30, 1e-6, 1e6, 1e300]))
def test_any_one_column_scaled_gives_a_part_or_an_error(demos, demo, file, column, factor):
    found = which(demos, demo)
    name = which(found.tables, file)
    header, *lines = [line for line in found.whole[name].decode().splitlines() if line and not line.startswith("#")]
    rows = [line.split(",") for line in lines]
    for cells in rows:
        at = column % len(cells)
        cells[at] = f"{float(cells[at]) * factor:.17g}" if cells[at] else ""
    found.read_with(name, "\n".join([header, *(",".join(cells) for cells in rows)]).encode())


VALUE = re.compile(r'"[^"\n]*"|(?<![\w"])-?\d[\d.e+-]*')
KEY = re.compile(r"[A-Za-z_]\w*(?= *=)")


@settings(fuzz, max_examples=60)
@given(demo=numbers, at=numbers, token=tokens)
def test_any_one_value_of_the_part_file_replaced_gives_a_part_or_an_error(demos, demo, at, token):
    found = which(demos, demo)
    text = found.whole["part.toml"].decode()
    place = which([*VALUE.finditer(text)], at)
    text = text[: place.start()] + token + text[place.end() :]
    found.read_with("part.toml", text.encode("utf-8", "surrogatepass"))


@settings(fuzz, max_examples=50)
@given(demo=numbers, at=numbers, other=numbers, token=st.none() | tokens)
def test_any_one_key_of_the_part_file_replaced_gives_a_part_or_an_error(demos, demo, at, other, token):
    found = which(demos, demo)
    text = found.whole["part.toml"].decode()
    keys = [*KEY.finditer(text)]
    place = which(keys, at)
    # By another of its own keys, or by anything.
    new = which(keys, other)[0] if token is None else token
    text = text[: place.start()] + new + text[place.end() :]
    found.read_with("part.toml", text.encode("utf-8", "surrogatepass"))


@settings(fuzz, max_examples=30)
@given(demo=numbers, at=numbers, other=numbers)
def test_any_curve_with_the_table_of_another_gives_a_part_or_an_error(demos, demo, at, other):
    found = which(demos, demo)
    text = found.whole["part.toml"].decode()
    place = which([*re.finditer(r'(?<=file = )"[^"]*"', text)], at)
    text = text[: place.start()] + f'"{which(found.tables, other)}"' + text[place.end() :]
    found.read_with("part.toml", text.encode())


# Values next to nothing, which are numbers all the same


@pytest.mark.parametrize("least", ["1e-320", "5e-324", "1e-300", "0"])
@pytest.mark.parametrize("printed", [True, False])
def test_a_voltage_next_to_nothing_is_read_as_none(tmp_path, least, printed):
    # The ratio of the last voltage to it is more than a number can hold.
    edits = {} if printed else {'x_axis = { scale = "log", from = 0.1, to = 100 }\n': ""}
    table = CAPACITANCE.replace("\n0.1,", f"\n{least},")
    part = read_and_judge(make_folder(tmp_path / "part", edits, files={"capacitance.csv": table}))
    # On a logarithmic axis there is no zero.
    assert part is None if printed else part.curves[0].x[0] == 0.0


@pytest.mark.parametrize("least", ["1e-320", "1e-200"])
def test_currents_next_to_nothing_are_read_as_none(tmp_path, least):
    axis = 'y_axis = { scale = "linear", from = 0, to = 200 }\n'
    table = TRANSFER.replace("\n3.5,2", f"\n3.5,{least}")
    part = read_and_judge(make_folder(tmp_path / "part", {axis: ""}, files={"transfer.csv": table}))
    assert part.curves[3].y[0] == 0.0


def all_of(table, column, value):
    """A table with one value in all cells of a column."""
    header, *rows = [line.split(",") for line in table.splitlines() if line and not line.startswith("#")]
    return "\n".join(",".join(row) for row in [header, *([*r[:column], value, *r[column + 1 :]] for r in rows)])


@pytest.mark.parametrize("value", ["0", "-0.0", "1e-200"])
def test_a_curve_of_zeros_is_refused_unless_it_is_one_of_currents(demos, value):
    for demo in demos:
        for file in demo.tables:
            text = demo.whole[file].decode()
            part = demo.read_with(file, all_of(text, 1, value).encode())
            currents = re.search(r"^\w+,i[ds]_A$", text, flags=re.M)
            assert part is None or currents, file
        assert any(file.startswith("gate_charge") for file in demo.tables)


# As large as it may be

WIDE = "vds_V,vgs_V,qg_nC,vsd_V,tj_C,ciss_pF,coss_pF,crss_pF,id_A,is_A,rds_on_mohm,vgs_th_V\n"


@pytest.mark.parametrize("cell", ["x", "1,5"], ids=["no numbers", "too many cells"])
def test_a_table_of_nothing_but_slips_is_refused_soon(tmp_path, cell):
    table = WIDE + (",".join([cell] * 12) + "\n") * (MAX_ROWS - 1)
    assert len(table) < MAX_CSV_BYTES
    folder = make_folder(tmp_path / "part", files={"transfer.csv": table})
    assert read_and_judge(folder, LONGEST_OF_LARGE) is None


@pytest.mark.parametrize("line", ["\n", "#\n", " \n", "\r"])
def test_a_table_of_nothing_but_empty_lines_is_read_soon(tmp_path, line):
    table = TRANSFER + line * ((MAX_CSV_BYTES - len(TRANSFER)) // len(line))
    folder = make_folder(tmp_path / "part", files={"transfer.csv": table})
    assert read_and_judge(folder, LONGEST_OF_LARGE)


def test_a_curve_of_as_many_points_as_there_may_be_is_read_and_judged_soon(tmp_path):
    rows = range(1, MAX_ROWS)
    transfer = "vgs_V,id_A\n" + "".join(f"{3 + n / 1e4:.4f},{n * n / 2e6:.6f}\n" for n in rows)
    folder = make_folder(tmp_path / "part", files={"transfer.csv": transfer})
    assert len(read_and_judge(folder, LONGEST_OF_LARGE).curves[3].x) == MAX_ROWS - 1


@pytest.mark.parametrize(
    "line",
    [
        "k{n} = 1\n",
        "qg_nC{n} = 1\n",
        "[a{n}]\n",
        "[[curve]]\n",
        "a" + ".a" * 400 + "{n} = 1\n",
        "x{n} = " + "9" * 2000 + "\n",
    ],
    ids=["unknown keys", "unknown units", "unknown tables", "empty curves", "dotted keys", "huge numbers"],
)
def test_a_part_file_of_nothing_but_slips_is_refused_soon(tmp_path, line):
    text = "".join(line.format(n=n) for n in range(3500))[: MAX_TOML_BYTES - 2000]
    text = text[: text.rfind("\n") + 1]
    folder = make_folder(tmp_path / "part", append="\n" + text)
    assert read_and_judge(folder, LONGEST_OF_LARGE) is None


# Model files with a parameter less

MODELS = sorted((Path(__file__).parent / "fuzz" / "corpus" / "model").glob("*.json"))


def without(data, name):
    """The data of a model file without one parameter of its estimate, and all that belongs to it."""
    data = copy.deepcopy(data)
    estimate = data["estimate"]
    if name in estimate["free"]:
        at = estimate["free"].index(name)
        for row in (estimate["free"], estimate["coordinates"], estimate["covariance"], *estimate["covariance"]):
            del row[at]
    else:
        del estimate["fixed"][name]
    data["parameters"].pop(name, None)
    return data


@pytest.mark.parametrize("path", MODELS, ids=lambda path: path.stem)
def test_a_model_file_without_any_one_of_its_parameters_is_read_or_refused(path, tmp_path):
    whole = json.loads(path.read_text())
    assert fitter.load_model(path).part.name == whole["part"]["name"]
    names = [*whole["estimate"]["free"], *whole["estimate"]["fixed"]]
    refused = {}
    for name in names:
        damaged = tmp_path / "model.json"
        damaged.write_text(json.dumps(without(whole, name)))
        try:
            model = fitter.load_model(damaged)
        except fitter.ModelFileError as error:
            refused[name] = str(error)
        else:
            assert np.all(np.isfinite(model.drain_current(10.0, 10.0)))
    assert all(message.startswith(f"{damaged}: ") for message in refused.values())
    for name in ("v_th", "k", "w", "lambda", "r_s", "r_d", "c_gs"):
        assert f"parameter {name!r} is missing" in refused[name]
