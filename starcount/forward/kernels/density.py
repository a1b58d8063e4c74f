"""Stars of each layer at the nodes of a sight line."""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.call import call_law
from starcount.vector_math import exp

_LN_PC3_PER_KPC3 = 9.0 * np.log(10.0)


@kernel
def layer_numbers(v, arrays):
    """Law parameters (layer, parameter), and ln of the amplitude over the law's value at its anchor (layer,)."""
    index, scale, n_parameter, amplitude, anchor, density_at, slopes_at, total_at, R0 = arrays[:9]
    n_layer, n_most = index.shape
    theta, ln_scale = np.zeros((n_layer, n_most)), np.empty(n_layer)
    z0 = v[-1]
    R, one, zero, z = np.array([np.sqrt(R0[0] * R0[0] - z0 * z0)]), np.ones(1), np.zeros(1), np.array([z0])
    out = np.empty(n_most + 1)
    for k in range(n_layer):
        for p in range(n_parameter[k]):
            theta[k, p] = scale[k, p] if index[k, p] < 0 else scale[k, p] * v[index[k, p]]
        if anchor[k] == 0:
            call_law(density_at[k], 1, theta[k], R, one, zero, z, out)
            ln_scale[k] = v[amplitude[k]] - out[0]
        else:
            call_law(total_at[k], 1, theta[k], R, one, zero, z, out)
            ln_scale[k] = v[amplitude[k]] - out[0] - _LN_PC3_PER_KPC3
    return theta, ln_scale


@kernel
def place(direction, d_kpc, R0, z0, at):
    """Galactocentric R, cos phi, sin phi and z (4, node) at distances along a direction (see ``galaxy.frame``)."""
    R, cos_phi, sin_phi, z = at[0], at[1], at[2], at[3]
    sine = z0 / R0
    cosine = np.sqrt(1.0 - sine * sine)
    a, b, c = direction[0], direction[1], direction[2]
    for j in range(d_kpc.size):
        X, Z = d_kpc[j] * a - R0, d_kpc[j] * c
        x, y = cosine * X + sine * Z, d_kpc[j] * b
        r = np.sqrt(x * x + y * y)
        inverse = 1.0 / max(r, 1e-12)
        R[j] = r
        z[j] = cosine * Z - sine * X
        cos_phi[j] = -x * inverse
        sin_phi[j] = y * inverse


@kernel
def count_stars(theta, ln_scale, density_at, volume, at, stars):
    """Stars (layer, node) of the reference window in each node's volume."""
    n = volume.size
    for k in range(ln_scale.size):
        row, shift = stars[k], ln_scale[k]
        call_law(density_at[k], n, theta[k], at[0], at[1], at[2], at[3], row)
        for j in range(n):
            row[j] = volume[j] * exp(row[j] + shift)


@kernel
def line_stars(s, v, theta, ln_scale, arrays, at, stars):
    """Coordinates and stars of sight line ``s``: views (4, node) and (layer, node) of the work space."""
    direction, first_node, d_kpc, volume = arrays[9], arrays[11], arrays[12], arrays[13]
    a, b = first_node[s], first_node[s + 1]
    here, found = at[:, : b - a], stars[:, : b - a]
    place(direction[s], d_kpc[a:b], arrays[8][0], v[-1], here)
    count_stars(theta, ln_scale, arrays[5], volume[a:b], here, found)
    return here, found
