"""Points come out of CSV files as people's programs write them, and in n-channel polarity."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from part_folders import CAPACITANCE, PART, TRANSFER, curve, make_folder, only

from fitter.errors import PartFolderError
from fitter.part import Axis, Quantity, Stated
from fitter.reader import read_part

# CSV files


@pytest.mark.parametrize(
    ("text", "ids"),
    [
        ("vgs_V,id_A\n3.5,2\n4,20\n5,120\n", "plain"),
        ("vgs_V;id_A\n3,5;2\n4;20\n5;120\n", "semicolons and decimal commas"),
        ("vgs_V;id_A\n3.5;2\n4;20\n5;120\n", "semicolons and decimal points"),
        ("vgs_V\tid_A\n3,5\t2\n4\t20\n5\t120\n", "tabs"),
        ("\ufeffvgs_V,id_A\n3.5,2\n4,20\n5,120\n", "byte-order mark"),
        ("vgs_V,id_A\r\n3.5,2\r\n4,20\r\n5,120\r\n", "Windows"),
        ("vgs_V,id_A\r3.5,2\r4,20\r5,120\r", "old line ends"),
        ("vgs_V,id_A\n3.5,2\n4,20\n5,120", "no last line end"),
        ("# click by eye\n\nvgs_V,id_A\n3.5,2\n  # again\n4,20\n\n5,120\n\n", "comments and blank lines"),
        ("vgs_V,id_A\n5,120\n3.5,2\n4,20\n", "out of order"),
        (" VGS_V , Id_A \n 3.5 , 2 \n 4,20\n5 ,120\n", "blanks and case"),
        ("id_A,vgs_V\n2,3.5\n20,4\n120,5\n", "columns exchanged"),
        ("vgs_mV,id_kA\n3500,0.002\n4000,0.020\n5e3,+.12\n", "prefixes"),
        ('"vgs_V","id_A"\n"3.5","2"\n"4","20"\n"5","120"\n', "quotation marks"),
        ('"vgs_V";"id_A"\n"3,5";"2"\n"4";"20"\n"5";"120"\n', "quoted decimal commas"),
        ("vgs_V,id_A,\n3.5,2,\n4,20,\n5,120,\n", "trailing separators"),
        ("vgs_V,id_A\n3.5,2,,\n4,20,,\n5,120\n,\n,,,\n", "blank rows"),
        ('"# one; two",\nvgs_V,id_A\n3.5,2\n4,20\n5,120\n', "comment in quotes"),
        ("vgs_V,id_A\n3.5,2.\n4.0,2E1\n5,1.2e+2\n", "ways to write numbers"),
        ("vgs_V,id_A,is_A\n3.5,2,\n4,20,\n,,7\n5,120,\n", "blank cells"),
    ],
    ids=lambda value: value if "\n" not in value and "\r" not in value else "",
)
def test_ways_to_write_the_same_file(tmp_path, text, ids):
    transfer = read_part(make_folder(tmp_path, files={"transfer.csv": text.encode()})).curves[3]
    assert transfer.x.tolist() == pytest.approx([3.5, 4.0, 5.0], rel=1e-14), ids
    assert transfer.y.tolist() == pytest.approx([2.0, 20.0, 120.0], rel=1e-14)


def test_lines_follow_their_points(tmp_path):
    text = "# first\nvgs_V,id_A\n5,120\n\n3.5,2\n# between\n4,20\n4,21\n"
    transfer = read_part(make_folder(tmp_path, files={"transfer.csv": text})).curves[3]
    assert transfer.x.tolist() == [3.5, 4.0, 4.0, 5.0]
    assert transfer.y.tolist() == [2.0, 20.0, 21.0, 120.0]
    assert transfer.lines.tolist() == [5, 7, 8, 3]


def test_each_curve_of_a_shared_file_takes_its_own_points(tmp_path):
    text = CAPACITANCE + "2,4400,,\n3,,2000,\n4,,,150\n"
    ciss, coss, crss, _ = read_part(make_folder(tmp_path, files={"capacitance.csv": text})).curves
    assert [c.x.tolist() for c in (ciss, coss, crss)] == [
        [0.1, 1.0, 2.0, 10.0, 80.0],
        [0.1, 1.0, 3.0, 10.0, 80.0],
        [0.1, 1.0, 4.0, 10.0, 80.0],
    ]
    assert [c.lines.tolist() for c in (ciss, coss, crss)] == [
        [2, 3, 6, 4, 5],
        [2, 3, 7, 4, 5],
        [2, 3, 8, 4, 5],
    ]


def test_a_file_may_be_in_a_folder_within(tmp_path):
    edits = {'file = "transfer.csv"': 'file = "./curves/transfer 25 °C.csv"'}
    part = read_part(make_folder(tmp_path, edits, files={"curves/transfer 25 °C.csv": TRANSFER}))
    assert part.curves[3].file == "curves/transfer 25 °C.csv"
    assert "curves/transfer 25 °C.csv" in part.digests


def test_the_part_file_may_come_from_windows(tmp_path):
    data = b"\xef\xbb\xbf" + PART.replace("\n", "\r\n").encode()
    assert read_part(make_folder(tmp_path, files={"part.toml": data})).name == "TESTPART"


def test_points_around_zero_keep_their_noise(tmp_path):
    transfer = read_part(make_folder(tmp_path, files={"transfer.csv": "vgs_V,id_A\n2,-0.4\n2.2,0.3\n5,120\n"})).curves[
        3
    ]
    assert transfer.y.tolist() == [-0.4, 0.3, 120.0]


# P-channel parts

P_EDITS = {'channel = "n"': 'channel = "p"', "vds_max_V = 80": "vds_max_V = -80"}
P_SIGNED = {
    "capacitance.csv": CAPACITANCE.replace("\n0.1,", "\n-0.1,")
    .replace("\n1,", "\n-1,")
    .replace("\n10,", "\n-10,")
    .replace("\n80,", "\n-80,"),
    "transfer.csv": "vgs_V,id_A\n-2,0.3\n-3.5,-2\n-4,-20\n-5,-120\n",
}
P_AXES = {
    "from = 0.1, to = 100": "from = -0.1, to = -100",
    "from = 0, to = 6": "from = 0, to = -6",
    "from = 0, to = 200": "from = -200, to = 0",
    "vds_V = 10": "vds_V = -10",
}
P_MAGNITUDES = {"transfer.csv": "vgs_V,id_A\n2,-0.3\n3.5,2\n4,20\n5,120\n"}


@pytest.mark.parametrize("signed", [True, False])
def test_p_channel_as_printed_and_as_magnitudes(tmp_path, signed):
    stated = """
[stated.threshold]
id_mA = SIGN0.25
vgs_th_V = { min = SIGN1.0, typ = SIGN2.0, max = SIGN3.0 }
[stated.gate_charge]
vdd_V = SIGN20
id_A = SIGN50
vgs_V = SIGN10
qg_nC = SIGN63
[stated.body_diode]
is_A = SIGN50
vsd_V = { typ = SIGN0.9, max = SIGN1.2 }
""".replace("SIGN", "-" if signed else "")
    edits = P_EDITS | P_AXES if signed else {'channel = "n"': 'channel = "p"'}
    part = read_part(make_folder(tmp_path, edits, append=stated, files=P_SIGNED if signed else P_MAGNITUDES))
    assert part.channel == "p"
    assert part.v_ds_max == 80.0
    ciss, transfer = part.curves[0], part.curves[3]
    assert ciss.x.tolist() == [0.1, 1.0, 10.0, 80.0]
    assert np.all(ciss.y > 0.0)
    assert ciss.x_axis == Axis(scale="log", start=0.1, end=100.0)
    assert transfer.x.tolist() == [2.0, 3.5, 4.0, 5.0]
    # The click below the axis stays below it.
    assert transfer.y.tolist() == [-0.3, 2.0, 20.0, 120.0]
    assert transfer.x_axis == Axis(scale="linear", start=0.0, end=6.0)
    assert transfer.y_axis == Axis(scale="linear", start=0.0, end=200.0)
    assert math.copysign(1.0, transfer.y_axis.start) == 1.0
    assert transfer.v_ds == 10.0
    assert part.stated.threshold is not None
    assert part.stated.threshold.i_d == pytest.approx(0.25e-3)
    assert part.stated.threshold.v_gs_th == Stated(min=1.0, typ=2.0, max=3.0)
    assert part.stated.gate_charge is not None
    assert (part.stated.gate_charge.v_dd, part.stated.gate_charge.v_gs) == (20.0, 10.0)
    assert part.stated.gate_charge.q_g == Stated(typ=pytest.approx(63e-9))
    assert part.stated.body_diode is not None
    assert part.stated.body_diode.v_sd == Stated(typ=0.9, max=1.2)


def test_the_sign_of_a_column_is_not_that_of_the_noise_around_zero(tmp_path):
    noisy = "vgs_V,id_A\n1,0.2\n-1.5,0.1\n-2,0.3\n-2.5,0.2\n-4,-20\n-5,-120\n"
    transfer = read_part(make_folder(tmp_path, P_EDITS, files={"transfer.csv": noisy})).curves[3]
    assert transfer.x.tolist() == [-1.0, 1.5, 2.0, 2.5, 4.0, 5.0]
    assert transfer.y.tolist() == [-0.2, -0.1, -0.3, -0.2, 20.0, 120.0]


def test_p_channel_limits_in_the_order_of_signed_numbers(tmp_path):
    text = "\n[stated.threshold]\nid_mA = -0.25\nvgs_th_V = { min = -3.0, typ = -2.0, max = -1.0 }\n"
    threshold = read_part(make_folder(tmp_path, P_EDITS, append=text)).stated.threshold
    assert threshold is not None
    assert threshold.v_gs_th == Stated(min=1.0, typ=2.0, max=3.0)


def test_p_channel_limits_of_magnitudes_in_the_wrong_order_stay(tmp_path):
    text = "\n[stated.threshold]\nid_mA = 0.25\nvgs_th_V = { min = 3.0, max = 1.0 }\n"
    threshold = read_part(make_folder(tmp_path, P_EDITS, append=text)).stated.threshold
    assert threshold is not None
    assert threshold.v_gs_th == Stated(min=3.0, max=1.0)


def test_p_channel_gate_charge_and_temperature_curves(tmp_path):
    axes = 'x_axis = { scale = "linear", from = 0, to = 80 }\n'
    axes += 'y_axis = { scale = "linear", from = 2, to = -10 }\n'
    append = curve("gate_charge", "q.csv", "vdd_V = -40", "id_A = -50", axes=axes) + curve(
        "vgs_th_temperature", "v.csv", "id_mA = -0.25", axes=""
    )
    files = {
        "q.csv": "qg_nC,vgs_V\n-0.1,0.02\n17,-4.6\n63,-10\n",
        "v.csv": "tj_C,vgs_th_V\n-50,-2.4\n150,-1.2\n",
    }
    part = read_part(make_folder(tmp_path, P_EDITS, append=append, files=files))
    charge = only(part, Quantity.GATE_CHARGE)
    assert charge.x.tolist() == pytest.approx([-0.1e-9, 17e-9, 63e-9])
    assert charge.y.tolist() == pytest.approx([-0.02, 4.6, 10.0])
    assert charge.y_axis == Axis(scale="linear", start=-2.0, end=10.0)
    assert (charge.v_dd, charge.i_d) == (40.0, 50.0)
    v_gs_th = only(part, Quantity.VGS_TH_TEMPERATURE)
    assert v_gs_th.x.tolist() == [-50.0, 150.0]
    assert v_gs_th.y.tolist() == [2.4, 1.2]


# Properties

voltages = st.integers(1, 900).map(lambda v: v / 100)
numbers = st.floats(min_value=-0.4, max_value=300.0, allow_nan=False).map(lambda v: round(v, 6))


@settings(max_examples=60, deadline=None)
@given(
    rows=st.lists(st.tuples(voltages, st.none() | numbers), min_size=2, max_size=12),
    separator=st.sampled_from([",", ";", "\t"]),
    decimal_comma=st.booleans(),
    line_end=st.sampled_from(["\n", "\r\n"]),
    mark=st.booleans(),
    form=st.sampled_from(["{}", "{:.9e}", "{:+.6f}"]),
)
def test_written_points_come_back(tmp_path_factory, rows, separator, decimal_comma, line_end, mark, form):
    def cell(value: float | None) -> str:
        text = "" if value is None else form.format(value)
        return text.replace(".", ",") if decimal_comma and separator != "," else text

    cells = [("vgs_V", "id_A"), *((cell(x), cell(y)) for x, y in rows)]
    text = line_end.join(separator.join(row) for row in cells)
    folder = make_folder(tmp_path_factory.mktemp("part"), files={"transfer.csv": ("\ufeff" * mark + text).encode()})
    points = [(x, y, line) for line, (x, y) in enumerate(rows, start=2) if y is not None]
    values = [y for _, y, _ in points]
    too_few = len({x for x, _, _ in points}) < 2
    if too_few or min(values) < -0.05 * max(map(abs, values)):
        with pytest.raises(PartFolderError):
            read_part(folder)
        return
    transfer = read_part(folder).curves[3]
    expected = sorted(points, key=lambda point: point[0])
    assert transfer.x.tolist() == pytest.approx([x for x, _, _ in expected], abs=1e-9)
    assert transfer.y.tolist() == pytest.approx([y for _, y, _ in expected], rel=1e-9, abs=1e-6)
    assert transfer.lines.tolist() == [line for _, _, line in expected]
