"""Provenance and files: what made an output, and outputs that are whole or not there."""

import hashlib
import json
import os
import subprocess
import sys
from datetime import UTC, datetime, timedelta

import pytest

from starcount.errors import InputError
from starcount.files import replacing, write_bytes, write_text
from starcount.provenance import provenance


def test_inputs_carry_size_and_digest(tmp_path):
    """SHA-256 of 'abc' is the worked example of FIPS 180-2, appendix B.1."""
    path = tmp_path / "input.txt"
    path.write_bytes(b"abc")
    (entry,) = provenance([path])["inputs"]
    assert entry["bytes"] == 3
    assert entry["sha256"] == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert entry["path"] == path.as_posix()


def test_a_folder_stands_for_its_files(tmp_path):
    """Every file of a folder in the order of names, hidden ones left out."""
    for name in ("b.txt", "sub/c.txt", "a.txt", ".hidden", ".git/d"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_text(name)
    entries = provenance([tmp_path])["inputs"]
    assert [entry["path"].removeprefix(f"{tmp_path.as_posix()}/") for entry in entries] == [
        "a.txt",
        "b.txt",
        "sub/c.txt",
    ]
    assert entries[0]["sha256"] == hashlib.sha256(b"a.txt").hexdigest()


def test_the_block_can_be_stored(monkeypatch):
    """It is plain JSON and holds seed, command as typed, versions and a date of now in UTC."""
    monkeypatch.setattr(sys, "argv", ["/some/where/starcount", "fit", "my survey"])
    block = provenance(seed=7)
    assert json.loads(json.dumps(block)) == block
    assert (block["package"], block["seed"], block["command"]) == ("starcount", 7, "starcount fit 'my survey'")
    assert abs(datetime.fromisoformat(block["created_utc"]) - datetime.now(UTC)) < timedelta(minutes=1)
    import numpy

    assert block["stack"]["numpy"] == numpy.__version__
    assert provenance(command="by hand")["command"] == "by hand"


def test_versions_are_read_without_importing():
    """Listing the stack imports none of it: a run that needs no sampler does not load one."""
    code = "import sys, starcount.provenance as p; p.provenance(); print([m for m in p.STACK if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_a_missing_input_is_named(tmp_path):
    """An input that is not there is refused in one line."""
    with pytest.raises(
        InputError, match=r"gone.txt: cannot be read \(No such file or directory\); expected an input file"
    ):
        provenance([tmp_path / "gone.txt"])


def test_writing_makes_folders_and_replaces(tmp_path):
    """A file is written into a new folder, then replaced; nothing else stays behind."""
    path = tmp_path / "new" / "out.txt"
    write_text(path, "one\n")
    write_bytes(path, b"two\r\n")
    assert path.read_bytes() == b"two\r\n"
    assert os.listdir(path.parent) == ["out.txt"]


def test_a_reader_never_sees_half_a_file(tmp_path):
    """Whoever has the old file open reads the old file to its end: the name moves, the bytes are not overwritten."""
    path = tmp_path / "out.txt"
    write_text(path, "old, and longer")
    with path.open() as reader:
        write_text(path, "new")
        assert reader.read() == "old, and longer"
    assert path.read_text() == "new"


def test_text_is_utf8_with_line_feeds(tmp_path):
    """The bytes do not depend on the system."""
    write_text(tmp_path / "t", "h_z ≈ 0.3\n")
    assert (tmp_path / "t").read_bytes() == b"h_z \xe2\x89\x88 0.3\n"


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt])
def test_an_interrupted_file_leaves_the_old_one(tmp_path, error):
    """Half-written bytes never get the final name, and the temporary file is removed."""
    path = tmp_path / "out.bin"
    path.write_bytes(b"old")
    with pytest.raises(error):
        _write_half(path, error)
    assert path.read_bytes() == b"old"
    assert os.listdir(tmp_path) == ["out.bin"]


def test_an_unwritable_place_is_one_line(tmp_path):
    """A folder that is a file, and a file that is a folder, are refused by name and reason."""
    (tmp_path / "file").write_text("")
    (tmp_path / "folder").mkdir()
    for path in (tmp_path / "file" / "out.txt", tmp_path / "folder"):
        with pytest.raises(InputError, match=r"cannot be written \(.+\); expected a writable place") as caught:
            write_text(path, "x")
        assert "\n" not in str(caught.value)
    assert sorted(os.listdir(tmp_path)) == ["file", "folder"]


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="needs a device that is always full")
def test_a_full_disc_is_one_line(tmp_path):
    """No space left is said so, and the temporary file is gone."""
    with pytest.raises(InputError, match=r"out: cannot be written \(No space left on device\)"):
        _fill_the_disc(tmp_path / "out")
    assert os.listdir(tmp_path) == []


def _write_half(path, error):
    with replacing(path) as temporary:
        temporary.write_bytes(b"ne")
        assert temporary.name.startswith(".")
        assert (temporary.parent, temporary.suffix) == (path.parent, ".bin")
        raise error


def _fill_the_disc(path):
    with replacing(path) as temporary, open("/dev/full", "w") as full:
        temporary.write_text("begun")
        full.write("x" * 100_000)
        full.flush()
