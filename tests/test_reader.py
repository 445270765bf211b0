"""What a part folder may hold comes out in SI, in n-channel polarity, with its conditions and axes."""

from __future__ import annotations

import hashlib
import math
import subprocess
import sys
import time

import pytest
from part_folders import PART, TRANSFER, curve, make_folder, only

from fitter.part import Axis, Package, Part, Quantity, Stated
from fitter.reader import missing_data, read_part

GATE_CHARGE_FILE = {"gate_charge.csv": "qg_nC,vgs_V\n0,0\n17,4.6\n31,4.7\n63,10\n"}
GATE_CHARGE_STATED = """
[stated.gate_charge]
vdd_V = 40
id_A = 50
vgs_V = 10
qg_nC = { typ = 63, max = 95 }
qgs_nC = 17
v_plateau_V = 4.6
"""


def texts(part: Part) -> str:
    return "\n".join(f"{notice.topic}: {notice.text}" for notice in part.notices)


# The whole of it


def test_smallest_part(tmp_path):
    folder = make_folder(tmp_path)
    part = read_part(folder)
    assert (part.name, part.channel, part.notes) == ("TESTPART", "n", "Invented.")
    assert (part.v_ds_max, part.v_gs_max) == (80.0, 20.0)
    assert part.package == Package()
    assert part.notices == ()
    assert [c.name for c in part.curves] == ["ciss", "coss", "crss", "transfer 25 C"]
    crss = only(part, Quantity.CRSS)
    assert crss.x.tolist() == [0.1, 1.0, 10.0, 80.0]
    assert crss.y.tolist() == pytest.approx([500e-12, 300e-12, 60e-12, 20e-12], rel=1e-15)
    assert crss.lines.tolist() == [2, 3, 4, 5]
    assert (crss.x_column, crss.y_column, crss.x_unit, crss.y_unit) == ("vds_V", "crss_pF", "V", "F")
    assert crss.x_axis == Axis(scale="log", start=0.1, end=100.0)
    assert crss.y_axis.printed
    assert crss.y_axis.length == pytest.approx(math.log(1000.0))
    assert (crss.v_gs, crss.frequency, crss.t_j, crss.load) == (0.0, 1e6, None, None)
    transfer = only(part, Quantity.TRANSFER)
    assert (transfer.v_ds, transfer.t_j, transfer.v_gs) == (10.0, 25.0, None)
    assert (transfer.point_error, transfer.axis_error) == (0.003, 0.003)


def test_a_path_may_be_text_or_a_link(tmp_path):
    make_folder(tmp_path / "real")
    (tmp_path / "link").symlink_to(tmp_path / "real")
    assert read_part(str(tmp_path / "link")).name == "TESTPART"


def test_digests_are_those_of_the_files(tmp_path):
    folder = make_folder(tmp_path)
    digests = read_part(folder).digests
    assert set(digests) == {"part.toml", "capacitance.csv", "transfer.csv"}
    for name, digest in digests.items():
        assert digest == hashlib.sha256((folder / name).read_bytes()).hexdigest()


def test_arrays_are_read_only(tmp_path):
    for found in read_part(make_folder(tmp_path)).curves:
        for array in (found.x, found.y, found.lines):
            with pytest.raises(ValueError, match="read-only"):
                array[0] = 1


def test_reading_is_quick_and_needs_no_heavy_import(tmp_path):
    folder = make_folder(tmp_path)
    read_part(folder)
    times = []
    for _ in range(5):
        start = time.perf_counter()
        read_part(folder)
        times.append(time.perf_counter() - start)
    assert min(times) < 0.05
    code = "import sys, fitter.reader; print(sorted({'pandas', 'scipy', 'lmfit'} & set(sys.modules)))"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout.strip() == "[]"


# Tables of the part file


def test_package_and_reading_errors(tmp_path):
    text = "\n[package]\nrg_mohm = 1300\nlg_nH = 3\nls_pH = 1500\n[reading]\npoint = 0.01\naxis = 0.002\n"
    edits = {"vds_V = 10": "vds_V = 10\npoint_error = 0.005"}
    part = read_part(make_folder(tmp_path, edits, append=text))
    assert part.package.r_g == pytest.approx(1.3)
    assert part.package.l_g == pytest.approx(3e-9)
    assert part.package.l_s == pytest.approx(1.5e-9)
    assert part.package.l_d is None
    assert (part.curves[0].point_error, part.curves[0].axis_error) == (0.01, 0.002)
    assert (part.curves[3].point_error, part.curves[3].axis_error) == (0.005, 0.002)


def test_package_may_be_without_resistance_or_inductance(tmp_path):
    part = read_part(make_folder(tmp_path, append="\n[package]\nrg_ohm = 0\nlg_nH = 0\n"))
    assert (part.package.r_g, part.package.l_g) == (0.0, 0.0)


def test_every_stated_group(tmp_path):
    text = (
        GATE_CHARGE_STATED
        + """
qgd_nC = { typ = 14 }
load = "resistive"
[stated.capacitance]
vds_V = 40
ciss_nF = { typ = 3.9, max = 5 }
coss_pF = 620
crss_pF = { min = 20, typ = 28 }
[stated.threshold]
id_uA = 250
vgs_th_V = { min = 2.0, typ = 3.0, max = 4.0 }
[stated.on_resistance]
vgs_V = 10
id_A = 50
rds_on_mohm = { typ = 3.4, max = 4.0 }
[stated.transconductance]
vds_V = 10
id_A = 50
gfs_S = { typ = 120 }
[stated.output_charge]
vds_V = 40
qoss_nC = { typ = 48 }
eoss_uJ = { typ = 0.7 }
coss_er_pF = { typ = 880 }
coss_tr_pF = { typ = 1200 }
[stated.body_diode]
is_A = 50
vsd_V = { typ = 0.86, max = 1.2 }
if_A = 40
di_dt_A_per_us = 100
qrr_nC = { typ = 55 }
trr_ns = { typ = 48 }
"""
    )
    stated = read_part(make_folder(tmp_path, append=text)).stated
    charge = stated.gate_charge
    assert charge is not None
    assert (charge.v_dd, charge.i_d, charge.v_gs, charge.load) == (40.0, 50.0, 10.0, "resistive")
    assert charge.q_g is not None
    assert (charge.q_g.min, charge.q_g.typ, charge.q_g.max) == (
        None,
        pytest.approx(63e-9),
        pytest.approx(95e-9),
    )
    assert charge.q_gs == Stated(typ=pytest.approx(17e-9))
    assert charge.q_gd == Stated(typ=pytest.approx(14e-9))
    assert charge.v_plateau == Stated(typ=4.6)
    capacitance = stated.capacitance
    assert capacitance is not None
    assert capacitance.v_ds == 40.0
    assert capacitance.c_iss == Stated(typ=pytest.approx(3.9e-9), max=pytest.approx(5e-9))
    assert capacitance.c_oss == Stated(typ=pytest.approx(620e-12))
    assert capacitance.c_rss == Stated(min=pytest.approx(20e-12), typ=pytest.approx(28e-12))
    assert stated.threshold is not None
    assert stated.threshold.i_d == pytest.approx(250e-6)
    assert stated.threshold.v_gs_th == Stated(min=2.0, typ=3.0, max=4.0)
    assert stated.on_resistance is not None
    assert stated.on_resistance.r_ds_on == Stated(typ=pytest.approx(3.4e-3), max=pytest.approx(4e-3))
    assert (stated.on_resistance.v_gs, stated.on_resistance.i_d) == (10.0, 50.0)
    assert stated.transconductance is not None
    assert stated.transconductance.g_fs == Stated(typ=120.0)
    output = stated.output_charge
    assert output is not None
    assert output.q_oss == Stated(typ=pytest.approx(48e-9))
    assert output.e_oss == Stated(typ=pytest.approx(0.7e-6))
    assert output.c_oss_er == Stated(typ=pytest.approx(880e-12))
    assert output.c_oss_tr == Stated(typ=pytest.approx(1200e-12))
    diode = stated.body_diode
    assert diode is not None
    assert (diode.i_s, diode.i_f, diode.di_dt) == (50.0, 40.0, pytest.approx(100e6))
    assert diode.v_sd == Stated(typ=0.86, max=1.2)
    assert diode.q_rr == Stated(typ=pytest.approx(55e-9))
    assert diode.t_rr == Stated(typ=pytest.approx(48e-9))


def test_groups_that_are_absent_or_empty_are_none(tmp_path):
    part = read_part(make_folder(tmp_path, append="\n[stated.capacitance]\n"))
    assert part.stated.capacitance is None
    assert part.stated.gate_charge is None


def test_a_group_may_hold_conditions_only(tmp_path):
    part = read_part(make_folder(tmp_path, append="\n[stated.gate_charge]\nvdd_V=40\nid_A=50\nvgs_V=10\n"))
    assert part.stated.gate_charge is not None
    assert part.stated.gate_charge.q_g is None
    assert part.stated.gate_charge.load == "current"


def test_body_diode_values_need_only_their_own_conditions(tmp_path):
    part = read_part(make_folder(tmp_path, append="\n[stated.body_diode]\nis_A = 50\nvsd_mV = 860\n"))
    assert part.stated.body_diode is not None
    assert part.stated.body_diode.v_sd == Stated(typ=pytest.approx(0.86))
    assert part.stated.body_diode.di_dt is None


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("id_A = 50", 50.0),
        ("id_mA = 50", 0.05),
        ("id_uA = 250", 250e-6),
        ("id_kA = 0.05", 50.0),
        ("ID_A = 50", 50.0),
        ("id_A = 5e1", 50.0),
    ],
)
def test_prefixes_of_keys(tmp_path, key, value):
    text = f"\n[stated.threshold]\n{key}\nvgs_th_mV = 3000\n"
    threshold = read_part(make_folder(tmp_path, append=text)).stated.threshold
    assert threshold is not None
    assert threshold.i_d == pytest.approx(value, rel=1e-14)
    assert threshold.v_gs_th == Stated(typ=pytest.approx(3.0))


@pytest.mark.parametrize(
    ("key", "value"),
    [("di_dt_A_per_us = 100", 1e8), ("di_dt_kA_per_ms = 1", 1e6), ("di_dt_A_per_s = 1e8", 1e8)],
)
def test_units_of_a_rate(tmp_path, key, value):
    text = f"\n[stated.body_diode]\nif_A = 50\n{key}\nqrr_uC = 0.055\n"
    diode = read_part(make_folder(tmp_path, append=text)).stated.body_diode
    assert diode is not None
    assert diode.di_dt == pytest.approx(value)
    assert diode.q_rr == Stated(typ=pytest.approx(55e-9))


def test_a_falling_current_may_be_entered_with_its_sign(tmp_path):
    text = "\n[stated.body_diode]\nif_A = 50\ndi_dt_A_per_us = -100\nqrr_nC = 55\n"
    diode = read_part(make_folder(tmp_path, append=text)).stated.body_diode
    assert diode is not None
    assert diode.di_dt == pytest.approx(1e8)


# Curves


def test_every_quantity(tmp_path):
    append = (
        curve("output", "output.csv", "vgs_V = 4.5", "tj_C = 25")
        + curve("gate_charge", "gate_charge.csv", "vdd_V = 40", "id_A = 50", 'load = "resistive"')
        + curve("body_diode", "diode.csv", "tj_C = 150")
        + curve("rds_on_temperature", "rds_on.csv", "id_A = 50", "vgs_V = 10")
        + curve("vgs_th_temperature", "vgs_th.csv", "id_mA = 0.25")
    )
    files = GATE_CHARGE_FILE | {
        "output.csv": "vds_V,id_A\n0,0\n1,50\n",
        "diode.csv": "vsd_V,is_A\n0.6,1\n1,100\n",
        "rds_on.csv": "tj_C,rds_on_mohm\n-50,2.5\n25,3.4\n150,6\n",
        "vgs_th.csv": "tj_C,vgs_th_V\n-50,3.4\n25,3\n150,2.2\n",
    }
    part = read_part(make_folder(tmp_path, append=append, files=files))
    assert [c.name for c in part.curves[4:]] == [
        "output 4.5 V",
        "gate charge",
        "body diode 150 C",
        "rds_on(Tj)",
        "vgs_th(Tj)",
    ]
    output, charge, diode, r_ds_on, v_gs_th = part.curves[4:]
    assert (output.v_gs, output.t_j, output.v_ds) == (4.5, 25.0, None)
    assert (charge.v_dd, charge.i_d, charge.load, charge.t_j) == (40.0, 50.0, "resistive", None)
    assert charge.x.tolist() == pytest.approx([0, 17e-9, 31e-9, 63e-9])
    assert (charge.x_unit, charge.y_unit) == ("C", "V")
    assert charge.x_axis.end == pytest.approx(100e-9)
    assert (diode.t_j, diode.v_gs) == (150.0, 0.0)
    assert (r_ds_on.i_d, r_ds_on.v_gs, r_ds_on.x_unit, r_ds_on.y_unit) == (50.0, 10.0, "degC", "ohm")
    assert r_ds_on.x.tolist() == [-50.0, 25.0, 150.0]
    assert r_ds_on.y.tolist() == pytest.approx([2.5e-3, 3.4e-3, 6e-3])
    assert r_ds_on.x_axis.end == 100.0
    assert v_gs_th.i_d == pytest.approx(0.25e-3)
    assert v_gs_th.y.tolist() == [3.4, 3.0, 2.2]


def test_normalised_on_resistance_stays_a_ratio(tmp_path):
    append = curve("rds_on_temperature", "r.csv", "id_A = 50", "vgs_V = 10")
    part = read_part(make_folder(tmp_path, append=append, files={"r.csv": "tj_C,rds_on_ratio\n25,1\n150,1.8\n"}))
    found = only(part, Quantity.RDS_ON_TEMPERATURE)
    assert found.y_unit == ""
    assert found.y.tolist() == [1.0, 1.8]


def test_names_of_equal_curves_are_made_unique(tmp_path):
    append = (
        curve("transfer", "t2.csv", "vds_V = 5")
        + curve("transfer", "t3.csv", "vds_V = 10", "tj_C = -40")
        + curve("output", "o1.csv", "vgs_V = 10")
        + curve("output", "o2.csv", "vgs_V = 10", "tj_C = 150")
        + curve("body_diode", "d.csv", "vgs_V = -4")
    )
    files = {"t2.csv": TRANSFER, "t3.csv": TRANSFER, "d.csv": "vsd_V,is_A\n1,1\n2,10\n"}
    files |= {"o1.csv": "vds_V,id_A\n0,0\n1,50\n", "o2.csv": "vds_V,id_A\n0,0\n1,30\n"}
    part = read_part(make_folder(tmp_path, append=append, files=files))
    assert [c.name for c in part.curves[3:]] == [
        "transfer 25 C",
        "transfer 25 C (2)",
        "transfer -40 C",
        "output 10 V",
        "output 10 V 150 C",
        "body diode 25 C VGS -4 V",
    ]


def test_conditions_are_taken_from_the_table_with_a_notice(tmp_path):
    append = (
        curve("gate_charge", "gate_charge.csv")
        + curve("rds_on_temperature", "r.csv")
        + curve("vgs_th_temperature", "v.csv")
        + GATE_CHARGE_STATED
        + 'load = "resistive"\n'
        + "[stated.on_resistance]\nvgs_V = 10\nid_A = 30\n[stated.threshold]\nid_uA = 250\n"
    )
    files = GATE_CHARGE_FILE | {
        "r.csv": "tj_C,rds_on_ratio\n25,1\n150,1.8\n",
        "v.csv": "tj_C,vgs_th_V\n25,3\n150,2.2\n",
    }
    part = read_part(make_folder(tmp_path, append=append, files=files))
    charge = only(part, Quantity.GATE_CHARGE)
    assert (charge.v_dd, charge.i_d, charge.load) == (40.0, 50.0, "resistive")
    r_ds_on = only(part, Quantity.RDS_ON_TEMPERATURE)
    assert (r_ds_on.v_gs, r_ds_on.i_d) == (10.0, 30.0)
    assert only(part, Quantity.VGS_TH_TEMPERATURE).i_d == pytest.approx(250e-6)
    assert len(part.notices) == 6
    assert "gate charge: The curve's 'vdd' is not given; 40 V is taken from stated.gate_charge." in texts(part)
    assert "vgs_th(Tj): The curve's 'id' is not given; 250 uA is taken from stated.threshold." in texts(part)


def test_own_conditions_go_before_the_table(tmp_path):
    append = (
        curve("gate_charge", "gate_charge.csv", "vdd_V = 30", "id_A = 20", 'load = "current"')
        + GATE_CHARGE_STATED
        + 'load = "resistive"\n'
    )
    part = read_part(make_folder(tmp_path, append=append, files=GATE_CHARGE_FILE))
    charge = only(part, Quantity.GATE_CHARGE)
    assert (charge.v_dd, charge.i_d, charge.load) == (30.0, 20.0, "current")
    assert part.notices == ()


def test_a_capacitance_may_come_from_the_table(tmp_path):
    start = PART.index("[[curve]]")
    end = PART.index("[[curve]]", start + 1)
    toml = PART[:start] + PART[end:] + "[stated.capacitance]\nvds_V = 40\nciss_pF = 3900\n"
    part = read_part(make_folder(tmp_path, files={"part.toml": toml}))
    assert part.curves_of(Quantity.CISS) == ()
    assert "ciss: There is no ciss curve; its table value at VDS = 40 V stands in for it." in texts(part)
    assert "capacitance.csv: The column ciss_pF of capacitance.csv belongs to no curve" in texts(part)


def test_missing_data_is_listed_for_other_uses():
    from fitter.part import StatedCapacitance, StatedValues

    two = [Quantity.CISS, Quantity.COSS, Quantity.TRANSFER]
    third = StatedValues(capacitance=StatedCapacitance(v_ds=40.0, c_rss=Stated(typ=28e-12)))
    limit_only = StatedValues(capacitance=StatedCapacitance(v_ds=40.0, c_rss=Stated(max=28e-12)))
    assert missing_data([*two, Quantity.CRSS], StatedValues()) == []
    assert missing_data(two, third) == []
    assert [p.found for p in missing_data(two, StatedValues())] == ["there is no crss curve"]
    assert [p.found for p in missing_data(two, limit_only)] == ["there is no crss curve"]
    assert [p.found for p in missing_data([Quantity.CISS], third)] == [
        "there is no coss and no crss curve",
        "there is no transfer curve",
    ]


def test_capacitances_off_zero_gate_voltage_are_noted(tmp_path):
    part = read_part(make_folder(tmp_path, {'quantity = "ciss"': 'quantity = "ciss"\nvgs_V = -5'}))
    assert part.curves[0].v_gs == -5.0
    assert "ciss: The curve was measured at VGS = -5 V" in texts(part)


# Axes


def test_reversed_axis_ends_are_put_in_order(tmp_path):
    part = read_part(make_folder(tmp_path, {"from = 0, to = 200": "from = 200, to = 0"}))
    assert part.curves[3].y_axis == Axis(scale="linear", start=0.0, end=200.0)


def without_axes(text: str) -> str:
    return "".join(line + "\n" for line in text.splitlines() if "_axis" not in line)


def test_without_axes_the_range_of_the_data_is_taken_with_a_notice(tmp_path):
    part = read_part(make_folder(tmp_path, files={"part.toml": without_axes(PART)}))
    ciss, transfer = part.curves[0], part.curves[3]
    assert ciss.x_axis == Axis(scale="log", start=0.1, end=80.0, printed=False)
    assert ciss.y_axis.scale == "log"
    assert (ciss.y_axis.start, ciss.y_axis.end) == pytest.approx((3900e-12, 4900e-12))
    assert transfer.x_axis == Axis(scale="linear", start=3.5, end=5.0, printed=False)
    assert transfer.y_axis == Axis(scale="linear", start=2.0, end=120.0, printed=False)
    assert len(part.notices) == 4
    assert "transfer 25 C" in texts(part)
    assert "y_axis (linear from 2 A to 120 A)" in texts(part)


@pytest.mark.parametrize(
    ("points", "scale"),
    [
        ([0.1, 1, 10, 80], "log"),
        ([1, 2, 5, 10, 25], "linear"),  # less than a decade and a half
        ([0, 1, 10, 80], "linear"),  # begins at zero
        ([1, 10, 20, 30, 40, 50, 60, 70, 80], "linear"),  # evenly clicked
    ],
)
def test_guess_of_a_capacitance_curve_s_x_axis(tmp_path, points, scale):
    csv = "vds_V,ciss_pF,coss_pF,crss_pF\n" + "".join(f"{x},{4000 - x},{2000 - x},{300 - x}\n" for x in points)
    part = read_part(make_folder(tmp_path, files={"part.toml": without_axes(PART), "capacitance.csv": csv}))
    assert part.curves[0].x_axis.scale == scale


@pytest.mark.parametrize(("lowest", "scale"), [("0.001", "log"), ("2", "linear"), ("0", "linear"), ("-0.5", "linear")])
def test_guess_of_a_transfer_curve_s_y_axis(tmp_path, lowest, scale):
    files = {"part.toml": without_axes(PART), "transfer.csv": f"vgs_V,id_A\n2,{lowest}\n4,20\n5,120\n"}
    part = read_part(make_folder(tmp_path, files=files))
    assert (part.curves[3].x_axis.scale, part.curves[3].y_axis.scale) == ("linear", scale)


@pytest.mark.parametrize(("sign", "noted"), [("", True), ("-", False)])
def test_a_p_channel_part_without_signs_is_noted(tmp_path, sign, noted):
    transfer = f"vgs_V,id_A\n{sign}3.5,{sign}2\n{sign}4,{sign}20\n{sign}5,{sign}120\n"
    edits = {'channel = "n"': 'channel = "p"'}
    part = read_part(make_folder(tmp_path / "part", edits, files={"transfer.csv": transfer}))
    assert any('If it is an n-channel part, write channel = "n"' in n.text for n in part.notices) == noted
