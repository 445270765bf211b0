"""Weak and strong variants: at the stated limits where there are any, typical where there are none."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from fitter.part import Stated
from fitter.pipeline import output_files
from fitter.variants import variants
from fitter.writers.tables import limits_frame


@pytest.fixture
def model(fitted, demo):
    return fitted(demo)


def stating(model, group, **values):
    table = replace(getattr(model.part.stated, group), **values)
    return replace(model, part=replace(model.part, stated=replace(model.part.stated, **{group: table})))


def rows(variant):
    return {row.quantity: row for row in variant.rows}


def test_weak_first_then_strong(model):
    assert [v.kind for v in variants(model)] == ["weak", "strong"]


def test_every_stated_limit_is_met(model):
    for variant in variants(model):
        assert all(row.met is not False for row in variant.rows), variant.kind


def test_threshold_and_on_resistance_are_at_their_limits(model):
    weak, strong = (rows(v) for v in variants(model))
    stated = model.part.stated
    assert weak["vgs_th"].value == pytest.approx(stated.threshold.v_gs_th.max, rel=1e-5)
    assert weak["rds_on"].value == pytest.approx(stated.on_resistance.r_ds_on.max, rel=1e-5)
    assert strong["vgs_th"].value == pytest.approx(stated.threshold.v_gs_th.min, rel=1e-5)


def test_the_tighter_of_gate_charge_and_input_capacitance_counts(model):
    weak = rows(variants(model)[0])
    on_limit = [abs(weak[q].value / weak[q].stated.max - 1.0) < 1e-5 for q in ("qg", "ciss")]
    assert on_limit.count(True) == 1
    assert [weak[q].moved for q in ("qg", "ciss")] == on_limit


def test_capacitances_are_at_their_limits(model):
    weak = variants(model)[0]
    v = model.sign * model.part.stated.capacitance.v_ds
    assert float(weak.model.crss(v)) == pytest.approx(model.part.stated.capacitance.c_rss.max, rel=1e-6)
    assert float(weak.model.coss(v)) == pytest.approx(model.part.stated.capacitance.c_oss.max, rel=1e-6)


def test_what_has_no_limit_stays_typical(model):
    strong = variants(model)[1]
    v = model.sign * np.array([0.1, 0.5, 0.9]) * model.part.v_ds_max
    np.testing.assert_allclose(strong.model.crss(v), model.crss(v), rtol=1e-12)
    np.testing.assert_allclose(strong.model.coss(v), model.coss(v), rtol=1e-12)
    assert not rows(strong)["crss"].moved


def test_without_any_limit_both_are_the_typical_model(model):
    stated = model.part.stated
    bare = replace(
        model,
        part=replace(
            model.part,
            stated=replace(
                stated,
                gate_charge=replace(stated.gate_charge, q_g=Stated(typ=stated.gate_charge.q_g.typ)),
                capacitance=None,
                threshold=None,
                on_resistance=None,
            ),
        ),
    )
    for variant in variants(bare):
        assert not any(row.moved for row in variant.rows)
        for name, p in variant.model.parameters.items():
            assert p.value == pytest.approx(model.parameters[name].value, rel=1e-12), name


def test_a_lowest_on_resistance_makes_the_strong_one_stronger(model):
    typical = model.part.stated.on_resistance.r_ds_on
    limited = stating(model, "on_resistance", r_ds_on=replace(typical, min=0.7 * typical.typ))
    assert rows(variants(limited)[1])["rds_on"].value == pytest.approx(0.7 * typical.typ, rel=1e-5)


def test_a_limit_out_of_reach_is_said_to_be_not_met(model):
    limited = stating(model, "on_resistance", r_ds_on=Stated(typ=1e-3, max=1e-7))
    row = rows(variants(limited)[0])["rds_on"]
    assert row.met is False
    assert not row.moved


def test_weak_switches_slower_than_strong(model):
    weak, strong = (v.model for v in variants(model))
    p, s = model.test_point(), model.sign
    charge = [m.gate_charge(s * p.v_dd, s * p.i_d, s * p.v_gs, p.load) for m in (weak, model, strong)]
    assert charge[0].total > charge[1].total * 1.05
    assert abs(charge[0].v_plateau) > abs(charge[1].v_plateau) > abs(charge[2].v_plateau)


def test_table_has_a_row_for_each_variant_and_quantity(model):
    frame = limits_frame(model, variants(model))
    assert list(frame.columns) == [
        "variant", "quantity", "unit", "condition", "stated_min", "stated_typ", "stated_max", "value", "set_by_limit",
        "limits",
    ]  # fmt: skip
    assert len(frame) == 2 * len(model.checks)
    assert set(frame["limits"]) == {"met", "no limit stated"}
    threshold = frame[(frame["variant"] == "weak") & (frame["quantity"] == "vgs_th")].iloc[0]
    assert threshold["value"] == pytest.approx(threshold["stated_max"], rel=1e-5)
    assert np.sign(threshold["value"]) == model.sign
    assert pd.isna(frame[frame["quantity"] == "gfs"]["stated_max"]).all()


def test_file_holds_three_subcircuits_that_say_what_they_are(fitted):
    model = fitted("cargo_80v")
    text = output_files(model, variants(model))["CB80N4.lib"].decode()
    heads = [line for line in text.splitlines() if line.startswith(".SUBCKT")]
    assert heads == [f".SUBCKT {name} drain gate source" for name in ("CB80N4", "CB80N4_weak", "CB80N4_strong")]
    assert "slow corner of the stated limits" in text
    assert all(len(line) < 80 for line in text.splitlines())


def test_only_a_fit_with_limits_writes_them(fitted):
    model = fitted("cargo_80v")
    assert "limits.csv" not in output_files(model)
    assert "limits.csv" in output_files(model, variants(model))
