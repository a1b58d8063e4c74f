"""How counts scatter around what is expected.

Each file holds the PyMC expression (``observe``) and the compiled terms of the same likelihood (``terms``). To add a
likelihood: write its file, import it here, add it to LIKELIHOODS.
"""

from types import ModuleType

from starcount.errors import UnknownName
from starcount.inference.likelihoods import negative_binomial, poisson

LIKELIHOODS: dict[str, ModuleType] = {module.NAME: module for module in (negative_binomial, poisson)}


def find(name: str) -> ModuleType:
    """Return a likelihood by its name."""
    try:
        return LIKELIHOODS[name]
    except KeyError:
        raise UnknownName("likelihood", name, tuple(LIKELIHOODS)) from None


def recognise(variable):
    """Return (likelihood, mean, dispersion) of an observed variable, or None where it is none of ours."""
    for likelihood in LIKELIHOODS.values():
        if (found := likelihood.recognise(variable)) is not None:
            return likelihood, *found
    return None
