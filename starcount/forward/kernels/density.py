"""Stars of each layer at the nodes of a sight line."""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.call import call_law
from starcount.vector_math import exp

_LN_PC3_PER_KPC3 = 9.0 * np.log(10.0)


@kernel
def layer_numbers(v, arrays):
    """Law parameters (layer, parameter), and ln of the amplitude over the law's value at its anchor (layer,)."""
    index, scale, n_parameter, amplitude, anchor, density_at, _, total_at, R0 = arrays[:9]
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
    """Galactocentric R, cos phi, sin phi and z (first rows of ``at``) along a direction (see ``galaxy.frame``)."""
    n = d_kpc.size
    R, cos_phi, sin_phi, z = at[0, :n], at[1, :n], at[2, :n], at[3, :n]
    sine = z0 / R0
    cosine = np.sqrt(1.0 - sine * sine)
    a, b, c = direction[0], direction[1], direction[2]
    for j in range(n):
        X, Z = d_kpc[j] * a - R0, d_kpc[j] * c
        x, y = cosine * X + sine * Z, d_kpc[j] * b
        r = np.sqrt(x * x + y * y)
        inverse = 1.0 / max(r, 1e-12)
        R[j] = r
        z[j] = cosine * Z - sine * X
        cos_phi[j] = -x * inverse
        sin_phi[j] = y * inverse


@kernel
def first_at_least(mu, A, factor, y):
    """Index of the first node of a line whose shift mu + factor A reaches ``y``; shifts grow with distance."""
    low, high = 0, mu.size
    while low < high:
        middle = (low + high) // 2
        if mu[middle] + factor * A[middle] < y:
            low = middle + 1
        else:
            high = middle
    return low


@kernel
def find_reach(s, factor, arrays, reach):
    """Write the nodes of sight line ``s`` from and to which each layer can put stars into the bins: (layer, 2).

    Extinction grows with the class of temperature and with the extinction node: the last of them is shifted farthest.
    """
    first_node, mu, A, y_reach = arrays[11], arrays[14], arrays[15], arrays[19]
    a, b = first_node[s], first_node[s + 1]
    most, least = A[A.shape[0] - 1, A.shape[1] - 1, a:b], A[0, 0, a:b]
    for k in range(reach.shape[0]):
        reach[k, 0] = first_at_least(mu[a:b], most, factor, y_reach[k, 0])
        reach[k, 1] = max(first_at_least(mu[a:b], least, factor, y_reach[k, 1]), reach[k, 0])


@kernel
def count_stars(theta, ln_scale, density_at, volume, at, reach, row, stars):
    """Stars (node, layer) of the reference window in each node's volume; 0 where a layer reaches no bin."""
    stars[:] = 0.0
    for k in range(ln_scale.size):
        i, j = reach[k, 0], reach[k, 1]
        call_law(density_at[k], j - i, theta[k], at[0, i:j], at[1, i:j], at[2, i:j], at[3, i:j], row)
        # Slices first: an index i + m may be negative to the compiler, and its check would stop the vector code.
        here, mine, shift = volume[i:j], stars[i:j], ln_scale[k]
        for m in range(j - i):
            row[m] = here[m] * exp(row[m] + shift)
        for m in range(j - i):
            mine[m, k] = row[m]


@kernel
def line_stars(s, v, theta, ln_scale, factor, arrays, space):
    """Place sight line ``s`` and count its stars; return them (node, layer), a view of the work space.

    ``space``: coordinates (5, node), stars (node, layer) and reach (layer, 2). Rows of the coordinates are sliced one
    by one: a slice in both directions would not be contiguous to the compiler, and its loops twice as slow.
    """
    direction, first_node, d_kpc, volume = arrays[9], arrays[11], arrays[12], arrays[13]
    at, stars, reach = space
    a, b = first_node[s], first_node[s + 1]
    found = stars[: b - a]
    find_reach(s, factor, arrays, reach)
    place(direction[s], d_kpc[a:b], arrays[8][0], v[-1], at)
    count_stars(theta, ln_scale, arrays[5], volume[a:b], at, reach, at[4], found)
    return found
