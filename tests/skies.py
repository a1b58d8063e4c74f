"""Small surveys and Galaxies that several tests share."""

import numpy as np

from starcount.galaxy import LAWS, Component, Galaxy, Layer, Parameter
from starcount.survey import Survey
from starcount.survey.fields import circle_fields
from starcount.survey.groups import make_group


def circles(l_deg, b_deg, radius_deg=0.5, **columns):
    """Circular fields named f0, f1, ..."""
    l_deg, b_deg = np.atleast_1d(l_deg).astype(float), np.atleast_1d(b_deg).astype(float)
    return circle_fields([f"f{i}" for i in range(l_deg.size)], l_deg, b_deg, np.full(l_deg.size, radius_deg), **columns)


def survey(fields, edges_mag, band="V", **more) -> Survey:
    """A survey of one group."""
    return Survey(
        name="test", description="", invented=True, groups=(make_group("g", band, edges_mag, fields, **more),)
    )


def galaxy(law: str, theta, amplitude="density", value=1.0, z0_kpc=0.0208, population="halo") -> Galaxy:
    """A Galaxy of one component with one layer."""

    def parameter(name, number):
        return Parameter(name, float(number), 0.1, "", -1e15, 1e15, "normal", "test", "test")

    component = Component("only", "", LAWS[law], population, amplitude, (Layer("all"),))
    named = {f"only.{p.name}": x for p, x in zip(LAWS[law].parameters, theta, strict=True)}
    named |= {f"only.{amplitude}": value, "sun.z0_kpc": z0_kpc}
    return Galaxy("test", "", 8.178, {name: parameter(name, x) for name, x in named.items()}, (component,))
