"""A part folder is untrusted: no path leaves it, sizes are bounded, any bytes give a part or an error."""

from __future__ import annotations

import contextlib
import os
import socket

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from part_folders import PART, TRANSFER, check, curve, make_folder, problems_of

from fitter.errors import FitterError
from fitter.part import Part
from fitter.reader import read_part
from fitter.reading.input_files import (
    MAX_CSV_BYTES,
    MAX_FILE_NAME,
    MAX_TOML_BYTES,
    MAX_TOTAL_BYTES,
    file_name,
)

# Files that are not what they should be


@pytest.mark.parametrize(
    ("data", "fragments"),
    [
        (b"", "transfer.csv: the file is empty; expected a header line"),
        (b" \r\n\t\n", "transfer.csv: the file is empty"),
        (b"\xef\xbb\xbf", "transfer.csv: the file holds only comments"),
        (TRANSFER.encode("utf-16"), "transfer.csv:1: this is text in UTF-16; expected a text file in UTF-8"),
        (TRANSFER.encode() + b"# 25 \xb0C\n", "transfer.csv:5: the byte 0xb0 is not valid UTF-8"),
        (
            b"PK\x03\x04\x14\x00\x06\x00",
            "transfer.csv:1: this is a spreadsheet or archive; expected plain text",
        ),
        (b"vgs_V,id_A\n1,\x00\n", "transfer.csv:2: the control character '\\x00': this is no text"),
        (b"vgs_V,id_A\n1,\x1b[31m2\n", "transfer.csv:2: the control character '\\x1b'"),
        (b"\x89PNG\r\n\x1a\n\x00\x00", "transfer.csv:1: the byte 0x89 is not valid UTF-8"),
        (b"#" * (MAX_CSV_BYTES + 1), f"transfer.csv: larger than {MAX_CSV_BYTES // 1024} KiB"),
        (None, "transfer.csv: there is no such file; expected an ordinary file 'transfer.csv'"),
    ],
)
def test_contents_of_a_csv_file(tmp_path, data, fragments):
    check(make_folder(tmp_path, files={"transfer.csv": data}), fragments)


@pytest.mark.parametrize(
    ("data", "fragments"),
    [
        (b"", "part.toml: the file is empty; expected at least [part]"),
        (PART.encode("utf-16"), "part.toml:1: this is text in UTF-16"),
        (
            PART.replace("Invented", "Überall").encode("latin-1"),
            "part.toml:6: the byte 0xdc is not valid UTF-8",
        ),
        (PART.encode() + b"\x00", "part.toml:32: the control character '\\x00'"),
        (b"#" * (MAX_TOML_BYTES + 1), f"part.toml: larger than {MAX_TOML_BYTES // 1024} KiB"),
        (None, ("part.toml: there is no such file", "'fetwright new' writes one")),
    ],
)
def test_contents_of_the_part_file(tmp_path, data, fragments):
    check(make_folder(tmp_path, files={"part.toml": data}), fragments)


def test_the_files_together_are_bounded(tmp_path):
    each = MAX_CSV_BYTES - 1000
    count = MAX_TOTAL_BYTES // each + 1
    filler = b"vds_V,id_A\n0,0\n1,5\n" + (b"#" * 999 + b"\n") * (each // 1000 - 1)
    append = "".join(curve("output", f"o{n}.csv", "vgs_V = 5") for n in range(count))
    files = {f"o{n}.csv": filler for n in range(count)}
    check(make_folder(tmp_path, append=append, files=files), f"exceed {MAX_TOTAL_BYTES // 1024**2} MiB")


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("../transfer.csv", "leads out of the part folder"),
        ("a/../../transfer.csv", "leads out of the part folder"),
        ("..\\\\transfer.csv", "leads out of the part folder"),
        ("/etc/passwd", "is an absolute path"),
        ("~/transfer.csv", "is an absolute path"),
        ("C:\\\\transfer.csv", "is an absolute path"),
        ("C:transfer.csv", "is an absolute path"),
        ("\\\\\\\\server\\\\share\\\\t.csv", "is an absolute path"),
        ("a\\\\transfer.csv", "holds a backslash"),
        ("a\\u0000b.csv", "holds control characters"),
        ("a\\nb.csv", "holds control characters"),
        ("=cmd.csv", "does not begin with a letter"),
        ("a/-rf.csv", "does not begin with a letter"),
        (".", "does not begin with a letter"),
        ("", "is empty"),
        (" transfer.csv", "blanks at its ends"),
        ("x" * (MAX_FILE_NAME + 1), f"is longer than {MAX_FILE_NAME}"),
    ],
)
def test_file_names(tmp_path, name, reason):
    (tmp_path / "transfer.csv").write_text(TRANSFER)
    folder = make_folder(tmp_path / "part", {'file = "transfer.csv"': f'file = "{name}"'})
    check(folder, ("part.toml:28 [curve 4.file]: the name '", reason, "in the part folder"))


def test_file_names_in_their_simplest_form():
    assert file_name("a//b/./c.csv") == ("a/b/c.csv", "")


@pytest.mark.parametrize(
    ("name", "other"),
    [("transfer.csv", "Transfer.CSV"), ("transfer.csv", "tranfser.csv"), ("part.toml", "Part.toml")],
)
def test_a_misspelt_file_is_found(tmp_path, name, other):
    folder = make_folder(tmp_path)
    (folder / name).rename(folder / other)
    check(
        folder,
        f"{name}: there is no such file; expected an ordinary file '{name}' in the part folder; did you "
        f"mean '{other}'?",
    )


def test_links_may_not_lead_out(tmp_path):
    (tmp_path / "secret.csv").write_text(TRANSFER)
    folder = make_folder(tmp_path / "part", files={"transfer.csv": None})
    (folder / "transfer.csv").symlink_to(tmp_path / "secret.csv")
    check(folder, "transfer.csv: this is a link that leads out of the part folder")


def test_links_to_folders_may_not_lead_out(tmp_path):
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "t.csv").write_text(TRANSFER)
    folder = make_folder(tmp_path / "part", {'file = "transfer.csv"': 'file = "in/t.csv"'})
    (folder / "in").symlink_to(tmp_path / "elsewhere")
    check(folder, "in/t.csv: this is a link that leads out of the part folder")


def test_the_part_file_may_not_be_a_link_out(tmp_path):
    (tmp_path / "part.toml").write_text(PART)
    folder = make_folder(tmp_path / "part", files={"part.toml": None})
    (folder / "part.toml").symlink_to(tmp_path / "part.toml")
    check(folder, "part.toml: this is a link that leads out of the part folder")


def test_links_within_the_folder_are_followed(tmp_path):
    folder = make_folder(tmp_path, files={"transfer.csv": None, "real.csv": TRANSFER})
    (folder / "transfer.csv").symlink_to("real.csv")
    assert read_part(folder).curves[3].file == "transfer.csv"


def test_links_in_a_circle_and_links_to_nothing(tmp_path):
    folder = make_folder(tmp_path, files={"transfer.csv": None, "capacitance.csv": None})
    (folder / "transfer.csv").symlink_to("transfer.csv")
    (folder / "capacitance.csv").symlink_to("nothing.csv")
    check(
        folder,
        "capacitance.csv: there is no such file",
        "transfer.csv: cannot be read",
    )


def test_a_folder_in_place_of_a_file(tmp_path):
    folder = make_folder(tmp_path, files={"transfer.csv": None, "part.toml": None})
    (folder / "part.toml").mkdir()
    check(folder, "part.toml: this is a folder, not a file")
    (folder / "part.toml").rmdir()
    (folder / "transfer.csv").mkdir()
    check(make_folder(folder, files={"transfer.csv": None}), "transfer.csv: this is a folder, not a file")


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no pipes with names here")
def test_pipes_and_devices_are_not_opened(tmp_path, monkeypatch):
    folder = make_folder(tmp_path, files={"transfer.csv": None, "capacitance.csv": None})
    os.mkfifo(folder / "transfer.csv")
    monkeypatch.chdir(folder)  # a socket's path has to be short
    with socket.socket(socket.AF_UNIX) as server:
        server.bind("capacitance.csv")
        check(
            folder,
            "capacitance.csv: this is a device, pipe or socket, not a file",
            "transfer.csv: this is a device, pipe or socket, not a file",
        )


def test_a_file_that_may_not_be_read(tmp_path, monkeypatch):
    # Simulated, since permissions do not stop the administrator, as whom tests may run.
    folder = make_folder(tmp_path)
    really_open = os.open

    def refuse(path, flags, *rest):
        if str(path).endswith("transfer.csv"):
            raise PermissionError(13, "Permission denied", str(path))
        return really_open(path, flags, *rest)

    monkeypatch.setattr(os, "open", refuse)
    check(folder, "transfer.csv: cannot be read (Permission denied); expected an ordinary file")


@pytest.mark.parametrize("name", ["nothing", "nul\0", "x" * 5000])
def test_no_such_folder(tmp_path, name):
    (problem,) = problems_of(f"{tmp_path}/{name[:20]}" if len(name) < 20 else name)
    assert "folder" in str(problem)


def test_a_file_in_place_of_the_folder(tmp_path):
    folder = make_folder(tmp_path)
    check(folder / "part.toml", ("part.toml: this is not a folder", "give the folder, not a file in it"))


# Any bytes whatever


def part_or_error(folder):
    with contextlib.suppress(FitterError):
        assert isinstance(read_part(folder), Part)


fuzz = settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
TOML_BITS = (
    """[ ] = { } , " ' . # 1 -3 nan inf 1e400 true 2024-01-01 0x [part] [stated.threshold] [[curve]] """
    '"ciss" quantity file name vds_V id_mA vgs_th_V typ İs_A x_axis scale from'
)
CSV_BITS = ', ; " # 1 2,5 3.5 -4 1e5 1e-400 nan ٣ _ İ ı K vgs_V id_A id_mA VGS_V tj_C rds_on_ratio'
BLANKS = ("\t", "\n", "\r", "\r\n", " ", "\ufeff", "\u2028", "\0")
toml_bits = st.sampled_from([*TOML_BITS.split(), *BLANKS, '"' * 3, "'" * 3])
csv_bits = st.sampled_from([*CSV_BITS.split(), *BLANKS])


@fuzz
@given(data=st.binary(max_size=300) | st.text(max_size=200).map(lambda t: t.encode("utf-8", "surrogatepass")))
@example(data=b"\xff\xfe")
@example(data=b"[" * 5000)
@example(data=b"a" + b".a" * 1900 + b"=1")
def test_any_bytes_as_the_part_file(tmp_path_factory, data):
    part_or_error(make_folder(tmp_path_factory.mktemp("part"), files={"part.toml": data}))


@fuzz
@given(bits=st.lists(toml_bits, max_size=40), keep=st.booleans())
def test_any_pieces_of_toml(tmp_path_factory, bits, keep):
    text = PART * keep + "".join(bits)
    part_or_error(make_folder(tmp_path_factory.mktemp("part"), files={"part.toml": text.encode()}))


@fuzz
@given(
    where=st.integers(0, len(PART) - 1),
    length=st.integers(0, 12),
    bits=st.lists(toml_bits, max_size=3),
)
def test_any_edit_of_the_part_file(tmp_path_factory, where, length, bits):
    text = PART[:where] + "".join(bits) + PART[where + length :]
    part_or_error(make_folder(tmp_path_factory.mktemp("part"), files={"part.toml": text.encode()}))


@fuzz
@given(data=st.binary(max_size=300) | st.text(max_size=200).map(lambda t: t.encode("utf-8", "surrogatepass")))
def test_any_bytes_as_a_csv_file(tmp_path_factory, data):
    part_or_error(make_folder(tmp_path_factory.mktemp("part"), files={"transfer.csv": data}))


@fuzz
@given(bits=st.lists(csv_bits, max_size=40), head=st.sampled_from(["", "vgs_V,id_A\n1,2\n", "vgs_V;id_A\n1;2\n"]))
def test_any_pieces_of_csv(tmp_path_factory, bits, head):
    text = head + "".join(bits)
    part_or_error(make_folder(tmp_path_factory.mktemp("part"), files={"transfer.csv": text.encode()}))


@fuzz
@given(name=st.text(max_size=40))
def test_any_file_name(tmp_path_factory, name):
    quoted_name = '"' + "".join(f"\\U{ord(c):08x}" for c in name if not "\ud800" <= c <= "\udfff") + '"'
    folder = make_folder(tmp_path_factory.mktemp("part"), {'file = "transfer.csv"': f"file = {quoted_name}"})
    part_or_error(folder)
