"""Fitting: the PyMC model of the counts, its mode, its draws and their checks. The only room that knows PyMC."""

from importlib import import_module

_HOME = {
    "fit_galaxy": "starcount.inference.fit",
    "build_model": "starcount.inference.model",
    "prior_table": "starcount.inference.priors",
    "fitted_parameters": "starcount.inference.model",
    "LIKELIHOODS": "starcount.inference.likelihoods",
}

__all__ = list(_HOME)


def __getattr__(name: str):
    if name not in _HOME:
        raise AttributeError(f"module 'starcount.inference' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)
