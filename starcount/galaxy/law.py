"""What a density law is: a shape, where its scale is defined, and two compiled functions.

Every law file defines, with one signature for all laws,

``ln_density(n, theta, R, cos_phi, sin_phi, z, out)``
    ``out[j]`` = natural logarithm of the unnormalised density at point ``j`` of ``n``.
``slopes(n, theta, R, cos_phi, sin_phi, z, out)``
    ``out[p * n + j]`` = derivative of that logarithm by parameter ``p``, then by R, phi and z: ``P + 3`` rows.

``theta`` holds the law's parameters in the order of ``Law.parameters``. Arguments are plain pointers to doubles: the
kernels call a law by its C address, so a new law changes no kernel. phi is the azimuth, 0 at the Sun, growing with
Galactic rotation; lengths are kpc. A law anchored at its total adds ``ln_total``, which writes the logarithm of its
integral over space (kpc^3) and then the derivatives by the parameters.
"""

import ctypes
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numba import cfunc, types

from starcount.compilation import FAST, cached

_POINTER = types.CPointer(types.float64)
SIGNATURE = types.void(types.intp, *[_POINTER] * 6)


def compiled(function: Callable):
    """Compile a function of a law to the common C signature."""
    return cached(cfunc(SIGNATURE, cache=True, fastmath=FAST, error_model="numpy"), function)


@dataclass(frozen=True)
class LawParameter:
    """A parameter of a law: unit, meaning, the values it may take, and its neutral value where it has one."""

    name: str
    unit: str
    meaning: str
    lower: float
    upper: float
    neutral: float | None = None
    fittable: bool = True
    choices: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True, eq=False)
class Law:
    """A density law: name, published source, parameters and compiled functions (see the module)."""

    name: str
    meaning: str
    reference: str
    parameters: tuple[LawParameter, ...]
    ln_density: object
    slopes: object
    ln_total: object | None = None

    def __call__(self, theta, R_kpc, phi_rad, z_kpc) -> np.ndarray:
        """Return the natural logarithm of the unnormalised density, in the shape of the broadcast coordinates."""
        return self._call(self.ln_density, theta, R_kpc, phi_rad, z_kpc, 1)[0]

    def derivatives(self, theta, R_kpc, phi_rad, z_kpc) -> np.ndarray:
        """Return d ln(density) by each parameter, then by R, phi and z: (parameter + 3, ...)."""
        return self._call(self.slopes, theta, R_kpc, phi_rad, z_kpc, len(self.parameters) + 3)

    def total(self, theta) -> tuple[float, np.ndarray]:
        """Return the logarithm of the integral over space in kpc^3, and its derivatives by the parameters."""
        out = self._call(self.ln_total, theta, 0.0, 0.0, 0.0, len(self.parameters) + 1)
        return float(out[0]), out[1:]

    def _call(self, function, theta, R_kpc, phi_rad, z_kpc, rows: int) -> np.ndarray:
        R, phi, z = np.broadcast_arrays(*(np.asarray(x, float) for x in (R_kpc, phi_rad, z_kpc)))
        theta = np.ascontiguousarray(theta, float)
        if theta.shape != (len(self.parameters),):
            raise ValueError(f"law {self.name!r} takes {len(self.parameters)} parameters, not shape {theta.shape}")
        out = np.empty((rows, R.size))
        flat = [np.ascontiguousarray(x).ravel() for x in (R, np.cos(phi), np.sin(phi), z)]
        function.ctypes(R.size, *(_pointer(x) for x in (theta, *flat, out)))
        return out.reshape(rows, *R.shape)


def _pointer(array: np.ndarray):
    return array.ctypes.data_as(ctypes.POINTER(ctypes.c_double))
