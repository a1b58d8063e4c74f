"""A Galaxy: components, the Sun's place, and the flat vector of numbers that the kernels take."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from starcount.galaxy.component import Component, Layer, Parameter
from starcount.galaxy.frame import galactocentric

CENSUS = "census.density_pc3"
Z0 = "sun.z0_kpc"


@dataclass(frozen=True, eq=False)
class LayerTable:
    """How the kernels find a layer's numbers in the vector (see ``Galaxy.layer_table``).

    ``theta[layer, p] = scale[layer, p] * vector[index[layer, p]]`` where the index is not negative, else ``scale``.
    ``anchor`` is 0 for the Sun, 1 for the total; ``amplitude`` the position of the component's ln amplitude.
    """

    component: np.ndarray
    index: np.ndarray
    scale: np.ndarray
    n_parameter: np.ndarray
    amplitude: np.ndarray
    anchor: np.ndarray
    density_address: np.ndarray
    slopes_address: np.ndarray
    total_address: np.ndarray


@dataclass(frozen=True, eq=False)
class Galaxy:
    """Components around the Sun. ``parameters`` are all numbers that a fit may change, by name."""

    name: str
    description: str
    R0_kpc: float
    parameters: Mapping[str, Parameter]
    components: tuple[Component, ...]

    @property
    def values(self) -> dict[str, float]:
        """The values of all parameters."""
        return {name: parameter.value for name, parameter in self.parameters.items()}

    @property
    def layers(self) -> tuple[tuple[Component, Layer], ...]:
        """All layers with their components, in the order of every (layer, ...) array."""
        return tuple((component, layer) for component in self.components for layer in component.layers)

    def theta(self, component: Component, values: Mapping) -> list:
        """The parameters of a component's law, in the law's order."""
        return [values[f"{component.name}.{p.name}"] for p in component.law.parameters]

    def amplitudes(self, values: Mapping) -> dict:
        """Stars of the reference window at the anchor, by component: pc^-3 at the Sun, or a total.

        The census is the sum of the remainder and of all shares, so the remainder is census / (1 + shares).
        """
        shares = [values[f"{c.name}.share"] for c in self.components if c.amplitude == "share"]
        remainder = values[CENSUS] / (1.0 + sum(shares)) if CENSUS in self.parameters else None
        found = {}
        for c in self.components:
            if c.amplitude == "remainder":
                found[c.name] = remainder
            elif c.amplitude == "share":
                found[c.name] = values[f"{c.name}.share"] * remainder
            else:
                found[c.name] = values[f"{c.name}.{c.amplitude}"]
        return found

    def vector(self, values: Mapping | None = None, xp=np):
        """Return the kernels' flat vector: all law parameters, then the ln amplitudes, then the Sun's height.

        ``values`` may be symbolic; then ``xp`` is the module whose ``log`` and ``stack`` take them.
        """
        values = {**self.values, **(values or {})}
        laws = [number for c in self.components for number in self.theta(c, values)]
        scales = [xp.log(amplitude) for amplitude in self.amplitudes(values).values()]
        flat = [*laws, *scales, values[Z0]]
        if xp is np:
            return np.array(flat, float)
        return xp.stack([xp.as_tensor_variable(number) for number in flat])

    def layer_table(self) -> LayerTable:
        """Return where each layer finds its numbers in the vector, and the addresses of its law."""
        first = np.cumsum([0, *(len(c.law.parameters) for c in self.components)])
        n_layer, n_most = len(self.layers), max(max(len(c.law.parameters) for c in self.components), 1)
        index, scale = np.full((n_layer, n_most), -1), np.zeros((n_layer, n_most))
        owner = np.array([self.components.index(c) for c, _ in self.layers])
        for row, (component, layer) in enumerate(self.layers):
            for p, parameter in enumerate(component.law.parameters):
                if parameter.name in layer.settings:
                    scale[row, p] = layer.settings[parameter.name]
                else:
                    index[row, p] = first[owner[row]] + p
                    scale[row, p] = layer.ratios.get(parameter.name, 1.0)
        laws = [component.law for component, _ in self.layers]
        return LayerTable(
            component=owner,
            index=index,
            scale=scale,
            n_parameter=np.array([len(law.parameters) for law in laws]),
            amplitude=first[-1] + owner,
            anchor=np.array([int(component.anchor == "total") for component, _ in self.layers]),
            density_address=np.array([law.ln_density.address for law in laws]),
            slopes_address=np.array([law.slopes.address for law in laws]),
            total_address=np.array([law.ln_total.address if law.ln_total else 0 for law in laws]),
        )

    def place(self, l_deg, b_deg, d_kpc, values: Mapping | None = None) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return R (kpc), phi (rad) and z (kpc) of points around the Sun."""
        return galactocentric(l_deg, b_deg, d_kpc, self.R0_kpc, {**self.values, **(values or {})}[Z0])

    def ln_relative_density(self, row: int, R_kpc, phi_rad, z_kpc, values: Mapping | None = None) -> np.ndarray:
        """Return ln of a layer's density relative to its anchor: the Sun, or its integral in kpc^3."""
        values = {**self.values, **(values or {})}
        component, layer = self.layers[row]
        theta = [
            layer.settings.get(p.name, layer.ratios.get(p.name, 1.0) * number)
            for p, number in zip(component.law.parameters, self.theta(component, values), strict=True)
        ]
        if component.anchor == "total":
            at_anchor = component.law.total(theta)[0]
        else:
            z0 = values[Z0]
            at_anchor = component.law(theta, np.sqrt(self.R0_kpc**2 - z0**2), 0.0, z0)
        return component.law(theta, R_kpc, phi_rad, z_kpc) - at_anchor
