"""Every way of being wrong gets a message: where, what was found, what was expected and what to do."""

from __future__ import annotations

import shutil
import time

import pytest
from conftest import ROOT
from part_folders import CAPACITANCE, PART, check, curve, make_folder, messages, problems_of

from fitter.reader import MAX_CURVES, MAX_NOTES
from fitter.reading.csv_tables import MAX_COLUMNS, MAX_CSV_LINE, MAX_ROWS
from fitter.reading.problems import MAX_PROBLEMS, MAX_PROBLEMS_PER_FILE, quoted
from fitter.reading.toml_tables import MAX_KEYS, MAX_LINE

# The part file's tables and keys


@pytest.mark.parametrize(
    ("edits", "fragments"),
    [
        ({"vds_max_V": "vds_mx_V"}, None),
        ({'name = "TESTPART"\n': ""}, ("part.toml:1 [part]: the key 'name' is missing", "letter")),
        ({'name = "TESTPART"': 'name = "1N"'}, ("part.toml:2 [part.name]: found '1N'", "a letter")),
        ({'name = "TESTPART"': 'name = "A\\n.control"'}, ("part.toml:2 [part.name]: found 'A\\n.control'",)),
        ({'name = "TESTPART"': f'name = "{"A" * 33}"'}, ("part.toml:2 [part.name]", "at most 32")),
        ({'name = "TESTPART"': 'name = "Ä"'}, ("part.toml:2 [part.name]: found 'Ä'",)),
        ({'name = "TESTPART"': 'name = ""'}, ("part.toml:2 [part.name]: found ''",)),
        ({'name = "TESTPART"': "name = 7"}, ("part.toml:2 [part.name]: found 7",)),
        ({'channel = "n"': 'channel = "N"'}, ("part.toml:3 [part.channel]: found 'N'", "did you mean 'n'?")),
        ({'channel = "n"\n': ""}, ("[part]: the key 'channel' is missing", "'n' or 'p'")),
        ({"vds_max_V = 80": "vds_max_V = -80"}, ("part.toml:4 [part.vds_max_V]: found -80", "from 1 mV")),
        ({"vds_max_V = 80": "vds_max_V = 0"}, ("[part.vds_max_V]: found 0; expected a voltage",)),
        ({"vds_max_V = 80": "vds_max_V = 1e9"}, ("[part.vds_max_V]: found 1000000000;", "to 100 kV")),
        ({"vds_max_V = 80": "vds_max_V = nan"}, ("[part.vds_max_V]: found nan",)),
        ({"vds_max_V = 80": "vds_max_V = -inf"}, ("[part.vds_max_V]: found -inf",)),
        ({"vds_max_V = 80": f"vds_max_V = 1{'0' * 400}"}, ("a number of very many digits",)),
        ({"vds_max_V = 80": "vds_max_V = true"}, ("[part.vds_max_V]: found true",)),
        ({"vds_max_V = 80": 'vds_max_V = "80"'}, ("found '80'", "write the number without quotes")),
        ({"vds_max_V = 80": 'vds_max_V = "much"'}, ("found 'much'; expected a voltage",)),
        ({"vds_max_V = 80": "vds_max_V = [80]"}, ("found a list",)),
        ({"vds_max_V = 80": "vds_max_V = {typ = 80}"}, ("found a table",)),
        ({"vds_max_V = 80": "vds_max_V = 2024-01-01"}, ("found 2024-01-01",)),
        ({"vds_max_V = 80": "vds_max_kA = 80"}, ("part.toml:4 [part.vds_max_kA]: unit 'kA'", "'vds_max_V'")),
        ({"vds_max_V = 80": "vds_max_v = 80"}, ("[part.vds_max_v]: unit 'v'", "'vds_max_V'")),
        ({"vds_max_V = 80": "vds_max = 80"}, ("[part.vds_max]: the unit is missing", "'vds_max_V'")),
        ({"vds_max_V = 80": "vds_max_V = 80\nvds_max_kV = 0.08"}, ("part.toml:5 [part.vds_max_kV]", "twice")),
        ({"vds_max_V = 80\n": ""}, ("part.toml:1 [part]: the key 'vds_max_V' is missing",)),
        ({'notes = "Invented."': 'nots = "x"'}, ("unknown key 'nots'; did you mean 'notes'?",)),
        ({'notes = "Invented."': 'zzz = "x"'}, ("unknown key 'zzz'", "name, channel, notes, vds_max_V")),
        (
            {'notes = "Invented."': 'notes = "a\\nR1 0 1 1"'},
            ("[part.notes]: 'a\\nR1 0 1 1' holds", "one line"),
        ),
        ({'notes = "Invented."': 'notes = "a\\u2028b"'}, ("[part.notes]: 'a\\u2028b' holds",)),
        ({'notes = "Invented."': 'notes = "a\\u202eb"'}, ("holds line ends or control characters",)),
        ({'notes = "Invented."': f'notes = "{"x" * (MAX_NOTES + 1)}"'}, (f"a text of {MAX_NOTES + 1}",)),
        ({'notes = "Invented."': "notes = 3"}, ("[part.notes]: found 3",)),
        ({"[part]": "[prt]"}, None),
        (
            {"vds_V = 10": 'vds_V = 10\nload = "current"'},
            ("part.toml:32 [curve 4.load]: 'load' is no condition",),
        ),
        (
            {"vds_V = 10": "vds_V = 10\nvgs_V = 5"},
            ("[curve 4.vgs_V]: 'vgs_V' is no condition of a transfer",),
        ),
        (
            {"vds_V = 10": "vds_V = 10\nvdd_mV = 5"},
            ("[curve 4.vdd_mV]", "only its own conditions: vds_V, tj_C"),
        ),
        ({"vds_V = 10\n": ""}, ("part.toml:26 [curve 4]: the condition 'vds_V' is missing",)),
        ({"vds_V = 10": "vds_V = 0"}, ("[curve 4.vds_V]: found 0",)),
        ({"vds_V = 10": "vds_V = -10"}, ("[curve 4.vds_V]: found -10",)),
        ({"vds_V = 10": "vds_V = 10\ntj_C = -300"}, ("[curve 4.tj_C]: found -300", "from -100 to 500 C")),
        ({"vds_V = 10": "vds_V = 10\ntj_K = 300"}, ("[curve 4.tj_K]: unit 'K'", "'tj_C'")),
        (
            {"vds_V = 10": "vds_V = 10\npoint_error = 3"},
            ("[curve 4.point_error]: found 3;", "such as 0.003"),
        ),
        ({"vds_V = 10": "vds_V = 10\naxis_error = 0"}, ("[curve 4.axis_error]: found 0;",)),
        ({"vds_V = 10": 'vds_V = 10\naxis_error = "x"'}, ("[curve 4.axis_error]: found 'x'",)),
        ({"vds_V = 10": "vds_V = 10\nvgs_th_V = 1"}, ("unknown key 'vgs_th_V'",)),
        ({'"transfer"': '"trnasfer"'}, ("part.toml:27 [curve 4.quantity]", "did you mean 'transfer'?")),
        ({'"transfer"': "5"}, ("[curve 4.quantity]: found 5",)),
        ({'quantity = "transfer"\n': ""}, ("[curve 4]: the key 'quantity' is missing", "'gate_charge'")),
        ({'file = "transfer.csv"\n': ""}, ("[curve 4]: the key 'file' is missing", "a CSV file")),
        ({"from = 0, to = 6": "from = 0"}, ("part.toml:29 [curve 4.x_axis]: the key 'to' is missing",)),
        ({"from = 0, to = 6": "from = 0, till = 6, to = 6"}, ("[curve 4.x_axis.till]: unknown key",)),
        ({"from = 0, to = 6": 'from = 0, to = "six"'}, ("part.toml:29 [curve 4.x_axis.to]: found 'six'",)),
        ({"from = 0, to = 6": "from = 0, to = inf"}, ("[curve 4.x_axis.to]: found inf",)),
        ({"from = 0, to = 6": "from = 0, to = 1e300"}, ("[curve 4.x_axis.to]: found 1e+300",)),
        (
            {"from = 0, to = 6": "from = 6, to = 6"},
            ("[curve 4.x_axis]: the axis has no length: from 6 to 6",),
        ),
        (
            {'"linear", from = 0, to = 6': '"log", from = 0, to = 6'},
            ("logarithmic axis from 0 to 6", "linear"),
        ),
        ({'"linear", from = 0, to = 6': '"log", from = -1, to = 6'}, ("logarithmic axis from -1 to 6",)),
        (
            {'"linear", from = 0, to = 6': '"lin", from = 0, to = 6'},
            ("x_axis.scale]: found 'lin'", "'linear'?"),
        ),
        ({'scale = "linear", from = 0, to = 6': "from = 0, to = 6"}, ("the key 'scale' is missing",)),
        (
            {'x_axis = { scale = "linear", from = 0, to = 6 }': "x_axis = 6"},
            ("[curve 4.x_axis]: found 6", "{ scale"),
        ),
    ],
)
def test_part_file(tmp_path, edits, fragments):
    folder = make_folder(tmp_path, edits)
    if fragments is None:  # two problems: the missing one, and the unknown one that is most like it
        missing, unknown = sorted(messages(folder), key=lambda text: "unknown" in text)
        assert "is missing" in missing
        assert "unknown key" in unknown
        assert "did you mean" in unknown
    else:
        check(folder, fragments)


@pytest.mark.parametrize(
    ("append", "fragments"),
    [
        ("[packge]\nrg_ohm = 1\n", "part.toml:32 [packge]: unknown key 'packge'; did you mean 'package'?"),
        (
            "[package]\nrg_ohm = -1\n",
            "part.toml:33 [package.rg_ohm]: found -1; expected zero or a resistance",
        ),
        (
            "[package]\nlg_H = 3\n",
            "[package.lg_H]: found 3; expected zero or an inductance from 100 fH to 10 uH",
        ),
        ("[package]\nlg_nF = 3\n", "[package.lg_nF]: unit 'nF' is not 'H'"),
        ("[package]\nrx_ohm = 3\n", "unknown key 'rx_ohm'; did you mean 'rg_ohm'?"),
        ("[reading]\npoint = 0.3\n", "[reading.point]: found 0.3; expected a share"),
        ("[reading]\naxis = -1\n", "[reading.axis]: found -1;"),
        ("[reading]\npoints = 0.003\n", "[reading.points]: unknown key 'points'; did you mean 'point'?"),
        (
            "[stated.gatecharge]\nx = 1\n",
            "[stated.gatecharge]: unknown key 'gatecharge'; did you mean 'gate_charge'?",
        ),
        ("[stated.capacitance]\nciss_pF = 3\n", "[stated.capacitance]: the condition 'vds_V' is missing"),
        ("[stated.threshold]\nvgs_th_V = 3\n", "[stated.threshold]: the condition 'id_mA' is missing"),
        ("[stated.on_resistance]\nvgs_V = 10\nrds_on_mohm = 3\n", "the condition 'id_A' is missing"),
        ("[stated.body_diode]\nvsd_V = 1\n", "[stated.body_diode]: the condition 'is_A' is missing"),
        ("[stated.body_diode]\nif_A = 1\ntrr_ns = 1\n", "the condition 'di_dt_A_per_us' is missing"),
        ("[stated.body_diode]\nif_A = 1\ndi_dt_A = 1\ntrr_ns = 1\n", "[stated.body_diode.di_dt_A]: unit 'A'"),
        ("[stated.threshold]\nid_mA = 1\nvgs_th_V = -3\n", "[stated.threshold.vgs_th_V]: found -3"),
        (
            "[stated.threshold]\nid_mA = 1\nvgs_th_V = {}\n",
            "found a table; expected one or more of min, typ and max",
        ),
        (
            "[stated.threshold]\nid_mA = 1\nvgs_th_V = { typ = 0 }\n",
            "[stated.threshold.vgs_th_V.typ]: found 0",
        ),
        ("[stated.threshold]\nid_mA = 1\nvgs_th_V = { tpy = 3 }\n", "unknown key 'tpy'; did you mean 'typ'?"),
        (
            "[stated.threshold]\nid_mA = 1\nvgs_th_V = { typ = '3' }\n",
            "part.toml:34 [stated.threshold.vgs_th_V.typ]",
        ),
        ("[stated.threshold]\nid_mA = 1\nvgs_th_V = '3 V'\n", "[stated.threshold.vgs_th_V]: found '3 V'"),
        ("[stated.threshold]\nid_mA = 1\nvgs_th_V = 3\nvgs_th_mV = 3000\n", "'vgs_th' is given twice"),
        (
            "[stated.threshold]\nid_mA = 1\nid_A = 1e-3\n",
            "part.toml:34 [stated.threshold.id_A]: 'id' is given twice",
        ),
        ("[stated.threshold]\nid_mA = 1\nvgs_V = 3\n", "[stated.threshold.vgs_V]: unknown key 'vgs_V'"),
        (
            "[stated.gate_charge]\nvdd_V=4\nid_A=5\nvgs_V=9\nload='r'\n",
            "[stated.gate_charge.load]: found 'r'",
        ),
        (
            "[stated.gate_charge]\nvdd_V=4\nid_A=5\nvgs_V=9\nqg_nC=1e9\n",
            "[stated.gate_charge.qg_nC]: found 1000000000",
        ),
        ("[extra]\n", "unknown key 'extra'"),
    ],
)
def test_further_tables(tmp_path, append, fragments):
    check(make_folder(tmp_path, append=append), fragments)


@pytest.mark.parametrize("key", ["stated", "package", "reading"])
def test_a_table_that_is_none(tmp_path, key):
    check(
        make_folder(tmp_path, {"[part]": f"{key} = 5\n[part]"}),
        f"part.toml:1 [{key}]: found 5; expected",
    )


def test_a_group_that_is_no_table(tmp_path):
    check(
        make_folder(tmp_path, append="[stated]\nthreshold = 3\n"),
        "part.toml:33 [stated.threshold]: found 3; expected a table [stated.threshold]",
    )


def test_curves_that_are_no_array(tmp_path):
    start = PART.index("[[curve]]")
    text = PART[:start] + '[curve]\nquantity = "ciss"\n'
    found = messages(make_folder(tmp_path, files={"part.toml": text}))
    assert any("part.toml:8 [curve]: found a table; expected a table [[curve]] for each curve" in m for m in found)


def test_conditions_of_the_other_quantities(tmp_path):
    append = (
        curve("output", "o.csv")
        + curve("gate_charge", "q.csv")
        + curve("rds_on_temperature", "r.csv", "vgs_V = 10")
        + curve("vgs_th_temperature", "v.csv", "tj_C = 25")
    )
    files = {
        "o.csv": "vds_V,id_A\n0,0\n1,5\n",
        "q.csv": "qg_nC,vgs_V\n0,0\n6,5\n",
        "r.csv": "tj_C,rds_on_mohm\n25,3\n50,4\n",
        "v.csv": "tj_C,vgs_th_V\n25,3\n50,4\n",
    }
    check(
        make_folder(tmp_path, append=append, files=files),
        "[curve 5]: the condition 'vgs_V' is missing",
        ("[curve 6]: the condition 'vdd_V' is missing", "it may also stand in [stated.gate_charge]"),
        ("[curve 6]: the condition 'id_A' is missing", "it may also stand in [stated.gate_charge]"),
        ("[curve 7]: the condition 'id_A' is missing", "it may also stand in [stated.on_resistance]"),
        ("[curve 8]: the condition 'id_A' is missing", "it may also stand in [stated.threshold]"),
        ("[curve 8.tj_C]: 'tj_C' is no condition of a vgs_th_temperature curve",),
    )


def test_a_curve_entered_twice(tmp_path):
    append = curve("transfer", "./transfer.csv", "vds_V = 10", "tj_C = 150")
    check(
        make_folder(tmp_path, append=append),
        "[curve 5.file]: 'transfer.csv' gave its transfer curve to curve 4",
    )


@pytest.mark.parametrize(
    ("gone", "found"),
    [
        (("ciss",), "there is no ciss curve"),
        (("ciss", "crss"), "there is no ciss and no crss curve"),
        (("transfer",), "there is no transfer curve"),
    ],
)
def test_not_enough_to_fit(tmp_path, gone, found):
    head, *entries = PART.split("[[curve]]")
    kept = [entry for entry in entries if not any(f'"{quantity}"' in entry for quantity in gone)]
    (problem,) = problems_of(make_folder(tmp_path, files={"part.toml": "[[curve]]".join([head, *kept])}))
    assert problem.found == found
    assert "digitize" in problem.expected


def test_too_many_curves(tmp_path):
    append = "".join(curve("output", f"o{n}.csv", "vgs_V = 5") for n in range(MAX_CURVES))
    files = {f"o{n}.csv": "vds_V,id_A\n0,0\n1,5\n" for n in range(MAX_CURVES)}
    check(
        make_folder(tmp_path, append=append, files=files),
        f"[curve]: {MAX_CURVES + 4} entries; expected at most {MAX_CURVES}",
    )


# TOML itself


@pytest.mark.parametrize(
    ("edits", "fragments"),
    [
        (
            {"vds_max_V = 80": "vds_max_V = 80 V"},
            ("part.toml:4: this is not valid TOML", "'vds_max_V = 80 V'"),
        ),
        ({"vds_max_V = 80": "vds_max_V = 8,5"}, ("part.toml:4", "numbers with a decimal point")),
        ({"vds_max_V = 80": "vds_max_V = 80\nvds_max_V = 90"}, ("part.toml:5", "a key is given twice")),
        ({"vgs_max_V = 20": "[part]"}, ("part.toml:5", "twice", "'[part]'")),
        ({'name = "TESTPART"': "name = TESTPART"}, ("part.toml:2", "texts in quotes")),
        ({'notes = "Invented."': 'notes = "Invented.'}, ("part.toml:6",)),
        ({"vds_V = 10\n": "vds_V = "}, ("part.toml:31", "not valid TOML")),
        ({"vds_max_V = 80": f"vds_max_V = {'8' * 4000}"}, (f"part.toml:4: a line of {4012}", str(MAX_LINE))),
        ({"vds_max_V = 80": "vds_max_V = " + "[" * 3000 + "]" * 900}, ("nested without end",)),
        ({"vds_max_V = 80": f"vds_max_V = 0x{'f' * 3900}"}, ("part.toml:4", "a number of very many digits")),
    ],
)
def test_malformed_toml(tmp_path, edits, fragments):
    check(make_folder(tmp_path, edits), fragments)


def test_toml_of_too_many_keys(tmp_path):
    text = "[x]\n" + "".join(f"k{n} = [{{a = 1}}, {{b = 2}}]\n" for n in range(MAX_KEYS // 2))
    check(make_folder(tmp_path, append=text), f"part.toml: more than {MAX_KEYS} keys")


def test_long_dotted_keys_are_not_slow(tmp_path):
    text = "".join(".".join([f"k{n}"] + ["a"] * 1900) + " = 1\n" for n in range(30))
    start = time.process_time()
    messages(make_folder(tmp_path, files={"part.toml": text}))
    assert time.process_time() - start < 5.0


def test_all_problems_of_all_files_are_listed_at_once(tmp_path):
    edits = {"vds_max_V = 80": "vds_max_V = 0", "vds_V = 10": 'vds_V = "x"', 'channel = "n"': "channel = 1"}
    files = {
        "capacitance.csv": CAPACITANCE.replace("3500", "a").replace("60", "-60"),
        "transfer.csv": "vgs_V,id_A\n1,x\n2\n3,4\n4,1e9\n",
    }
    found = problems_of(make_folder(tmp_path, edits, files=files))
    assert [(p.file, p.line, p.place) for p in found] == [
        ("part.toml", 3, "part.channel"),
        ("part.toml", 4, "part.vds_max_V"),
        ("part.toml", 31, "curve 4.vds_V"),
        ("capacitance.csv", 2, "coss_pF"),
        ("capacitance.csv", 4, "crss_pF"),
        ("transfer.csv", 2, "id_A"),
        ("transfer.csv", 3, ""),
        ("transfer.csv", 5, "id_A"),
    ]


def test_a_p_channel_part_entered_as_n_is_one_problem(tmp_path):
    folder = shutil.copytree(ROOT / "digitized_curves" / "camper_van_p40v", tmp_path / "part")
    text = (folder / "part.toml").read_text().replace('channel = "p"', 'channel = "n"')
    (folder / "part.toml").write_text(text)
    check(folder, ("part.toml:7 [part.channel]: found 'n', but most voltages", 'write channel = "p"'))


def test_a_p_channel_part_with_another_slip_gets_every_message(tmp_path):
    folder = shutil.copytree(ROOT / "digitized_curves" / "camper_van_p40v", tmp_path / "part")
    text = (folder / "part.toml").read_text().replace('channel = "p"', 'channel = "n"').replace("vgs_max_V", "vgs_max")
    (folder / "part.toml").write_text(text)
    found = messages(folder)
    assert sum('for a p-channel part, say so in [part]: channel = "p"' in message for message in found) > 40


def test_the_article_before_the_name_of_a_curve(tmp_path):
    append = curve("output", "o.csv", "vgs_V = 5", "vds_V = 3")
    folder = make_folder(tmp_path, append=append, files={"o.csv": "vds_V,id_A\n0,0\n1,20\n"})
    check(folder, "'vds_V' is no condition of an output curve")


def test_of_very_many_problems_the_first_are_shown(tmp_path):
    text = "vgs_V,id_A\n" + "x,1\n" * 1000
    found = [p for p in problems_of(make_folder(tmp_path, files={"transfer.csv": text})) if p.file == "transfer.csv"]
    assert len(found) == MAX_PROBLEMS_PER_FILE + 1
    assert found[-1].found == "there may be more problems"


def test_the_problems_of_all_files_are_bounded(tmp_path):
    names = [f"o{n}.csv" for n in range(20)]
    append = "".join(curve("output", name, f"vgs_V = {n + 3}") for n, name in enumerate(names))
    files = dict.fromkeys(names, "vds_V,id_A\n" + "x,y\n" * 1000)
    found = problems_of(make_folder(tmp_path, append=append, files=files))
    assert MAX_PROBLEMS <= len(found) <= MAX_PROBLEMS + len(names)
    assert str(found[-1]) == "o3.csv: there may be more problems; mend those above first"


def test_large_bad_tables_are_rejected_in_seconds(tmp_path):
    """Every cell of 20 MiB is wrong; a complaint about each would take a minute."""
    header = "vds_V,id_A,vgs_V,qg_nC,vsd_V,tj_C,ciss_pF,coss_pF,crss_pF,is_A,rds_on_mohm,vgs_th_V\n"
    table = header + ("bad cell," * 11 + "bad cell\n") * 19_000
    append = "".join(curve("output", f"o{n}.csv", f"vgs_V = {n + 3}") for n in range(10))
    folder = make_folder(tmp_path, append=append, files={f"o{n}.csv": table for n in range(10)})
    began = time.process_time()
    assert problems_of(folder)
    assert time.process_time() - began < 5.0


# CSV files


@pytest.mark.parametrize(
    ("text", "fragments"),
    [
        ("vgs_V,id_A\n3,2\n4,abc\n5,9\n", ("transfer.csv:3 [id_A]: found 'abc'; expected a number",)),
        ("vgs_V,id_A\n3,2\n4,nan\n5,9\n", (":3 [id_A]: found 'nan'", "leave the cell blank")),
        ("vgs_V,id_A\n3,2\n4,N/A\n5,9\n", (":3 [id_A]: found 'N/A'", "leave the cell blank")),
        ("vgs_V,id_A\n3,2\n4,inf\n5,9\n", (":3 [id_A]: found 'inf'",)),
        ("vgs_V,id_A\n3,2\n4,1e999\n5,9\n", (":3 [id_A]: found '1e999'",)),
        ("vgs_V,id_A\n3,2\n4,1_000\n5,9\n", (":3 [id_A]: found '1_000'",)),
        ("vgs_V,id_A\n3,2\n4,0x1F\n5,9\n", (":3 [id_A]: found '0x1F'",)),
        ("vgs_V,id_A\n3,2\n4,٣\n5,9\n", (":3 [id_A]: found '٣'",)),
        ("vgs_V,id_A\n3,2\n4,−8\n5,9\n", (":3 [id_A]: found '−8'",)),
        ("vgs_V,id_A\n3,2\n4,8 A\n5,9\n", (":3 [id_A]: found '8 A'",)),
        ("vgs_V,id_A\n3,2\n4,--8\n5,9\n", (":3 [id_A]: found '--8'",)),
        ("vgs_V,id_A\n3,2\n4,=1+1\n5,9\n", (":3 [id_A]: found '=1+1'",)),
        ("vgs_V,id_A\n3,2\n4,8 # doubtful\n5,9\n", (":3 [id_A]: found '8 # doubtful'",)),
        (f"vgs_V,id_A\n3,2\n4,{'1' * 41}\n5,9\n", (":3 [id_A]: found '1111111111",)),
        ("vgs_V,id_A\n3,2\n4,1e7\n5,9\n", (":3 [id_A]: found '1e7'; expected a current up to 100 kA",)),
        ("vgs_mV,id_A\n3,2\n4e9,8\n5,9\n", (":3 [vgs_mV]: found '4e9'; expected a voltage up to 100 kV",)),
        ("vgs_V,id_A\n3,2\n4,-8\n5,9\n", (":3 [id_A]: found '-8'", "above zero", "mend or remove")),
        ("vgs_V,id_A\n3,-2\n4,-8\n5,-9\n", (":2 [id_A]: most values are negative", 'channel = "p"')),
        ("vgs_V,id_A\n-3,2\n-4,8\n-5,9\n", (":2 [vgs_V]: most values are negative", 'channel = "p"')),
        (
            "vgs_V,id_A\n3,2\n4\n5,9\n",
            (":3: 1 cell in '4'; expected 2 as in the header; columns are separated by commas",),
        ),
        ("vgs_V,id_A\n3,2\n4,8,7\n5,9\n", (":3: 3 cells in '4,8,7'", "by semicolons")),
        ("vgs_V,id_A\n3,2\n4;8\n5,9\n", (":3: 1 cell in '4;8'",)),
        ("vgs_V,id_A\n3,2\n4,0;8\n5,9\n", (":3 [id_A]: found '0;8'", "separated by commas here")),
        ("vgs_V,id_A\n3;2\n4;8\n5;9\n", (":2: 1 cell in '3;2'", "separated by commas here")),
        ("vgs_V,id_A\n3,5,2\n4,0,8\n5,0,9\n", (":2: 3 cells in '3,5,2'", "columns by semicolons")),
        ("vgs_V,id_\ufeff5\n3,2\n4,8\n", (":1 [id_\\ufeff5]: unit '\\ufeff5' is not 'A'",)),
        (f"vgs_V,id_{'A' * 900}\n3,2\n4,8\n", (":1 [id_AAAA",)),
        ("vgs_V;id_A\n3;2\n4,5,6;8\n5;9\n", (":3 [vgs_V]: found '4,5,6'",)),
        ("vgs_V;id_A\n3;2\n4;1.234,5\n5;9\n", (":3 [id_A]: found '1.234,5'", "no marks between thousands")),
        ("vgs_V;id_A\n3;2\n4;1'234\n5;9\n", (":3 [id_A]: found '1'234'", "no marks between thousands")),
        ("vgs_V;id_A\n3,5;2\n4.5;8\n5;9\n", (":3 [vgs_V]: found '4.5' with a decimal point, but line 2",)),
        ('vgs_V,id_A\n3,2\n"4,5",8\n5,9\n', (":3 [vgs_V]: found '4,5'", "separate columns by semicolons")),
        ('vgs_V,id_A\n3,2\n"4,8\n5,9\n', (":3: the quotation marks",)),
        ('vgs_V,id_A\n3,2\n"4"x,8\n5,9\n', (":3: the quotation marks",)),
        ("vgs_V,id_A,\n3,2,\n4,8,7\n5,9,\n", (":3: found '7' in a column without a name",)),
        ("vgs_V,id_A\n3,2\n,8\n5,9\n", (":3 [vgs_V]: the cell is blank, but id_A is '8'",)),
        ("3,2\n4,8\n5,9\n", (":1: the first line is '3,2': the header is missing", "'vgs_V,id_A'")),
        ("vgs_V,idd_A\n3,2\n4,8\n", (":1 [idd_A]: unknown column 'idd_A'; did you mean 'id_A'?",)),
        ("vgs_V,zzz\n3,2\n4,8\n", (":1 [zzz]: unknown column 'zzz'; expected names such as vds_V",)),
        ("vgs_V,id_V\n3,2\n4,8\n", (":1 [id_V]: unit 'V' is not 'A'", "'id_A'")),
        ("vgs_V,id_GA\n3,2\n4,8\n", (":1 [id_GA]: unit 'GA'",)),
        ("vgs_V,id_a\n3,2\n4,8\n", (":1 [id_a]: unit 'a'", "'id_A'")),
        ("vgs_V,id\n3,2\n4,8\n", (":1 [id]: the column 'id' has no unit",)),
        ("vgs_V,id_A,id_mA\n3,2,2\n4,8,8\n", (":1 [id_mA]: two columns hold 'id': 'id_A' and 'id_mA'",)),
        ("vgs_V,id_A,ID_A\n3,2,2\n4,8,8\n", (":1 [ID_A]: two columns hold 'id'",)),
        (
            "vds_V,id_A\n3,2\n4,8\n",
            (":1: no column of the gate-source voltage; the columns are vds_V, id_A",),
        ),
        ("vgs_V\n3\n4\n", (":1: no column of the drain current", "'id_A'")),
        ("vgs_V id_A\n3 2\n4 8\n", (":1 [vgs_V id_A]: ",)),
        ("vgs_V,id_A\n", (":1: there is a header but no point", "fill them in")),
        ("vgs_V,id_A\n# 3,2\n\n", (":1: there is a header but no point",)),
        ("vgs_V,id_A\n,\n,\n", (":1 [id_A]: no point for the transfer curve",)),
        ("vgs_V,id_A\n3,2\n", (":1 [id_A]: a single point for the transfer curve", "at least two")),
        ("vgs_V,id_A\n3,2\n3,4\n3,5\n", (":1 [vgs_V]: all points have the same value '3'",)),
        ("# nothing\n\n", ("transfer.csv: the file holds only comments", "a header line")),
        (f"vgs_V,id_A\n{' ,' * MAX_CSV_LINE}\n", (":2: a line of ", "line ends")),
        (",".join(["vgs_V", "id_A"] + [""] * MAX_COLUMNS) + "\n3,2\n", (f":1: {MAX_COLUMNS + 2} columns",)),
        ("vgs_V,id_A\n" + "3,2\n" * (MAX_ROWS + 1), (f":{MAX_ROWS + 2}: more than {MAX_ROWS} rows",)),
    ],
)
def test_csv(tmp_path, text, fragments):
    first, *others = fragments
    check(make_folder(tmp_path, files={"transfer.csv": text}), (first, "transfer.csv", *others))


@pytest.mark.parametrize(
    ("old", "new", "fragments"),
    [
        ("60\n", "0\n", ":4 [crss_pF]: found '0'; expected a capacitance from 1 fF to 10 uF"),
        ("60\n", "-60\n", ":4 [crss_pF]: found '-60'"),
        ("60\n", "1e9\n", ":4 [crss_pF]: found '1e9'"),
        ("0.1,", "0,", ":2 [vds_V]: found '0' on a logarithmic axis"),
        ("0.1,", "-0.1,", ":2 [vds_V]: found '-0.1' on a logarithmic axis"),
        ("crss_pF", "crss_F", ":2 [crss_F]: found '500'"),
    ],
)
def test_capacitances(tmp_path, old, new, fragments):
    assert old in CAPACITANCE
    found = messages(make_folder(tmp_path, files={"capacitance.csv": CAPACITANCE.replace(old, new, 1)}))
    assert f"capacitance.csv{fragments}" in found[0]


def test_a_file_shared_by_curves_is_complained_of_once(tmp_path):
    check(
        make_folder(tmp_path, files={"capacitance.csv": CAPACITANCE.replace("0.1,", "0,")}),
        "capacitance.csv:2 [vds_V]: found '0' on a logarithmic axis; expected a value above zero",
    )


@pytest.mark.parametrize(
    ("quantity", "text", "line"),
    [
        (
            "rds_on_temperature",
            "tj_C,rds_on_mohm\n25,3\n600,5\n",
            "c.csv:3 [tj_C]: found '600'; expected a temperature",
        ),
        ("rds_on_temperature", "tj_C,rds_on_ratio\n25,1\n150,500\n", "c.csv:3 [rds_on_ratio]: found '500'"),
        (
            "rds_on_temperature",
            "tj_C,rds_on_ratio,rds_on_mohm\n25,1,3\n150,2,6\n",
            "two columns hold 'rds_on'",
        ),
        (
            "gate_charge",
            "qg_C,vgs_V\n0,0\n63,10\n",
            "c.csv:3 [qg_C]: found '63'; expected a charge up to 10 mC",
        ),
        ("gate_charge", "qg_nC,vgs_V\n0,0\n30,5\n40,5\n-63,10\n", "c.csv:5 [qg_nC]: found '-63'"),
        ("body_diode", "vsd_V,is_A\n0.6,1\n-0.9,10\n1,50\n", "c.csv:3 [vsd_V]: found '-0.9'"),
    ],
)
def test_other_curves(tmp_path, quantity, text, line):
    conditions = {
        "rds_on_temperature": ["id_A = 5", "vgs_V = 10"],
        "gate_charge": ["id_A = 5", "vdd_V = 10"],
        "body_diode": [],
    }
    append = curve(quantity, "c.csv", *conditions[quantity])
    check(make_folder(tmp_path, append=append, files={"c.csv": text}), line)


def test_a_constant_curve_needs_its_printed_axis(tmp_path):
    edits = {'y_axis = { scale = "linear", from = 0, to = 200 }\n': ""}
    files = {"transfer.csv": "vgs_V,id_A\n3,2\n4,2\n"}
    check(make_folder(tmp_path, edits, files=files), ("[id_A]: all points have the same value '2'", "'y_axis'"))


def test_p_channel_slips(tmp_path):
    edits = {'channel = "n"': 'channel = "p"'}
    files = {"transfer.csv": "vgs_V,id_A\n-3,-2\n-4,20\n-5,-120\n"}
    check(make_folder(tmp_path, edits, files=files), "transfer.csv:3 [id_A]: found '20'")


def test_quotes_stay_on_one_line():
    assert quoted("a\nb\x1b\u2028") == "'a\\nb\\x1b\\u2028'"
    assert quoted("x" * 1000) == "'" + "x" * 40 + "...'"
    assert quoted(10**5000) == "a number of very many digits"
