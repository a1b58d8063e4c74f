"""Run folders: complete or absent, never somebody else's."""

import os

import pytest

from starcount.errors import InputError
from starcount.steps import folder


@pytest.fixture(autouse=True)
def in_empty_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


def write_run(name, content):
    final = folder.run_path(name)
    with folder.replaced(final) as part:
        (part / "table.csv").write_text(content)
        (part / folder.RECORD).write_text("{}")
    return final


def fail_half_way(final):
    with folder.replaced(final) as part:
        (part / "table.csv").write_text("2")
        raise ZeroDivisionError


def left_in_outputs():
    return sorted(path.name for path in folder.OUTPUTS.iterdir())


def test_a_run_is_found_by_name_and_by_folder():
    """``report`` takes either."""
    final = write_run("first", "1")
    assert folder.folder_of("first") == final
    assert folder.folder_of(final.resolve()) == final.resolve()


def test_a_run_of_the_same_name_is_replaced_whole():
    """Nothing of the earlier run stays, and no temporary folder either."""
    final = write_run("again", "1")
    (final / "stale.png").write_text("")
    write_run("again", "2")
    assert (final / "table.csv").read_text() == "2"
    assert not (final / "stale.png").exists()
    assert left_in_outputs() == ["again"]


def test_a_run_that_fails_leaves_the_earlier_one():
    """A failure half way leaves the earlier run untouched and nothing half-written."""
    final = write_run("kept", "1")
    with pytest.raises(ZeroDivisionError):
        fail_half_way(final)
    assert (final / "table.csv").read_text() == "1"
    assert left_in_outputs() == ["kept"]


def test_a_foreign_folder_is_refused():
    """A folder without our record is somebody's work: it is not replaced."""
    (folder.OUTPUTS / "mine").mkdir(parents=True)
    with pytest.raises(InputError, match="outputs/mine: exists and was not made by starcount"):
        folder.run_path("mine")


@pytest.mark.parametrize("name", ["", "..", "a/b", "/tmp/x", ".hidden", "a b", "x" * 81])
def test_only_plain_names(name):
    """A run's name cannot lead out of the outputs folder."""
    with pytest.raises(InputError, match="run name"):
        folder.run_path(name)


def test_a_missing_run_lists_those_there_are():
    """The message says what would work."""
    write_run("there", "1")
    with pytest.raises(InputError, match=r"nowhere: not a run.*runs in outputs: there"):
        folder.folder_of("nowhere")


def test_an_outputs_that_is_a_file_is_one_line():
    """Where nothing can be written, the place and the system's reason are named."""
    folder.OUTPUTS.write_text("")
    with pytest.raises(InputError, match="outputs/new: cannot be written"):
        write_run("new", "1")


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write anywhere")
def test_an_unwritable_folder_is_one_line():
    """A folder without permission is the user's to mend, not a bug."""
    folder.OUTPUTS.mkdir(mode=0o500)
    with pytest.raises(InputError, match="cannot be written: Permission denied"):
        write_run("new", "1")


def test_other_failures_stay_bugs():
    """A file of ours that is missing is not reported as the user's fault."""
    with pytest.raises(FileNotFoundError), folder.replaced(folder.run_path("bug")):
        open("no-such-package-file")  # noqa: SIM115
