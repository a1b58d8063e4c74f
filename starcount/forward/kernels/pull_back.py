"""The pull-back of the projection: gradients by every number from a cotangent of the counts.

The projection is linear in density, so its transpose brings the cotangent back to the nodes; there it meets the
logarithmic derivatives of the laws. One pass, whatever the number of parameters.
"""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.call import call_law
from starcount.forward.kernels.density import layer_numbers, line_stars
from starcount.forward.kernels.grid import gather
from starcount.forward.kernels.products import matrix_from_spans, multiply_spans_back
from starcount.forward.kernels.project import BLOCK, BLOCK_IN_COLOUR, empty_grid, fill_grid, work_space
from starcount.forward.kernels.slabs import block_of, clear_spans, gather_in_colour
from starcount.vector_math import exp


@kernel
def height_slopes(R0, z0, n, at, out):
    """Derivatives (3, node) of R, phi and z by the Sun's height z0."""
    R, cos_phi, sin_phi, z = at[0, :n], at[1, :n], at[2, :n], at[3, :n]
    per = 1.0 / (R0 * np.sqrt(1.0 - (z0 / R0) ** 2))
    by_R, by_phi, by_z = out[0], out[1], out[2]
    for j in range(z.size):
        dx = z[j] * per
        by_R[j] = -cos_phi[j] * dx
        by_phi[j] = sin_phi[j] * dx / max(R[j], 1e-12)
        by_z[j] = cos_phi[j] * R[j] * per


@kernel
def dot(a, b):
    """The sum of the products of two vectors."""
    total = 0.0
    for j in range(a.size):
        total += a[j] * b[j]
    return total


@kernel
def dot3(a, b, c):
    """The sum of the products of three vectors."""
    total = 0.0
    for j in range(a.size):
        total += a[j] * b[j] * c[j]
    return total


@kernel
def reverse_line(s, v, theta, arrays, space, n, value, moved, slopes, g_theta, g_scale):
    """Add a sight line's part to the gradients by the layers' numbers; return that by the Sun's height."""
    n_parameter, slopes_at = arrays[2], arrays[6]
    at, stars, reach = space
    height_slopes(arrays[8][0], v[-1], n, at, moved)
    by_height = 0.0
    for k in range(stars.shape[1]):
        P, i, size = n_parameter[k], reach[k, 0], reach[k, 1] - reach[k, 0]
        j, q = i + size, at[4, :size]
        mine, got = stars[i:j], value[i:j]
        for m in range(size):
            q[m] = mine[m, k] * got[m, k]
        for m in range(size):
            g_scale[k] += q[m]
        rows = slopes[: (P + 3) * size]
        call_law(slopes_at[k], size, theta[k], at[0, i:j], at[1, i:j], at[2, i:j], at[3, i:j], rows)
        for p in range(P):
            g_theta[k, p] += dot(q, rows[p * size : (p + 1) * size])
        for c in range(3):
            by_height += dot3(q, rows[(P + c) * size : (P + c + 1) * size], moved[c, i:j])
    return by_height


@kernel
def gather_line(a, b, factor, arrays, cotangent, got, bent):
    """Bring the cotangent of the grid to the nodes ``a`` to ``b``: by the stars, and by the extinction's factor."""
    mu, A, node_weight, shape, grid_start, E = arrays[14], arrays[15], arrays[16], arrays[17], arrays[18], arrays[20]
    got[:] = 0.0
    bent[:] = 0.0
    for c in range(shape[1]):
        for e in range(node_weight.size):
            if shape[0] > 1:
                gather_in_colour(
                    cotangent, c, shape, mu[a:b], A[c, e, a:b], E[c, e, a:b], factor, node_weight[e], grid_start, got,
                    bent,
                )  # fmt: skip
            else:
                block = block_of(cotangent, c, shape)
                gather(block, mu[a:b], A[c, e, a:b], factor, node_weight[e], grid_start, got, bent)


@kernel
def reverse_field(f, v, theta, ln_scale, factor, arrays, space, more, cotangent, g_theta, g_scale):
    """Bring the cotangent (row,) of a field's grid back; return its gradients by the Sun's height and by ln dust."""
    first_line, first_node = arrays[10], arrays[11]
    value, by_factor, moved, slopes = more
    by_height, by_dust = 0.0, 0.0
    for s in range(first_line[f], first_line[f + 1]):
        a, b = first_node[s], first_node[s + 1]
        found = line_stars(s, v, theta, ln_scale, factor, arrays, space)
        got, bent = value[: b - a], by_factor[: b - a]
        gather_line(a, b, factor, arrays, cotangent, got, bent)
        by_height += reverse_line(s, v, theta, arrays, space, b - a, got, moved, slopes, g_theta, g_scale)
        by_dust += dot(found.ravel(), bent.ravel())
    return by_height, factor * by_dust


@kernel
def collect(v, theta, g_theta, g_scale, by_height, arrays):
    """Return the gradient by the vector from those by the layers' numbers, through their anchors."""
    index, scale, n_parameter, amplitude, anchor, _, slopes_at, total_at, R0 = arrays[:9]
    gv, z0 = np.zeros(v.size), v[-1]
    R_sun = np.sqrt(R0[0] * R0[0] - z0 * z0)
    R, one, zero, z = np.array([R_sun]), np.ones(1), np.zeros(1), np.array([z0])
    out = np.empty(index.shape[1] + 3)
    for k in range(index.shape[0]):
        P = n_parameter[k]
        gv[amplitude[k]] += g_scale[k]
        if anchor[k] == 0:
            call_law(slopes_at[k], 1, theta[k], R, one, zero, z, out)
            by_height -= g_scale[k] * (out[P + 2] - out[P] * z0 / R_sun)
            by_anchor = out[:P]
        else:
            call_law(total_at[k], 1, theta[k], R, one, zero, z, out)
            by_anchor = out[1 : P + 1]
        for p in range(P):
            if index[k, p] >= 0:
                gv[index[k, p]] += scale[k, p] * (g_theta[k, p] - g_scale[k] * by_anchor[p])
    gv[-1] += by_height
    return gv


@kernel
def more_space(longest, n_layer, n_most):
    """Work space of the way back: two (node, layer), one (3, node), and the slopes of a law at every node."""
    return (
        np.empty((longest, n_layer)), np.empty((longest, n_layer)), np.empty((3, longest)),
        np.empty((n_most + 3) * longest),
    )  # fmt: skip


@kernel
def project_back(v, W, ln_dust, cotangent, want_W, *arrays):
    """Return the gradients by ``v``, ``W`` and ``ln_dust`` of sum(cotangent * project(...)).

    ``cotangent`` (field, bin). The gradient by ``W`` costs one more matrix product; unless ``want_W`` it is zero.
    """
    n_field, shape = arrays[10].size - 1, arrays[17]
    theta, ln_scale = layer_numbers(v, arrays)
    space = work_space(arrays)
    more = more_space(space[0].shape[1], arrays[0].shape[0], arrays[0].shape[1])
    g_theta, g_scale, g_W = np.zeros(theta.shape), np.zeros(ln_scale.size), np.zeros(W.shape)
    g_dust, by_height = np.zeros(n_field), 0.0
    block = BLOCK if shape[0] == 1 else BLOCK_IN_COLOUR
    grid, spans = empty_grid(min(block, n_field), arrays)
    back = np.zeros(grid.shape)
    W_transposed = np.ascontiguousarray(W.T) if shape[0] == 1 else np.zeros((0, 0))
    for start in range(0, n_field, block):
        size = min(block, n_field - start)
        wanted = cotangent[start : start + size]
        if want_W or shape[0] > 1:
            if shape[0] == 1:
                grid[:] = 0.0
            for i in range(size):
                f = start + i
                fill_grid(f, v, theta, ln_scale, exp(ln_dust[f]), arrays, space, spans, grid[i])
        if shape[0] == 1:
            np.dot(wanted, W_transposed, back[:size])
        else:
            multiply_spans_back(wanted, W, spans, arrays[21], shape, back)
        for i in range(size):
            f = start + i
            height, g_dust[f] = reverse_field(
                f, v, theta, ln_scale, exp(ln_dust[f]), arrays, space, more, back[i], g_theta, g_scale
            )
            by_height += height
        if want_W and shape[0] == 1:
            g_W += np.dot(grid[:size].T, wanted)
        if shape[0] > 1:
            if want_W:
                matrix_from_spans(grid, size, wanted, spans, arrays[21], shape, start == 0, g_W)
            clear_spans(grid, size, spans, shape)
    return collect(v, theta, g_theta, g_scale, by_height, arrays), g_W, g_dust
