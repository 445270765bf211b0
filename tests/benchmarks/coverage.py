"""Prints how often 95 % intervals hold the truth, on data made from the fitted models themselves.

Run as ``python tests/benchmarks/coverage.py [--count 300] [demo part ...]``. For each part: a model is fitted, its
parameters are taken for the truth, curves and table values are made from it and clicked again with other errors, and
each of these is fitted. Printed are the share of intervals that hold the truth, and the spread of the estimates over
the one that the information matrix promises (1 is the Cramer-Rao bound).
"""

import argparse
import os
import sys
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import numpy as np
from redigitize import exact, inside, redigitize

from fitter.comparison import compare
from fitter.fitting.determination import OPEN, led_by_expectation, spreads
from fitter.fitting.fit import fit
from fitter.reader import read_part

DEMOS = Path(__file__).resolve().parents[2] / "digitized_curves"
PARTS = ("cargo_80v", "wall_box_650v", "ferry_charger_1200v", "camper_van_p40v")
#: How the names begin of what not every form has.
FORMS = ("s1", "s2", "cr")
FIGURES = ("qg", "qgs", "qgd", "v_plateau", "qoss", "eoss")


def truth_of(name):
    """The part, the parameters that are taken for the truth, and those of them that the part's data determine."""
    part = read_part(DEMOS / name)
    result = fit(part, use_gate_charge=True)
    return part, inside(result.estimate.values), determined(result)


def determined(result):
    led = led_by_expectation(result.solution, result.estimate)
    known = {name for name, spread in spreads(result.estimate).items() if spread <= OPEN}
    return known - led - set(result.on_bound)


def one(job):
    """Figures and parameters of one re-digitization: name -> (truth, estimate, low, high, standard error)."""
    part, values, names, seed = job
    again = redigitize(part, values, seed)
    result = fit(again, use_gate_charge=True)
    true = {c.quantity: c.fitted for c in compare(part, exact(values), (), False)}
    rows = {}
    for c in compare(again, result.estimate, (), True):
        if c.quantity in FIGURES:
            rows[c.quantity] = (true[c.quantity], c.fitted, c.low, c.high, (c.high - c.low) / 3.92)
    sigma = np.sqrt(np.diag(result.estimate.covariance))
    names = names & determined(result)
    same_form = {n for n in values if n[:2] in FORMS} == {n for n in result.estimate.space.names if n[:2] in FORMS}
    for d, u, s in zip(result.estimate.space.free, result.estimate.coordinates, sigma, strict=True):
        if d.name not in names:
            continue
        if not same_form and d.name.endswith(("_gd", "_ds")):
            continue
        true_u = np.log(values[d.name]) if d.scale == "log" else values[d.name] / d.typical
        rows[d.name] = (true_u, u, u - 1.96 * s, u + 1.96 * s, s)
    return rows


def study(name, count, workers):
    truth = truth_of(name)
    jobs = [(*truth, seed) for seed in range(count)]
    with ProcessPoolExecutor(workers) as pool:
        found = list(pool.map(one_safely, jobs, chunksize=4))
    failed = sum(f is None for f in found)
    found = [f for f in found if f is not None]
    print(f"\n{name}: {len(found)} fits" + (f", {failed} failed" if failed else ""))
    print(f"  {'':14s} {'n':>4s} {'held':>7s} {'spread/promised':>16s}")
    for figure in dict.fromkeys(key for rows in found for key in rows):
        table = np.array([rows[figure] for rows in found if figure in rows], dtype=float)
        true, estimate, low, high, sigma = table.T
        held = np.mean((low <= true) & (true <= high))
        spread = np.std(estimate - true) / np.median(sigma)
        print(f"  {figure:14s} {len(table):4d} {100 * held:6.1f}% {spread:16.3f}")
    sys.stdout.flush()


def one_safely(job):
    try:
        return one(job)
    except Exception as error:
        print(f"seed {job[2]}: {type(error).__name__}: {error}", file=sys.stderr)
        return None


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("parts", nargs="*", default=PARTS)
    parser.add_argument("--count", type=int, default=300)
    parser.add_argument("--workers", type=int, default=2)
    arguments = parser.parse_args()
    for name in arguments.parts:
        study(name, arguments.count, arguments.workers)


if __name__ == "__main__":
    main()
