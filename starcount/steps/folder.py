"""The folder of a run: complete under its name, or not there at all."""

import errno
import os
import re
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from starcount.errors import InputError

OUTPUTS = Path("outputs")
"""Where runs go, below the folder the user works in."""

RECORD = "run.json"
"""What makes a folder a run: it is written last."""

NAME = re.compile(r"[A-Za-z0-9+_-][A-Za-z0-9+._-]{0,79}")

FULL = (errno.ENOSPC, errno.EDQUOT)


def folder_of(run: str | Path) -> Path:
    """Return the folder of an existing run, given its name or the folder itself."""
    for folder in (OUTPUTS / run, Path(run)):
        if (folder / RECORD).is_file():
            return folder
    known = sorted(path.parent.name for path in OUTPUTS.glob(f"*/{RECORD}"))
    raise InputError(f"{run}: not a run, no {RECORD} in it; runs in {OUTPUTS}: {', '.join(known) or 'none'}")


def run_path(name: str) -> Path:
    """Return where the run of that name goes; refuse what is no plain folder name."""
    if not NAME.fullmatch(name):
        raise InputError(f"run name {name!r}; expected up to 80 letters, digits and + - _ ., not starting with a dot")
    return ours(OUTPUTS / name)


def ours(final: Path) -> Path:
    """Return the path unless something stands there that no run of ours has made."""
    if final.exists() and not (final / RECORD).is_file():
        raise InputError(f"{final}: exists and was not made by starcount; choose another name")
    return final


def new(final: Path) -> Path:
    """Return the path unless something stands there: outside our own folder nothing is ever replaced."""
    if final.exists():
        raise InputError(f"{final}: exists already; choose another name, or remove it first")
    return final


@contextmanager
def replaced(final: Path) -> Iterator[Path]:
    """A new folder to write to, which becomes ``final`` when the block ends well and vanishes when it does not."""
    part = final.with_name(f".{final.name}.{os.getpid()}.part")
    with _writing(final, part):
        part.mkdir(parents=True)
        try:
            yield part
            _swap(part, final)
        finally:
            shutil.rmtree(part, ignore_errors=True)


@contextmanager
def _writing(final: Path, part: Path) -> Iterator[None]:
    """Say in one line that the place cannot be written to; other failures are not the user's."""
    try:
        yield
    except OSError as failure:
        here = any(name and str(part.parent) in str(name) for name in (failure.filename, failure.filename2))
        if not here and failure.errno not in FULL:
            raise
        raise InputError(f"{final}: cannot be written: {failure.strerror}") from failure


def _swap(part: Path, final: Path) -> None:
    if not final.exists():
        part.rename(final)
        return
    old = final.with_name(f".{final.name}.{os.getpid()}.old")
    final.rename(old)
    part.rename(final)
    shutil.rmtree(old)
