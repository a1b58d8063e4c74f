"""Tables that take longer to make than to read, kept on disk under a digest of everything they are made from."""

import hashlib
import logging
import zipfile
from collections.abc import Callable
from importlib.resources import files
from pathlib import Path

import numpy as np
import platformdirs

from starcount import constants
from starcount.errors import InputError
from starcount.files import replacing

log = logging.getLogger(__name__)


def kept(inputs: tuple, make: Callable[[], dict[str, np.ndarray]]) -> dict[str, np.ndarray]:
    """Return the arrays that ``make`` returns, read from disk where they were made before from the same inputs.

    The key is a digest of ``inputs`` (bytes, or anything whose ``repr`` tells it apart), of our tables, of our own
    code and of the constants (the order of the classes), so a changed table or line never returns old numbers. A file
    that cannot be read is made again, a folder that cannot be written is done without; the log says so.
    """
    path = _folder() / f"{_digest(inputs)}.npz"
    if path.is_file():
        try:
            with np.load(path, allow_pickle=False) as stored:
                return {name: stored[name] for name in stored.files}
        except (OSError, ValueError, KeyError, EOFError, zipfile.BadZipFile) as broken:
            log.warning("%s: cannot be read (%s); made again", path, broken)
    arrays = make()
    try:
        with replacing(path) as temporary:
            np.savez(temporary, **arrays)
    except InputError as refused:
        log.warning("tables are not kept: %s", refused)
    return arrays


def _folder() -> Path:
    """The folder beside that of the compiled kernels."""
    return Path(platformdirs.user_cache_dir("starcount")) / "tables"


def _digest(inputs: tuple) -> str:
    found = hashlib.sha256(_OURS)
    for value in inputs:
        found.update(value if isinstance(value, bytes) else repr(value).encode())
        found.update(b"\0")
    return found.hexdigest()[:32]


def _our_bytes() -> bytes:
    found = hashlib.sha256(Path(constants.__file__).read_bytes())
    for folder in (files(__package__), files(__package__) / "data"):
        for path in sorted(p for p in Path(str(folder)).iterdir() if p.suffix in {".py", ".ecsv"}):
            found.update(path.read_bytes())
    return found.digest()


_OURS = _our_bytes()
