"""Components of a Galaxy: a law, a population and one owner of the absolute scale; and the parameters of all."""

from collections.abc import Mapping
from dataclasses import dataclass, field

from starcount.galaxy.law import Law

PRIORS = ("lognormal", "normal")


@dataclass(frozen=True)
class Parameter:
    """A number of the model that may be fitted.

    ``error`` is the width of its prior: of the value itself ("normal"), or of its logarithm ("lognormal", with
    ``error / value`` as the width). ``lower`` and ``upper`` are its support in either case.
    """

    name: str
    value: float
    error: float
    unit: str
    lower: float
    upper: float
    prior: str
    reference: str
    meaning: str
    fittable: bool = True


@dataclass(frozen=True)
class Layer:
    """Part of a component's population with a shape of its own.

    It holds the stars of ``classes`` with absolute magnitudes ``M_mag`` (in the band of the counts; None for all).
    ``ratios`` multiply parameters of the component's law (``{"h_z_kpc": 0.5}``: half the height); ``settings`` replace
    them.
    """

    name: str
    classes: tuple[str, ...] | None = None
    M_mag: tuple[float, float] | None = None
    ratios: Mapping[str, float] = field(default_factory=dict)
    settings: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Component:
    """A law, a population and an amplitude.

    ``amplitude`` names what scales it, in stars of the reference window: "remainder" (the census at the Sun less all
    shares), "share" (times the remainder, at the Sun), "density" (stars pc^-3 at the Sun) or "total" (stars in all).
    """

    name: str
    meaning: str
    law: Law
    population: str
    amplitude: str
    layers: tuple[Layer, ...]

    @property
    def anchor(self) -> str:
        """Where the amplitude is defined: at the Sun or by the total."""
        return "total" if self.amplitude == "total" else "sun"
