"""A part folder to fill in: a commented part file, and CSV files with headers only."""

from __future__ import annotations

import os
import shutil
import tempfile
from pathlib import Path

from fitter.errors import OutputError
from fitter.reading.input_files import PART_FILE
from fitter.reading.toml_tables import PLACEHOLDER

__all__ = ["write_new_folder"]

_PART = """\
# One transistor: enter what its datasheet says, wherever it says "@". Numbers go without quotes.
# A key carries its unit; any of the prefixes p n u m k M will do: id_A or id_mA, qg_nC or qg_pC.
# A line that begins with # is not read. What stands behind # below is optional: to use it, fill it in and
# remove the # from its lines.

[part]
name = "@"                 # names the subcircuit: a letter, then letters, digits, underscores
channel = "@"              # "n" or "p"; a p-channel part is entered as printed, signs and all
vds_max_V = "@"            # rated drain-source voltage, such as 80
vgs_max_V = "@"            # rated gate-source voltage, such as 20
notes = ""                       # one line of your own

# [package]                      # optional; goes into the netlist
# rg_ohm = "@"             # internal gate resistance
# lg_nH = "@"              # inductance of the gate lead
# ld_nH = "@"              # of the drain lead
# ls_nH = "@"              # of the source lead that gate loop and power loop share

# [reading]                      # optional; 1-sigma errors as a share of the printed axis' length
# point = 0.003                  # each clicked point, along x and along y
# axis = 0.003                   # where the axes were placed, common to a whole curve

# Curves. An axis is entered as printed: "linear" or "log", and its two ends in the unit of the CSV column.
# Where an axis is left out, the range of the points is taken for it, and reading errors come out too small.
# To change the unit of a column, change its name in the CSV file: ciss_pF to ciss_nF.

# Capacitances over VDS at VGS = 0: all three, or two of them and the third in [stated.capacitance].
[[curve]]
quantity = "ciss"
file = "ciss.csv"
x_axis = { scale = "@", from = "@", to = "@" }
y_axis = { scale = "@", from = "@", to = "@" }

[[curve]]
quantity = "coss"
file = "coss.csv"
x_axis = { scale = "@", from = "@", to = "@" }
y_axis = { scale = "@", from = "@", to = "@" }

[[curve]]
quantity = "crss"
file = "crss.csv"
x_axis = { scale = "@", from = "@", to = "@" }
y_axis = { scale = "@", from = "@", to = "@" }

# Transfer curve, ID over VGS: at least one. For further temperatures, repeat the entry with a file for each.
[[curve]]
quantity = "transfer"
file = "transfer_25C.csv"
x_axis = { scale = "@", from = "@", to = "@" }
y_axis = { scale = "@", from = "@", to = "@" }
vds_V = "@"                # VDS at which it was measured
tj_C = 25                        # junction temperature

# Gate charge, VGS over QG. The main job compares it with the fit, or fits it too when asked to.
# [[curve]]
# quantity = "gate_charge"
# file = "gate_charge.csv"
# x_axis = { scale = "linear", from = 0, to = "@" }
# y_axis = { scale = "linear", from = 0, to = "@" }
# vdd_V = "@"              # supply voltage of the test
# id_A = "@"               # load current
# load = "current"               # "current" or "resistive"

# Output curves, ID over VDS: one entry and one file for each VGS.
# [[curve]]
# quantity = "output"
# file = "output.csv"
# x_axis = { scale = "linear", from = 0, to = "@" }
# y_axis = { scale = "linear", from = 0, to = "@" }
# vgs_V = "@"
# tj_C = 25

# Body diode, IS over VSD: one entry and one file for each temperature.
# [[curve]]
# quantity = "body_diode"
# file = "body_diode_25C.csv"
# x_axis = { scale = "linear", from = "@", to = "@" }
# y_axis = { scale = "log", from = "@", to = "@" }
# tj_C = 25

# RDS(on) over junction temperature; for a curve normalised to 25 C, name the column rds_on_ratio.
# [[curve]]
# quantity = "rds_on_temperature"
# file = "rds_on_temperature.csv"
# x_axis = { scale = "linear", from = "@", to = "@" }
# y_axis = { scale = "linear", from = "@", to = "@" }
# vgs_V = "@"
# id_A = "@"

# VGS(th) over junction temperature.
# [[curve]]
# quantity = "vgs_th_temperature"
# file = "vgs_th_temperature.csv"
# x_axis = { scale = "linear", from = "@", to = "@" }
# y_axis = { scale = "linear", from = "@", to = "@" }
# id_mA = "@"

# Table values: every group and every value is optional, but a group needs its conditions.
# A value is a number, which is the typical one, or any of min, typ and max: { typ = 63, max = 95 }

# [stated.gate_charge]
# vdd_V = "@"
# id_A = "@"
# vgs_V = "@"
# load = "current"
# qg_nC = { typ = "@", max = "@" }
# qgs_nC = "@"
# qgd_nC = "@"
# v_plateau_V = "@"

# [stated.capacitance]
# vds_V = "@"
# ciss_pF = { typ = "@" }
# coss_pF = { typ = "@" }
# crss_pF = { typ = "@" }

# [stated.threshold]
# id_mA = "@"
# vgs_th_V = { min = "@", typ = "@", max = "@" }

# [stated.on_resistance]
# vgs_V = "@"
# id_A = "@"
# rds_on_mohm = { typ = "@", max = "@" }

# [stated.transconductance]
# vds_V = "@"
# id_A = "@"
# gfs_S = { typ = "@" }

# [stated.output_charge]
# vds_V = "@"
# qoss_nC = { typ = "@" }
# eoss_uJ = { typ = "@" }
# coss_er_pF = { typ = "@" }
# coss_tr_pF = { typ = "@" }

# [stated.body_diode]
# is_A = "@"               # for vsd
# vsd_V = { typ = "@", max = "@" }
# if_A = "@"               # for qrr and trr
# di_dt_A_per_us = "@"
# qrr_nC = { typ = "@" }
# trr_ns = { typ = "@" }
""".replace("@", PLACEHOLDER)

# The part file comes last: where it is, all others are.
_FILES = {
    "ciss.csv": "vds_V,ciss_pF\n",
    "coss.csv": "vds_V,coss_pF\n",
    "crss.csv": "vds_V,crss_pF\n",
    "transfer_25C.csv": "vgs_V,id_A\n",
    "gate_charge.csv": "qg_nC,vgs_V\n",
    "output.csv": "vds_V,id_A\n",
    "body_diode_25C.csv": "vsd_V,is_A\n",
    "rds_on_temperature.csv": "tj_C,rds_on_mohm\n",
    "vgs_th_temperature.csv": "tj_C,vgs_th_V\n",
    PART_FILE: _PART,
}


def write_new_folder(folder: str | os.PathLike[str]) -> tuple[Path, ...]:
    """Write a part folder to fill in; all of it or nothing.

    Parameters
    ----------
    folder : str or path
        Where to. It must not exist yet, or be an empty folder; the folder above it must exist.

    Returns
    -------
    tuple of Path
        The files written, the part file last.

    Raises
    ------
    OutputError
        If something is there already, which is never overwritten, or the folder cannot be written.
    """
    given = Path(folder)
    try:
        target = given.resolve()
        if target.exists() and not target.is_dir():
            raise OutputError(f"{given}: there is a file of this name already; name another folder")
        if target.is_dir() and (there := sorted(path.name for path in target.iterdir())):
            raise OutputError(f"{given}: the folder is not empty, it holds '{there[0]}'; name a new or an empty folder")
        if not target.parent.is_dir():
            raise OutputError(f"{given}: there is no folder '{given.parent}' to write it into; make that first")
        # The current folder cannot be exchanged for another one under the feet of the user's shell.
        if target.is_dir() and target.samefile(Path.cwd()):
            _write_into(target)
        else:
            _write_beside(target)
    except (OSError, RuntimeError, ValueError) as error:
        reason = (error.strerror if isinstance(error, OSError) else None) or str(error)
        raise OutputError(f"{given}: cannot be written ({reason})") from error
    return tuple(given / name for name in _FILES)


def _write_beside(target: Path) -> None:
    """Write a folder beside the target and move it into place, which takes place wholly or not at all."""
    staging = Path(tempfile.mkdtemp(prefix=f".{target.name}.", dir=target.parent))
    try:
        # One level below, since the temporary folder itself is closed to all others.
        whole = staging / "part"
        whole.mkdir()
        for name, text in _FILES.items():
            (whole / name).write_text(text, encoding="utf-8", newline="\n")
        if os.name == "nt" and target.exists():
            target.rmdir()
        whole.rename(target)
    finally:
        shutil.rmtree(staging, ignore_errors=True)


def _write_into(target: Path) -> None:
    """Write into an existing empty folder; take back what was written if that fails."""
    written: list[Path] = []
    try:
        for name, text in _FILES.items():
            path = target / name
            with path.open("x", encoding="utf-8", newline="\n") as stream:
                written.append(path)
                stream.write(text)
    except BaseException:
        for path in written:
            path.unlink(missing_ok=True)
        raise
