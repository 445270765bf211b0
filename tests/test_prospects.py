"""What to digitize next: the best comes first, and a curve does what was promised of it once it is given."""

from __future__ import annotations

import math
import re
import shutil
import sys
from dataclasses import replace

import numpy as np
import pytest
from conftest import ROOT
from redigitize import inside, redigitize, true_points

from fitter.cli import main
from fitter.fitting.fit import fit
from fitter.gate_charge import OperatingPoint, gate_charge_curve
from fitter.models.transistor import Transistor
from fitter.models.types import scalar
from fitter.part import Quantity, StatedValues
from fitter.pipeline import next_to_digitize
from fitter.prospects import FIGURES, prospects
from fitter.screen import show_prospects

NAME = "camper_van_p40v"
#: Curves of the stripped part.
FEW = ("ciss", "coss", "crss", "transfer 25 C")
#: How far a promised width may be off the one that comes of it.
WITHIN = 1.5


@pytest.fixture(scope="module")
def truth(fitted):
    return inside(fitted(NAME, use_gate_charge=True).estimate.values)


@pytest.fixture(scope="module")
def whole(fitted, truth):
    """A demo part whose curves and table values come from the model."""
    return redigitize(fitted(NAME, use_gate_charge=True).part, truth, 1)


@pytest.fixture(scope="module")
def point(whole):
    """Where its gate charge is stated."""
    table = whole.stated.gate_charge
    return OperatingPoint(v_dd=table.v_dd, i_d=table.i_d, v_gs=table.v_gs, load=table.load)


def with_curves(part, *names):
    """The few curves and some more, without a table."""
    curves = tuple(curve for curve in part.curves if curve.name in (*FEW, *names))
    return replace(part, curves=curves, stated=StatedValues())


@pytest.fixture(scope="module")
def stripped(whole):
    part = with_curves(whole)
    return part, fit(part)


@pytest.fixture(scope="module")
def found(stripped, point):
    return prospects(*stripped, point)


def exact_values(result):
    return {name: scalar(value) for name, value in result.estimate.values.items()}


def named(some, beginning):
    (one,) = [p for p in some if p.what.startswith(beginning)]
    return one


# The ranking


def test_the_gate_charge_curve_comes_first(found):
    assert found.missing[0].what == "gate_charge curve"


def test_the_gate_charge_curve_shrinks_the_gate_charges_interval_strongly(found):
    assert found.missing[0].widths["qg"] < 0.1 * found.now["qg"]


def test_the_best_comes_first(found):
    for some in (found.missing, found.again):
        gains = [p.gain for p in some]
        assert len(gains) > 1
        assert gains == sorted(gains, reverse=True)


def test_everything_that_is_not_given_is_looked_at(found):
    wanted = {"gate_charge curve", *(f"{name} in the table" for name in ("qg", "qgs", "qgd", "v_plateau"))}
    wanted |= {"vgs_th in the table", "rds_on in the table"}
    outputs = {p.what for p in found.missing if p.what.startswith("output curve at VGS ")}
    assert len(outputs) == 2
    assert {p.what for p in found.missing} == wanted | outputs


def test_what_is_given_may_be_clicked_a_second_time(found, stripped):
    assert {p.what for p in found.again} <= {curve.name for curve in stripped[0].curves}


def test_every_figure_has_a_width(found):
    for widths in (found.now, *(p.widths for p in (*found.missing, *found.again))):
        assert set(widths) == set(FIGURES)
        assert all(width > 0.0 for width in widths.values())


def test_no_width_grows(found):
    grown = [
        (p.what, name)
        for p in (*found.missing, *found.again)
        for name in FIGURES
        if p.widths[name] > found.now[name] * (1.0 + 1e-9)
    ]
    assert grown == []


def test_the_gain_is_the_mean_logarithm_of_the_shrinking(found):
    for p in found.missing:
        shrunk = [math.log(found.now[name] / p.widths[name]) for name in FIGURES]
        assert p.gain == pytest.approx(sum(shrunk) / len(shrunk), abs=1e-12)


def test_a_gate_charge_curve_does_not_narrow_the_output_energy(found):
    assert found.missing[0].widths["eoss"] == pytest.approx(found.now["eoss"], rel=0.02)


def test_a_coss_curve_clicked_twice_narrows_the_output_energy_most(found):
    best = min(found.again, key=lambda p: p.widths["eoss"])
    assert best.what == "coss"
    # Two looks at the same thing: a half of the variance.
    assert best.widths["eoss"] == pytest.approx(found.now["eoss"] / 2**0.5, rel=0.05)


# Promised and kept


@pytest.fixture(scope="module")
def with_gate_charge(whole, point):
    part = with_curves(whole, "gate charge")
    return prospects(part, fit(part, use_gate_charge=True), point)


@pytest.mark.parametrize("figure", FIGURES)
def test_a_gate_charge_curve_does_what_was_promised_of_it(found, with_gate_charge, figure):
    promised = named(found.missing, "gate_charge curve").widths[figure]
    assert promised / WITHIN < with_gate_charge.now[figure] < WITHIN * promised


def with_promised_output(part, truth, v_gs):
    """The stripped part with the very output curve that was looked at, clicked."""
    (template,) = [c for c in part.curves if c.name == "output 3.5 V"]
    x = np.linspace(0.0, 3.0, 25)
    curve = replace(template, v_gs=v_gs, x=x, y=x, lines=np.arange(x.size))
    axes = {
        "x_axis": replace(curve.x_axis, start=0.0, end=3.0),
        "y_axis": replace(curve.y_axis, start=0.0, end=float(true_points(curve, truth)[1].max())),
    }
    few = with_curves(part)
    clicked = redigitize(replace(few, curves=(replace(curve, **axes),)), truth, 2)
    return replace(few, curves=few.curves + clicked.curves)


def test_an_output_curve_does_what_was_promised_of_it(whole, stripped, truth, found, point):
    plateau = float(gate_charge_curve(Transistor.from_values(exact_values(stripped[1])), point).reading.v_plateau)
    part = with_promised_output(whole, truth, plateau)
    promised = named(found.missing, f"output curve at VGS {plateau:.2g} V").widths["v_plateau"]
    given = prospects(part, fit(part), point).now["v_plateau"]
    assert promised / WITHIN < given < WITHIN * promised
    assert given < found.now["v_plateau"] / (3.0 * WITHIN)


def test_what_is_promised_is_more_than_what_there_was(found, with_gate_charge):
    # The promise above says something: the interval does shrink by far more than its own margin.
    assert with_gate_charge.now["qg"] < found.now["qg"] / (3.0 * WITHIN)


# What is given


def test_what_is_given_is_not_missing(with_gate_charge):
    assert [p.what for p in with_gate_charge.missing if "charge" in p.what or p.what.startswith("qg")] == []


def test_without_a_capacitance_curve_it_is_missing(whole, point):
    part = with_curves(whole)
    part = replace(
        part, curves=tuple(c for c in part.curves if c.quantity is not Quantity.COSS),
        stated=StatedValues(capacitance=whole.stated.capacitance),
    )  # fmt: skip
    missing = prospects(part, fit(part), point).missing
    assert min(missing, key=lambda p: p.widths["eoss"]).what == "coss curve"


@pytest.fixture(scope="module")
def full():
    """Model and prospects of a whole demo part."""
    return next_to_digitize(ROOT / "digitized_curves" / NAME)


def test_nothing_is_missing_where_everything_is_given(full):
    assert full[1].missing == ()


def test_where_everything_is_given_the_screen_says_so(full, capsys):
    show_prospects(*full)
    said = capsys.readouterr().out
    assert "Every curve and table value that the fit can use for these figures is given." in said


def test_where_everything_is_given_a_second_look_may_still_help(full):
    again = full[1].again
    assert again
    assert all(p.gain > 0.0 for p in again)


def test_no_width_of_a_full_part_grows(full):
    found = full[1]
    assert all(p.widths[name] <= found.now[name] * (1.0 + 1e-9) for p in found.again for name in FIGURES)


# The command


def folder_with_little(target, *more):
    """Capacitances, the 25 C transfer curve and what else is named by a pattern."""
    source = ROOT / "digitized_curves" / NAME
    head, *entries = re.split(r"(?=^\[\[curve\]\]|^\[stated)", (source / "part.toml").read_text("utf-8"), flags=re.M)
    wanted = "|".join([r'"(ciss|coss|crss)"', "transfer_25C", *more])
    target.mkdir()
    (target / "part.toml").write_text(head + "".join(e for e in entries if re.search(wanted, e)), "utf-8")
    for path in source.glob("*.csv"):
        shutil.copy(path, target)
    return target


@pytest.fixture
def run(monkeypatch, capsys):
    """``run("next", folder)``: exit status, what it says, and what it complains of."""

    def call(*arguments):
        monkeypatch.setattr(sys, "argv", ["fetwright", *map(str, arguments)])
        with pytest.raises(SystemExit) as stopped:
            main()
        said = capsys.readouterr()
        return stopped.value.code or 0, re.sub(r"\x1b\[[0-9;]*m", "", said.out), said.err

    return call


def test_the_command_ranks_and_writes_nothing(run, tmp_path):
    folder = folder_with_little(tmp_path / "part")
    before = sorted(path.name for path in folder.rglob("*"))
    status, out, err = run("next", folder)
    assert (status, err) == (0, "")
    lines = out.splitlines()
    (now,) = [i for i, line in enumerate(lines) if line.strip().startswith("all that is given")]
    assert lines[now + 1].strip().startswith("gate_charge curve ")
    shares = [int(share) for share in re.findall(r" (\d+) % *$", "\n".join(lines[now + 1 :]), re.M)]
    assert len(shares) > 5
    assert shares[0] == max(shares) > 50
    assert sorted(path.name for path in folder.rglob("*")) == before


def test_the_command_says_where_it_looks_in_the_datasheets_signs(run, tmp_path):
    folder = folder_with_little(tmp_path / "part", r"^\[stated\.gate_charge\]")
    status, out, _ = run("next", folder)
    assert status == 0
    assert "at VDD -20 V, ID -30 A, VGS -10 V" in out


def test_the_command_refuses_a_folder_that_cannot_be_read(run, tmp_path):
    status, out, err = run("next", tmp_path)
    assert (status, out) == (2, "")
    assert err.startswith("fetwright: ")
