"""A survey and a Galaxy, ready to predict."""

from dataclasses import dataclass
from functools import cached_property

from starcount.forward.group import ACCURACY, GroupModel, make_census_model, make_group_model
from starcount.forward.luminosity import CENSUS_POPULATION
from starcount.galaxy import Galaxy
from starcount.survey import Survey

FIT_ACCURACY = 3e-4
"""Accuracy of the sight lines of a fit: a hundredth of the scatter real counts usually have."""


@dataclass(frozen=True, eq=False)
class ForwardModel:
    """Expected counts of a survey in a Galaxy: one ``GroupModel`` a group, and the local census as one more.

    ``accuracy`` is the part of a bin to which the integral along each sight line has settled.
    """

    survey: Survey
    galaxy: Galaxy
    accuracy: float = ACCURACY

    @cached_property
    def groups(self) -> tuple[GroupModel, ...]:
        """The survey's groups, in its order."""
        return tuple(make_group_model(group, self.galaxy, self.accuracy) for group in self.survey.groups)

    @cached_property
    def census(self) -> GroupModel | None:
        """The local census, in the band of the first group; None where no component is made of it."""
        if not any(c.population == CENSUS_POPULATION for c in self.galaxy.components):
            return None
        return make_census_model(self.galaxy, self.survey.groups[0].band)
