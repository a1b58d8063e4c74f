"""From a survey and a Galaxy to expected counts."""

from starcount.forward.derived import derived_quantities
from starcount.forward.group import GroupModel
from starcount.forward.luminosity import census_density_pc3, layer_functions, sphere_means
from starcount.forward.model import FIT_ACCURACY, ForwardModel

__all__ = [
    "FIT_ACCURACY",
    "ForwardModel",
    "GroupModel",
    "census_density_pc3",
    "derived_quantities",
    "layer_functions",
    "sphere_means",
]
