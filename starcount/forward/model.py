"""A survey and a Galaxy, ready to predict."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

from starcount import stars
from starcount.forward.census import make_census_model
from starcount.forward.group import ACCURACY, GroupModel, make_group_model
from starcount.forward.luminosity import CENSUS_POPULATION
from starcount.galaxy import Galaxy
from starcount.survey import Survey

FIT_ACCURACY = 3e-4
"""Accuracy of the sight lines of a fit: a hundredth of the scatter real counts usually have."""


@dataclass(frozen=True, eq=False)
class ForwardModel:
    """Expected counts of a survey in a Galaxy: one ``GroupModel`` a group, and the local census as one more.

    ``accuracy`` is the part of a bin to which the integral along each sight line has settled. ``dust_range`` is the
    factor by which the extinction of a field may be raised or lowered afterwards; room for it costs memory and time.
    """

    survey: Survey
    galaxy: Galaxy
    accuracy: float = ACCURACY
    dust_range: float = 1.0

    @cached_property
    def groups(self) -> tuple[GroupModel, ...]:
        """The survey's groups, in its order."""
        return tuple(self.prepared())

    def prepared(self) -> Iterator[GroupModel]:
        """The survey's groups one by one, each laid out when it is first asked for, which takes most of the time."""
        for group in self.survey.groups:
            if group.name not in self._laid_out:
                self._laid_out[group.name] = make_group_model(group, self.galaxy, self.accuracy, self.dust_range)
            yield self._laid_out[group.name]

    @cached_property
    def _laid_out(self) -> dict[str, GroupModel]:
        return {}

    @cached_property
    def census(self) -> GroupModel | None:
        """The local census, in the reference band of the first group; None where no component is made of it."""
        if not any(c.population == CENSUS_POPULATION for c in self.galaxy.components):
            return None
        return make_census_model(self.galaxy, stars.BANDS[self.survey.groups[0].band].reference)
