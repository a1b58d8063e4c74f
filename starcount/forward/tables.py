"""The stars of a Galaxy's layers by absolute magnitude and colour in the bands of a group of fields.

Luminosity functions are counted in the reference band of the group's band; the populations' loci move their stars to
other bands and spread them over colour and temperature. Everything here is linear in the functions.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from starcount import stars
from starcount.errors import InputError
from starcount.forward.knots import hat
from starcount.forward.luminosity import layer_functions, population_name
from starcount.galaxy import Galaxy

Weight = Callable[[stars.Locus, int], np.ndarray]
"""From a component's locus and its first layer to a factor on each point of the locus."""


@dataclass(frozen=True, eq=False)
class StarTables:
    """Tables (layer, temperature, cell, colour cell) of stars per star of the window of their component.

    ``colour`` is a pair of bands, or None for tables with one colour cell that holds every star; ``temperatures_K`` are
    those between which stars are shared for their extinction. With ``pairs`` every table comes twice, (2, ...): all
    stars, and the dwarfs alone, whose companions a sharp survey may see.
    """

    galaxy: Galaxy
    band: str
    colour: tuple[str, str] | None
    temperatures_K: np.ndarray
    pairs: bool = False

    @property
    def reference(self) -> str:
        """The band in which the luminosity functions are counted."""
        return stars.BANDS[self.band].reference

    @cached_property
    def lf(self) -> np.ndarray:
        """The luminosity functions (layer, class, cell) in the reference band."""
        return layer_functions(self.galaxy, self.reference)

    @cached_property
    def loci(self) -> dict[str, stars.Locus]:
        """The locus of each component."""
        return {c.name: stars.locus(population_name(c), self.reference) for c in self.galaxy.components}

    @cached_property
    def whole(self) -> np.ndarray:
        """Every star, once."""
        return self._of(None, None)

    def of(self, classes: np.ndarray | None = None, weight: Weight | None = None) -> np.ndarray:
        """Return the table of the stars of some ``classes`` (class,), with a ``weight`` on the points of the loci."""
        if not self.pairs:
            return self._of(classes, weight)
        dwarfs = np.arange(len(stars.CLASSES)) == stars.CLASSES.index("dwarf")
        return np.stack([self._of(classes, weight), self._of(dwarfs if classes is None else dwarfs & classes, weight)])

    def _of(self, classes: np.ndarray | None, weight: Weight | None) -> np.ndarray:
        lf = self.lf if classes is None else self.lf * classes[:, None]
        found = []
        for component in self.galaxy.components:
            mine = np.array([c is component for c, _ in self.galaxy.layers])
            locus = self.loci[component.name]
            factor = None if weight is None else weight(locus, int(np.argmax(mine)))
            try:
                found.append(stars.spread(locus, lf[mine], self.band, self.colour, self.temperatures_K, factor))
            except InputError as problem:
                where = f"component {component.name!r}, population {component.population!r}"
                raise InputError(f"{where}: {problem}") from None
        return np.concatenate(found)

    def at_knot(self, knot: int | None) -> np.ndarray:
        """Return the table of every star, or weighted by the hat function of a knot."""
        if knot is None:
            return self.of() if self.pairs else self.whole
        return self.of(weight=lambda locus, layer: hat(locus.M_V_mag)[:, knot])

    def of_class(self, c: int, factors: np.ndarray | None) -> np.ndarray:
        """Return the table of one class; factors (layer, knot) on the functions are alike in a component's layers."""
        weight = None if factors is None else lambda locus, layer: hat(locus.M_V_mag) @ factors[layer]
        return self.of(classes=np.arange(len(stars.CLASSES)) == c, weight=weight)

    def by_class_at_knot(self, knot: int | None) -> np.ndarray:
        """Return the functions (layer, class, cell) in the reference band, or times the hat function of a knot."""
        if knot is None:
            return self.lf
        found = np.zeros_like(self.lf)
        for row, (component, _) in enumerate(self.galaxy.layers):
            locus = self.loci[component.name]
            share = locus.share * hat(locus.M_V_mag)[:, knot]
            np.add.at(found[row], (locus.class_index, locus.cell), share)
        return self.lf * found

    def outside(self) -> np.ndarray:
        """Return the table of the stars whose magnitudes rest on relations outside their verified range.

        Those of the reference band rest on none: only the other bands count.
        """
        names = (self.band, *(self.colour or ()))
        return self.of(weight=lambda locus, layer: 1.0 - locus.inside_of(*names))
