"""Predict and fit the star counts of a survey's fields.

The public names below are imported when they are first used, so that ``import starcount`` costs nothing.
"""

from importlib import import_module

__version__ = "0.1.0"

_HOME = {
    "steps": "starcount.steps",
    "Survey": "starcount.survey",
    "read_survey": "starcount.survey",
    "write_survey": "starcount.survey",
    "LAWS": "starcount.galaxy",
    "Galaxy": "starcount.galaxy",
    "read_galaxy": "starcount.galaxy",
    "ForwardModel": "starcount.forward",
    "Posterior": "starcount.posterior",
    "fit_galaxy": "starcount.inference",
    "predict_counts": "starcount.predict",
    "write_page": "starcount.report",
    "count_catalogue": "starcount.catalogue",
    "StarcountError": "starcount.errors",
}

__all__ = ["__version__", *_HOME]


def __getattr__(name: str):
    try:
        home = _HOME[name]
    except KeyError:
        raise AttributeError(f"module 'starcount' has no attribute {name!r}") from None
    module = import_module(home)
    return module if home == f"starcount.{name}" else getattr(module, name)


def __dir__() -> list[str]:
    return sorted(__all__)
