"""How our loops are compiled, and where the results are kept.

numba recompiles a cached function when its own file changes, but not when a helper in another file does: it would then
return the old numbers, silently. So the cache folder carries one digest of the sources of all kernels and laws, and so
does every cache key handed to PyTensor.
"""

import hashlib
import os
from collections.abc import Callable
from pathlib import Path

import numba
import platformdirs

FAST = {"contract", "reassoc", "nsz", "arcp"}
"""Liberties of the compiler in our loops. Never nnan or ninf: NaN must survive to be seen."""

_PACKAGE = Path(__file__).parent
_SOURCES = ("compilation.py", "vector_math.py", "galaxy/*.py", "forward/kernels/*.py")


def _digest() -> str:
    found = hashlib.sha256()
    for pattern in _SOURCES:
        for path in sorted(_PACKAGE.glob(pattern)):
            found.update(path.read_bytes())
    return found.hexdigest()[:16]


DIGEST = _digest()
"""Changes with any line of any kernel or law."""


def cached(decorate: Callable, function: Callable):
    """Apply a numba decorator with its cache in a folder named by ``DIGEST`` (unless NUMBA_CACHE_DIR is set)."""
    if os.environ.get("NUMBA_CACHE_DIR"):
        return decorate(function)
    before = numba.config.CACHE_DIR
    numba.config.CACHE_DIR = str(Path(platformdirs.user_cache_dir("starcount")) / f"kernels-{DIGEST}")
    try:
        return decorate(function)
    finally:
        numba.config.CACHE_DIR = before


def kernel(function: Callable):
    """Compile a serial kernel that releases the GIL."""
    return cached(numba.njit(nogil=True, cache=True, fastmath=FAST, error_model="numpy"), function)
