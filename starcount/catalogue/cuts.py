"""Quality cuts: simple comparisons such as ``ruwe < 1.4``, read by a grammar of one line; nothing is evaluated.

    cut    = column operator value
    column = any characters but spaces, quotes and < > = !
    value  = number | true | false | 'text' | "text"

Text is compared by == and != only. A star whose value is missing does not pass, whatever the operator, and is reported
apart. A number is compared in the precision in which the column is stored: 1.4 is not below 1.4 in single precision.
"""

import operator
import re
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.compute

from starcount.catalogue.source import numbers
from starcount.errors import InputError

OPERATORS = {
    "<=": operator.le,
    ">=": operator.ge,
    "==": operator.eq,
    "!=": operator.ne,
    "<": operator.lt,
    ">": operator.gt,
}

GRAMMAR = re.compile(
    r"""\s*(?P<column>[^\s<>=!'"]+)\s*(?P<operator>[<>=!]=|[<>])\s*
    (?:(?P<number>[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?) | (?P<boolean>true|false)
    | '(?P<single>[^']*)' | "(?P<double>[^"]*)")\s*""",
    re.VERBOSE,
)


@dataclass(frozen=True)
class Cut:
    """One comparison; ``kind`` ('number', 'boolean' or 'text') is what its column must hold."""

    text: str
    column: str
    operator: str
    value: int | float | bool | str
    kind: str

    @property
    def reasons(self) -> tuple[str, str]:
        """Names for the two ways not to pass: value missing, comparison false."""
        return f"{self.column} missing for cut {self.text!r}", f"failed cut {self.text!r}"

    def apply(self, column: pa.Array) -> tuple[np.ndarray, np.ndarray]:
        """Return which rows have no value, and which of the others pass, both (row,) bool."""
        if self.kind == "text":
            equal = pa.compute.equal(column.cast(pa.string()), self.value)
            missing = equal.is_null().to_numpy(zero_copy_only=False)
            same = equal.fill_null(False).to_numpy(zero_copy_only=False)
            return missing, same if self.operator == "==" else ~same
        values = numbers(column)
        return np.isnan(values), OPERATORS[self.operator](values, self.value)


def parse_cut(text: str) -> Cut:
    """Return the cut that a text such as ``phot_g_n_obs >= 10`` or ``class != 'galaxy'`` describes."""
    match = GRAMMAR.fullmatch(text)
    if match is None:
        raise InputError(
            f"cut {text!r}: expected one comparison COLUMN OPERATOR VALUE such as 'ruwe < 1.4'; operators"
            f" {', '.join(OPERATORS)}; value a number, true, false or quoted text"
        )
    kind, value = literal(match)
    if kind == "text" and match["operator"] not in ("==", "!="):
        raise InputError(f"cut {text!r}: text compared by {match['operator']}; expected == or !=")
    return Cut(text.strip(), match["column"], match["operator"], value, kind)


def literal(match: re.Match) -> tuple[str, int | float | bool | str]:
    """Return the kind and the value of the right-hand side."""
    if match["number"]:
        whole = match["number"].lstrip("+-").isdigit()
        return "number", int(match["number"]) if whole else float(match["number"])
    if match["boolean"]:
        return "boolean", match["boolean"] == "true"
    return "text", match["single"] if match["double"] is None else match["double"]
