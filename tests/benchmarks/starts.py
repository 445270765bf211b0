"""Prints how many fits end in the same minimum when every start value is off by a factor of up to three.

Run as ``python tests/benchmarks/starts.py [--count 100] [demo part ...]``. For each part: it is fitted, gate charge
included, and then again and again from starts each value of which is multiplied by 3^u, u uniform over -1 to 1. An end
is the same minimum where the same forms were chosen, the same points left aside, and where chi-squared of all but the
hot curves differs by less than 0.5 from the reference's. Both are taken at the reference's standard deviations, since
those that a fit ends with are widened by its own misfit. An end that lies lower than the reference counts as another
minimum; it is printed, too.
"""

import argparse
import os
import sys
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from unittest import mock

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import numpy as np

from fitter.errors import FitterError
from fitter.fitting import forms, stages, start_values
from fitter.fitting.fit import fit
from fitter.reader import read_part

DEMOS = Path(__file__).resolve().parents[2] / "digitized_curves"
PARTS = ("cargo_80v", "wall_box_650v", "ferry_charger_1200v", "camper_van_p40v")
FACTOR = 3.0
#: Ends whose chi-squared differs by less are one minimum: one standard deviation of one parameter makes 1.
SAME = 0.5
#: What hands start values on that are made fit for use before a fit begins there.
BEFOREHAND = {
    forms: ("junction_start", "shield_starts", "two_shield_starts"),
    start_values: ("channel_start",),
}


def fit_from_kicked_starts(part, seed, use_gate_charge=True):
    """A fit with every start value multiplied by a factor of its own."""
    random = np.random.default_rng(seed)
    known = set()

    def kicked(start):
        """What a fit has found, or has been kicked before, is left as it is."""
        factors = FACTOR ** random.uniform(-1.0, 1.0, len(start))
        return {n: x if float(x) in known else x * f for (n, x), f in zip(start.items(), factors, strict=True)}

    def from_kicked(function):
        def starts(*arguments):
            every = function(*arguments)
            return [kicked(start) for start in every] if isinstance(every, list) else kicked(every)

        return starts

    def remembered(function, values_of):
        def known_from_now(*arguments, **options):
            result = function(*arguments, **options)
            known.update(float(x) for x in values_of(result).values())
            return result

        return known_from_now

    def kicked_solve(function):
        return lambda blocks, space, start, **options: function(blocks, space, kicked(start), **options)

    with ExitStack() as stack:

        def patch(module, name, function):
            stack.enter_context(mock.patch.object(module, name, function))

        for module, names in BEFOREHAND.items():
            for name in names:
                patch(module, name, from_kicked(getattr(module, name)))
        patch(start_values, "carrying", remembered(start_values.carrying, lambda start: start))
        patch(forms, "_ordered", remembered(forms._ordered, lambda values: values))
        patch(forms, "lowest", remembered(forms.lowest, lambda result: result[0]))
        for module in (forms, stages):
            patch(module, "solve", kicked_solve(remembered(module.solve, lambda solution: solution.values)))
        return fit(part, use_gate_charge=use_gate_charge)


@dataclass(frozen=True)
class End:
    """Where a fit ended, without the functions that keep a result from being sent between processes."""

    forms: tuple
    left_aside: tuple
    values: dict

    @classmethod
    def of(cls, result):
        return cls(
            forms=tuple((trial.shields, trial.rises) for trial in result.trials if trial.chosen),
            left_aside=tuple(sorted((outlier.curve, outlier.index) for outlier in result.outliers)),
            values=dict(result.solution.values),
        )


def excess(reference, values):
    """By how much chi-squared at some values lies above the reference's, at the reference's deviations.

    Hot curves do not count: the temperature laws follow a fit that does not see them, so that their chi-squared is not
    at its lowest, and moves with every small step of the rest.
    """
    followers = set(reference.solution.followers)
    leading = [block for block in reference.solution.blocks if followers.isdisjoint(block.parameters)]

    def chi_square(at):
        return float(sum(np.sum(np.real(block.residuals(at)) ** 2) for block in leading))

    return chi_square(values) - chi_square(reference.solution.values)


def verdict(reference, end):
    """``same``, or what is different."""
    known = End.of(reference)
    if end.forms != known.forms:
        return "forms {} and {}".format(*end.forms)
    if end.left_aside != known.left_aside:
        return "other points left aside"
    above = excess(reference, end.values)
    return "same" if abs(above) < SAME else f"chi-squared {above:+.1f}"


def end_of(job):
    """End of one fit, or why there is none."""
    part, seed = job
    try:
        return End.of(fit_from_kicked_starts(part, seed))
    except FitterError as error:
        return f"failed: {error}"


def study(name, count, workers):
    """How often each verdict was given."""
    part = read_part(DEMOS / name)
    reference = fit(part, use_gate_charge=True)
    with ProcessPoolExecutor(workers) as pool:
        ends = list(pool.map(end_of, [(part, seed) for seed in range(count)]))
    return Counter(end if isinstance(end, str) else verdict(reference, end) for end in ends)


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("parts", nargs="*", default=PARTS)
    parser.add_argument("--count", type=int, default=100)
    parser.add_argument("--workers", type=int, default=2)
    arguments = parser.parse_args()
    for name in arguments.parts:
        verdicts = study(name, arguments.count, arguments.workers)
        print(f"{name}: {verdicts.pop('same', 0)} of {arguments.count} in the same minimum", flush=True)
        for what, often in verdicts.most_common():
            print(f"  {often:4d} {what}", flush=True)


if __name__ == "__main__":
    main()
