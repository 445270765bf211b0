"""Running circuit simulators in batch: a deck in, arrays out."""

import os
import re
import shutil
import subprocess

import numpy as np
import pytest


def required(name):
    """Path of a simulator; without it the test is skipped, or fails where CI=true says that it must be there."""
    path = shutil.which(name)
    if path is None:
        reason = f"{name} is not installed: as root, tests/run.py installs it from Debian's packages"
        if os.environ.get("CI") == "true":
            pytest.fail(reason)
        pytest.skip(reason)
    return path


def ngspice(deck, folder, *, columns, timeout=120, allow_warnings=False):
    """Run a deck's analysis in ngspice and return the vectors it writes.

    Parameters
    ----------
    deck : str
        Circuit and analysis without ``.end``; what comes back is set by `columns`.
    folder : Path
        Where the deck's own files lie and its output goes.
    columns : sequence of str
        Vectors to write, such as ``v(gate)``.
    timeout : float
        Seconds.
    allow_warnings : bool
        Whether the simulator may warn.

    Returns
    -------
    ndarray, shape (n, 1 + columns)
        The scale (time, frequency or the swept source), then the vectors; complex ones as two columns each.
    """
    output = folder / "out.txt"
    wanted = " ".join(columns)
    control = f".control\nset wr_singlescale\nset numdgt=12\nrun\nwrdata {output.name} {wanted}\nquit\n.endc\n"
    (folder / "deck.cir").write_text(deck.rstrip() + "\n" + control + ".end\n", encoding="ascii")
    command = [required("ngspice"), "-b", "deck.cir"]
    result = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=timeout, check=False)
    said = result.stdout + result.stderr
    assert output.exists(), said[-2000:]
    if not allow_warnings:
        assert not re.search(r"warning|error|singular|too small", said, re.IGNORECASE), said[-2000:]
    return np.loadtxt(output, ndmin=2)
