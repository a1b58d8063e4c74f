"""Compiled loops of the forward model. They know no units, files or names: arrays in, arrays out."""

from starcount.compilation import DIGEST
from starcount.forward.kernels.luminosity import luminosity, luminosity_back
from starcount.forward.kernels.project import project, stars_on_grid
from starcount.forward.kernels.pull_back import project_back

__all__ = ["DIGEST", "luminosity", "luminosity_back", "project", "project_back", "stars_on_grid"]
