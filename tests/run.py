"""Set up what is missing and run every check: style, types, layers, tests.

``python3 tests/run.py`` is all a newcomer needs; it makes ``.venv`` with everything in it and, as root on a machine
with Debian's packages, installs the simulators. Arguments go to pytest; without any it runs all fast tests, two at a
time. With CI=true a missing simulator is a failure.
"""

import os
import shutil
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
BIN = ROOT / ".venv" / ("Scripts" if os.name == "nt" else "bin")
SIMULATORS = ("ngspice", "gnucap")


def run(*command):
    """Run a command in the project's root and stop where it fails."""
    print("+", " ".join(str(part) for part in command), flush=True)
    status = subprocess.run([str(part) for part in command], cwd=ROOT, stdin=subprocess.DEVNULL, check=False).returncode
    if status:
        sys.exit(status)


def environment():
    """The virtual environment with the project and its test tools."""
    if not (BIN / "python").exists():
        run(sys.executable, "-m", "venv", ROOT / ".venv")
    run(
        BIN / "python",
        "-m",
        "pip",
        "install",
        "--quiet",
        "--disable-pip-version-check",
        "--editable",
        ".[test]",
    )


def simulators():
    """Install the simulators where that is possible; the tests that need them say why they are skipped elsewhere."""
    missing = [name for name in SIMULATORS if shutil.which(name) is None]
    if not missing or shutil.which("apt-get") is None or not hasattr(os, "geteuid") or os.geteuid() != 0:
        return
    print("+ apt-get install", *missing, flush=True)
    quiet = {
        "cwd": ROOT,
        "stdin": subprocess.DEVNULL,
        "stdout": subprocess.DEVNULL,
        "stderr": subprocess.STDOUT,
    }
    settings = {**os.environ, "DEBIAN_FRONTEND": "noninteractive"}
    subprocess.run(["apt-get", "update"], env=settings, check=False, **quiet)
    subprocess.run(
        ["apt-get", "install", "--yes", "--no-install-recommends", *missing],
        env=settings,
        check=False,
        **quiet,
    )


def main():
    """Everything, the fast checks first."""
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as the command does: the matrices are small
    environment()
    simulators()
    run(BIN / "ruff", "check", ".")
    run(BIN / "ruff", "format", "--check", ".")
    run(BIN / "mypy")
    run(BIN / "lint-imports")
    run(BIN / "python", "-m", "pytest", *(sys.argv[1:] or ["-n", "2", "--dist", "loadfile"]))


if __name__ == "__main__":
    main()
