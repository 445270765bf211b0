"""Coverage-guided fuzzing of the two readers of files that may come from strangers.

    python tests/fuzz/fuzz_readers.py [--seconds 600]

Half of the time goes to part folders (`read_part`, then `inspect` on whatever was read), half to model files
(`load_model`, then what the commands do with a model). It needs `pip install atheris`; tests/fuzz/corpus holds the
inputs to begin with. A part folder is one file there: part.toml, then a.csv, b.csv, c.csv and d.csv, with a line of
two percent signs between them. An input that breaks a reader is kept in the current folder, and its name is printed;
`--reader part --input FILE` runs that input only.
"""

from __future__ import annotations

import argparse
import json
import random
import re
import subprocess
import sys
import tempfile
import warnings
from contextlib import suppress
from itertools import zip_longest
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
CORPUS = Path(__file__).resolve().parent / "corpus"
READERS = ("part", "model")
SEPARATOR = b"\n%%\n"
TABLES = ("a.csv", "b.csv", "c.csv", "d.csv")
#: Seconds for one input, megabytes for all, bytes of one input.
LONGEST, MOST_MEMORY, LARGEST = 10, 4096, 24000
#: A file system in memory, where there is one.
MEMORY = Path("/dev/shm")

WORD = re.compile(rb"[A-Za-z_0-9.+-]+|[^A-Za-z_0-9.+\s-]")
TEXTS = """
0 -0.0 1 -1 2 0.5 1e-9 1e12 1e308 -1e308 1e-320 1e400 nan inf -inf true 0x10 1_000 1,5 2024-01-01 %% # " ' = [ ] { }
[[curve]] [part] [stated.body_diode] [package] [reading] "n" "p" "log" "linear" "current" "resistive" ciss coss crss
transfer output gate_charge body_diode rds_on_temperature vgs_th_temperature quantity file x_axis y_axis scale from to
vds_V vgs_V id_A id_mA vdd_V tj_C qg_nC is_A vsd_V rds_on_mohm rds_on_ratio vgs_th_V frequency_MHz load min typ max
point_error axis_error"""
PIECES = (*TEXTS.encode().split(), b"", b"\n", b"\r\n", b"\t", b";", b"\xef\xbb\xbf", b"\0", b"\xb5", b"\xce\xbc")
NODES = (
    None, True, False, 0, 1, -1, 0.0, -0.0, 0.5, 1e-300, 1e-12, 1e12, 1e300, -1e300, float("nan"), float("inf"),
    10**400, "", "k", "c_gs", "\u2028", "n", "fitted", [], {}, [[]], [1.0, 0.0], {"a": 1},
)  # fmt: skip


def edited_text(data: bytes, at_random: random.Random) -> bytes:
    """A part folder with a line or a word dropped, doubled, moved or replaced."""
    lines = data.split(b"\n")
    at, other = (at_random.randrange(len(lines)) for _ in range(2))
    way = at_random.randrange(8)
    if way == 0:
        del lines[at]
    elif way == 1:
        lines.insert(other, lines[at])
    elif way == 2:
        lines[at], lines[other] = lines[other], lines[at]
    else:
        words = [*WORD.finditer(lines[at])]
        if words:
            word, piece = at_random.choice(words), at_random.choice(PIECES)
            lines[at] = lines[at][: word.start()] + piece + lines[at][word.end() :]
    return b"\n".join(lines)


def edited_json(data: bytes, at_random: random.Random) -> bytes:
    """A model file with one node replaced, dropped, or scaled; unchanged where it is no JSON."""
    with suppress(ValueError, RecursionError):
        root = json.loads(data)
        node, places = root, []
        while isinstance(node, dict | list) and node:
            key = at_random.choice([*node] if isinstance(node, dict) else range(len(node)))
            places.append((node, key))
            node = node[key]
        if places:
            inside, key = at_random.choice(places) if at_random.random() < 0.3 else places[-1]
            number = isinstance(inside[key], float)
            if at_random.random() < 0.1:
                del inside[key]
            elif number and at_random.random() < 0.6:
                inside[key] *= at_random.choice((-1.0, 1.0 + 1e-7, 0.5, 2.0, 1e-3, 1e3, 1e-30, 1e30))
            else:
                inside[key] = at_random.choice(NODES)
        return json.dumps(root).encode()
    return data


def part_folder(place: Path):
    """A function that reads any bytes as a part folder."""
    from fitter.errors import PartFolderError
    from fitter.inspection import inspect
    from fitter.reader import read_part

    def read(data: bytes) -> None:
        toml, *tables = data.split(SEPARATOR)
        (place / "part.toml").write_bytes(toml)
        for name, table in zip_longest(TABLES, tables[: len(TABLES)], fillvalue=b""):
            (place / name).write_bytes(table)
        try:
            part = read_part(place)
        except PartFolderError as error:
            if not all(problem.file and str(problem).isprintable() for problem in error.problems):
                raise AssertionError("a message names no file, or is not one line of text") from error
            return
        for finding in inspect(part):
            assert str(finding)

    return read


def model_file(place: Path):
    """A function that reads any bytes as a model file."""
    from fitter.errors import ExtrapolationWarning, FitterError, ModelFileError
    from fitter.interface import load_model

    path = place / "model.json"

    def read(data: bytes) -> None:
        path.write_bytes(data)
        try:
            model = load_model(path)
        except ModelFileError as error:
            if not str(error).startswith(f"{path}: "):
                raise AssertionError("a message does not name the file") from error
            return
        p = model.test_point()
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", ExtrapolationWarning)
            for use in (
                model.subcircuit,
                lambda: model.subcircuit(form="elements"),
                lambda: model.subcircuit(t_j=110.0),
                lambda: model.save(place / "again.json"),
                lambda: model.gate_charge(p.v_dd, p.i_d, p.v_gs, p.load),
                model.to_frame,
                model.checks_frame,
            ):
                with suppress(FitterError):
                    use()

    return read


def fuzz(reader: str, seconds: int, place: Path, only: Path | None) -> None:
    """Fuzz one reader in this process, which ends with it."""
    import atheris

    sys.path.insert(0, str(ROOT))
    with atheris.instrument_imports(include=["fitter", "tomllib", "csv"]):
        import fitter.interface
        import fitter.reader  # noqa: F401
    # As in the tests: a calculation that overflows unseen is an error.
    warnings.simplefilter("error")
    found, files = place / "found", place / "files"
    for folder in (found, files):
        folder.mkdir()
    edit = edited_text if reader == "part" else edited_json

    def mutated(data: bytes, largest: int, seed: int) -> bytes:
        at_random = random.Random(seed)
        if at_random.random() < 0.2:
            return atheris.Mutate(data, largest)
        for _ in range(at_random.choice((1, 1, 2, 4))):
            data = edit(data, at_random)
        return data[:largest]

    options = [
        f"-max_total_time={seconds}",
        f"-max_len={LARGEST}",
        f"-timeout={LONGEST}",
        f"-rss_limit_mb={MOST_MEMORY}",
        f"-artifact_prefix={reader}-",
        "-print_final_stats=1",
    ]
    inputs = [str(only)] if only else [str(found), str(CORPUS / reader)]
    read = (part_folder if reader == "part" else model_file)(files)
    atheris.Setup([sys.argv[0], *options, *inputs], read, custom_mutator=mutated)
    atheris.Fuzz()


def main() -> int:
    """The readers one after the other, each in a process of its own."""
    arguments = argparse.ArgumentParser(description="Fuzz the readers of part folders and model files.")
    arguments.add_argument("--seconds", type=int, default=600, help="for all readers together; 600 by default")
    arguments.add_argument("--reader", choices=READERS, help="this reader only")
    arguments.add_argument("--input", type=Path, help="with --reader: run this input only")
    arguments.add_argument("--place", type=Path, help=argparse.SUPPRESS)
    given = arguments.parse_args()
    try:
        import atheris  # noqa: F401
    except ImportError:
        print("fuzz_readers needs atheris, which is not installed: pip install atheris", file=sys.stderr)
        return 2
    if given.place:
        fuzz(given.reader, given.seconds, given.place, given.input)
    readers = (given.reader,) if given.reader else READERS
    broken = False
    for reader in readers:
        with tempfile.TemporaryDirectory(dir=MEMORY if MEMORY.is_dir() else None) as place:
            command = [sys.executable, __file__, "--reader", reader, "--place", place]
            command += ["--seconds", str(given.seconds // len(readers))]
            command += ["--input", str(given.input)] if given.input else []
            done = subprocess.run(command, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, check=False)
        executed = re.search(r"number_of_executed_units:\s*(\d+)", done.stdout)
        print(f"{reader}: {executed[1] if executed else 'no'} inputs read, exit status {done.returncode}", flush=True)
        if done.returncode:
            broken = True
            print(done.stdout[done.stdout.find(" === Uncaught") :][-6000:])
    return int(broken)


if __name__ == "__main__":
    sys.exit(main())
