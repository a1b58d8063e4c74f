"""Density laws, components and the Galaxy they make."""

from starcount.galaxy.component import Component, Layer, Parameter
from starcount.galaxy.galaxy import CENSUS, Z0, Galaxy
from starcount.galaxy.laws import LAWS, law
from starcount.galaxy.read import published_names, read_galaxy

__all__ = [
    "CENSUS",
    "LAWS",
    "Z0",
    "Component",
    "Galaxy",
    "Layer",
    "Parameter",
    "law",
    "published_names",
    "read_galaxy",
]
