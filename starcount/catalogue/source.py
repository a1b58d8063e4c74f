"""What every reader returns: a star list that says which columns it has and gives them batch by batch."""

from abc import ABC, abstractmethod
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa

BATCH_ROWS = 1 << 17
"""Rows in a batch: three columns fill 3 MB, which stays in cache and hides the cost of a Python call."""


@dataclass(frozen=True)
class Column:
    """A column as the file describes it; ``unit`` is the file's own text, None where it says nothing.

    ``kind`` is 'number', 'boolean', 'text', 'other' (lists, structures), or 'unknown' where only parsing tells.
    """

    name: str
    unit: str | None = None
    kind: str = "unknown"


@dataclass(frozen=True)
class Batch:
    """Consecutive rows of a star list, and the share (0 to 1) of the file that has been read with them."""

    rows: pa.RecordBatch
    share: float


@dataclass(frozen=True)
class Source(ABC):
    """A star list on disk, opened and checked but not yet read.

    ``carries_units`` tells whether a column without a unit is an omission (True) or the format's habit (False).
    """

    path: Path
    columns: Mapping[str, Column]
    carries_units: bool

    @abstractmethod
    def batches(self, wanted: Mapping[str, str]) -> Iterator[Batch]:
        """Yield the wanted columns ({name: kind}) in file order; memory does not depend on the number of rows."""


def kind_of(arrow_type: pa.DataType) -> str:
    """Return the ``Column.kind`` of an Arrow type."""
    if pa.types.is_dictionary(arrow_type):
        return kind_of(arrow_type.value_type)
    tests = {
        "boolean": (pa.types.is_boolean,),
        "number": (pa.types.is_integer, pa.types.is_floating, pa.types.is_decimal),
        "text": (pa.types.is_string, pa.types.is_large_string, pa.types.is_string_view),
    }
    return next((kind for kind, checks in tests.items() if any(check(arrow_type) for check in checks)), "other")


def numbers(column: pa.Array) -> np.ndarray:
    """Return a numeric or boolean Arrow column as a numpy array in its own precision; null becomes NaN."""
    if pa.types.is_boolean(column.type):
        column = column.cast(pa.uint8())
    elif pa.types.is_decimal(column.type) or pa.types.is_dictionary(column.type):
        column = column.cast(pa.float64())
    return column.to_numpy(zero_copy_only=False)
