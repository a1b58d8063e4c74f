"""Writing files whole or not at all."""

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from starcount.errors import InputError


@contextmanager
def replacing(path: str | Path) -> Iterator[Path]:
    """A path to write to that takes the place of ``path`` when the block ends well.

    The temporary name lies in the same folder (a rename across file systems is not atomic), starts
    with a dot and keeps the ending, by which some libraries choose the format. On any error, and
    on Ctrl-C, the temporary file is removed and ``path`` is what it was before.
    """
    path = Path(path)
    temporary = path.with_name(f".{path.stem}-{secrets.token_hex(4)}{path.suffix}")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        yield temporary
        _to_disk(temporary)
        os.replace(temporary, path)
    except OSError as error:
        reason = error.strerror or str(error)
        raise InputError(f"{path}: cannot be written ({reason}); expected a writable place with free space") from error
    finally:
        _remove(temporary)


def write_bytes(path: str | Path, data: bytes) -> None:
    """Write ``data`` to ``path``, whole or not at all."""
    with replacing(path) as temporary:
        temporary.write_bytes(data)


def write_text(path: str | Path, text: str) -> None:
    """Write ``text`` to ``path`` as UTF-8 with line feeds on every system, whole or not at all."""
    write_bytes(path, text.encode("utf-8"))


def _to_disk(path: Path) -> None:
    # Without this a power cut after the rename can leave an empty file under the final name.
    with path.open("r+b") as file:
        os.fsync(file.fileno())


def _remove(path: Path) -> None:
    # exists() is false, not an error, where a parent of the path is a file.
    if path.exists():
        path.unlink()
