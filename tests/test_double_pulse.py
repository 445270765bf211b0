"""Both forms of the subcircuit in ngspice, in a clamped inductive double pulse."""

import numpy as np
import pytest
from double_pulse_circuit import double_pulse, switched
from simulators import ngspice

from fitter.writers.elements import element_subcircuit
from fitter.writers.netlist import subcircuit

pytestmark = pytest.mark.simulator


@pytest.mark.parametrize(
    "r_gate, junction",
    [(0.5, "warm"), (5.0, "warm"), (50.0, "warm"), (100.0, "warm"), (0.5, "cold"), (5.0, "cold"), (5.0, "hot")],
)
@pytest.mark.parametrize("form", [subcircuit, element_subcircuit], ids=["expressions", "elements"])
def test_clamped_inductive_double_pulse(fitted, demo, tmp_path, form, r_gate, junction):
    model = fitted(demo, True)
    known = model.validity.t_j
    t_j = {"cold": np.ceil(known[0]), "warm": 25.0, "hot": np.floor(known[-1])}[junction]
    (tmp_path / "part.lib").write_text(form(model, t_j), encoding="ascii")
    pulse = double_pulse(model, r_gate)
    rows = ngspice(pulse.deck, tmp_path, columns=["v(d)", "i(lload)"])
    right = switched(model, pulse, rows)
    assert all(right.values()), right
