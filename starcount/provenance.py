"""What made a file: package, date, command, seed, inputs, versions."""

import hashlib
import platform
import shlex
import sys
from collections.abc import Iterable
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path

from starcount.errors import InputError

STACK = (
    "numpy", "scipy", "astropy", "astropy-healpix", "numba", "pyarrow",
    "pymc", "pytensor", "arviz", "nutpie", "xarray", "matplotlib",
)  # fmt: skip


def provenance(inputs: Iterable[str | Path] = (), seed: int | None = None, command: str | None = None) -> dict:
    """The block that every output carries, of plain text, numbers, lists and dicts (fit for JSON).

    ``inputs`` are files or folders; a folder stands for every file in it, hidden ones left out.
    Paths are kept as the user gave them. ``command`` defaults to the command line of this process.
    """
    return {
        "package": "starcount",
        "version": _version("starcount"),
        "created_utc": datetime.now(UTC).isoformat(timespec="seconds"),
        "command": _command_line() if command is None else command,
        "seed": seed,
        "inputs": [_described(path) for given in inputs for path in _files(Path(given))],
        "python": platform.python_version(),
        "system": f"{platform.system()} {platform.machine()}",
        "stack": {name: _version(name) for name in STACK},
    }


def _version(distribution: str) -> str:
    # Read from the installed metadata: importing the libraries would take seconds.
    try:
        return metadata.version(distribution)
    except metadata.PackageNotFoundError:
        return "not installed"


def _command_line() -> str:
    return shlex.join([Path(sys.argv[0]).name, *sys.argv[1:]])


def _files(path: Path) -> list[Path]:
    if not path.is_dir():
        return [path]
    shown = (p for p in path.rglob("*") if p.is_file())
    return sorted(p for p in shown if not any(part.startswith(".") for part in p.relative_to(path).parts))


def _described(path: Path) -> dict:
    try:
        with path.open("rb") as file:
            digest = hashlib.file_digest(file, "sha256").hexdigest()
        return {"path": path.as_posix(), "bytes": path.stat().st_size, "sha256": digest}
    except OSError as error:
        raise InputError(f"{path}: cannot be read ({error.strerror}); expected an input file") from error
