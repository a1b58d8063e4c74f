"""What a page and its figures are made of."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from astropy.table import Table

from starcount.predict import Prediction
from starcount.survey import Group

SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


@dataclass(frozen=True, eq=False)
class ParameterDraws:
    """One fitted parameter before and after the counts, in its unit, and the truth of an invented sky.

    ``draws`` and ``prior_draws`` have shape (draw,); ``prior_68`` holds the exact lower end, median and upper end of
    the prior's central 68 %.
    """

    name: str
    unit: str
    meaning: str
    draws: np.ndarray
    prior_draws: np.ndarray
    prior_68: tuple[float, float, float]
    prior: str
    truth: float | None = None

    @property
    def label(self) -> str:
        """The name with its unit in brackets."""
        suffix = "_" + self.unit.replace("-", "") if self.unit else ""
        bare = self.name.removesuffix(suffix).replace(".", " ")
        return f"{bare} [{self.unit.translate(SUPERSCRIPTS)}]" if self.unit else bare


@dataclass(frozen=True, eq=False)
class CurveDraws:
    """The fitted correction of some luminosity functions: ln(factor) at knots (knot,), draws (draw, knot)."""

    name: str
    components: tuple[str, ...]
    knots_mag: np.ndarray
    draws: np.ndarray
    prior_draws: np.ndarray


@dataclass(frozen=True)
class Verdict:
    """Whether a fit passed its own checks, each of them (name, found, asked, holds), and what else to know."""

    checks: tuple[tuple[str, str, str, bool], ...]
    warnings: tuple[str, ...] = ()

    @property
    def passed(self) -> bool:
        """True where every check holds."""
        return all(holds for *_, holds in self.checks)


@dataclass(frozen=True, eq=False)
class PageContent:
    """All that one page shows; what is empty is left out. The tables are those that are written to files."""

    title: str
    prediction: Prediction
    provenance: Mapping[str, Any]
    parameters: tuple[ParameterDraws, ...] = ()
    curves: tuple[CurveDraws, ...] = ()
    verdict: Verdict | None = None
    parameter_table: Table | None = None
    derived: Table | None = None
    cautions: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if self.parameters and self.verdict is None:
            raise ValueError("PageContent: a fit is shown together with its verdict")

    @property
    def failed(self) -> bool:
        """Whether a fit stands behind the page that did not pass its checks."""
        return self.verdict is not None and not self.verdict.passed

    @property
    def groups(self) -> tuple[str, ...]:
        """The names of the groups."""
        return tuple(self.prediction.groups)

    @property
    def counted_groups(self) -> tuple[str, ...]:
        """The names of the groups that hold counts to compare with."""
        return tuple(name for name, group in self.prediction.groups.items() if group.compared.any())

    @property
    def coloured_groups(self) -> tuple[str, ...]:
        """The names of the groups that are divided in colour."""
        return tuple(name for name, group in self.prediction.groups.items() if _colours(group.group) > 1)


def _colours(group: Group) -> int:
    return 1 if group.edges_colour_mag is None else group.edges_colour_mag.size - 1
