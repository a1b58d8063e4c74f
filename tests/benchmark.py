"""Speed, as ratios within one run: `python tests/benchmark.py [fields]`. One thread; nothing here is a test.

The floor of a prediction is what cannot be left out: the vectorised exponentials, logarithms and roots of the same
laws on the same nodes, in blocks that stay in cache, plus the same matrix products.
"""

import subprocess
import sys
import time

import numpy as np
from threadpoolctl import threadpool_limits

from starcount.compilation import kernel
from starcount.forward.group import make_group_model
from starcount.galaxy import read_galaxy
from starcount.survey import make_group, pixel_fields
from starcount.vector_math import exp, log


@kernel
def floor_functions(nodes, lines, n_exp, n_log, n_sqrt):
    """As many vector functions on as many nodes, a sight line at a time."""
    x = np.full(nodes, 0.37)
    out = np.empty(nodes)
    for _ in range(lines):
        for _ in range(n_exp):
            for j in range(nodes):
                out[j] = exp(x[j])
        for _ in range(n_log):
            for j in range(nodes):
                out[j] = log(x[j])
        for _ in range(n_sqrt):
            for j in range(nodes):
                out[j] = np.sqrt(x[j])
        x[0] = out[0] * 1e-9 + 0.3
    return out[0]


@kernel
def floor_products(grid, W, fields):
    """The matrix products of blocks of fields."""
    counts = np.empty((grid.shape[0], W.shape[1]))
    for _ in range(0, fields, grid.shape[0]):
        np.dot(grid, W, counts)
    return counts[0, 0]


def best(function, repeats=5):
    """The shortest CPU time of some calls, in seconds."""
    function()
    times = []
    for _ in range(repeats):
        start = time.thread_time()
        function()
        times.append(time.thread_time() - start)
    return min(times)


def wall(command):
    """The shortest wall time of a command in three runs, in seconds."""
    times = []
    for _ in range(3):
        start = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True)
        times.append(time.perf_counter() - start)
    return min(times)


def single_lines(fields):
    """One sight line a field, through its centre: small fields at any latitude."""
    from starcount.survey import SightLines

    n = fields.name.size
    return SightLines(fields.l_deg, fields.b_deg, fields.area_deg2 * (np.pi / 180) ** 2, np.arange(n + 1))


def sky(n_field, edges_mag, above_deg=0.0, **more):
    """Small fields evenly over the sky, at least ``above_deg`` from the plane."""
    from dataclasses import replace

    fields = pixel_fields([f"p{i}" for i in range(12 * 32**2)], 32, np.arange(12 * 32**2), "galactic", "ring")
    chosen = np.flatnonzero(np.abs(fields.b_deg) >= above_deg)
    chosen = chosen[np.linspace(0, chosen.size - 1, min(n_field, chosen.size)).astype(int)]
    fields = pixel_fields([f"p{i}" for i in chosen], 32, chosen, "galactic", "ring")
    return replace(make_group("sky", "G", edges_mag, fields, **more), sight_lines=single_lines(fields))


def predictions(n_field):
    """Expected counts and gradients of a whole sky of small fields."""
    group, galaxy = sky(n_field, np.arange(10.0, 22.1, 0.5)), read_galaxy()
    start = time.perf_counter()
    model = make_group_model(group, galaxy)
    projection, v, W = model.projection, galaxy.vector(), model.luminosity_matrix()
    prepared = time.perf_counter() - start
    n_node, n_layer, n_y = projection.lines.d_kpc.size, len(galaxy.layers), projection.y_mag.size
    sech = sum(layer.settings.get("vertical", 0.0) > 0 for _, layer in galaxy.layers)
    functions = (n_layer + sech, sech + 1, 2)  # halo: one log; bar and R: one root each
    grid = np.random.default_rng(1).random((32, W.shape[0]))
    value = best(lambda: projection.counts(v, W))
    cotangent = np.ones((n_field, W.shape[1]))
    gradient = best(lambda: projection.pull_back(v, W, cotangent, want_W=False)) + value
    vector = best(lambda: floor_functions(n_node // n_field, n_field, *functions))
    products = best(lambda: floor_products(grid, W, n_field))
    flop = 2.0 * n_field * W.size
    print(
        f"{n_field} fields x {W.shape[1]} bins, {n_layer} layers, {n_node / n_field:.0f} nodes a line, {n_y} steps in y"
    )
    print(f"prepared in {prepared:.1f} s (lines settled to 1e-4)")
    parts = f"functions {1e3 * vector:.0f}, products {1e3 * products:.0f} at {flop / products / 1e9:.0f} Gflop/s"
    print(f"expected counts {1e3 * value:.0f} ms; floor {1e3 * (vector + products):.0f} ms ({parts})")
    print(f"  expected counts / floor: {value / (vector + products):.2f}")
    print(f"  value and gradient / value: {gradient / value:.2f}")


def colours(n_field):
    """16 x 8 bins of magnitude and colour against the 16 of magnitude only."""
    edges, galaxy = np.linspace(12.0, 20.0, 17), read_galaxy()
    pair = {"colour": ("BP", "RP"), "edges_colour_mag": np.linspace(0.0, 4.0, 9)}
    for where, above_deg in (("all sky", 0.0), ("|b| > 30", 30.0)):
        times, gradients = [], []
        for more in ({}, pair):
            start = time.perf_counter()
            model = make_group_model(sky(n_field, edges, above_deg, **more), galaxy)
            v, W, projection = galaxy.vector(), model.luminosity_matrix(), model.projection
            prepared = time.perf_counter() - start
            times.append(best(lambda p=projection, v=v, W=W: p.counts(v, W), 3))
            cotangent = np.ones((projection.n_field, W.shape[1]))
            back = best(lambda p=projection, v=v, W=W, c=cotangent: p.pull_back(v, W, c, want_W=False), 3)
            gradients.append(back + times[-1])
        slabs = model.matrix.n_slab
        print(f"colour, {where}: {projection.n_field} fields, {slabs} slabs, prepared in {prepared:.1f} s, "
              f"{1e3 * times[1]:.0f} ms")  # fmt: skip
        print(f"  16 x 8 / 16 bins: {times[1] / times[0]:.1f}")
        print(f"  value and gradient in colour / value: {gradients[1] / times[1]:.2f}")


def commands():
    """Start-up and a small prediction, warm."""
    starcount = [sys.executable, "-m", "starcount"]
    print(f"--help: {wall([*starcount, '--help']):.2f} s")
    print(
        f"predict of the demo survey, warm: {wall([*starcount, 'predict', 'fields/demo', '--run', 'benchmark']):.2f} s"
    )


if __name__ == "__main__":
    with threadpool_limits(1):
        n_field = int(sys.argv[1]) if len(sys.argv) > 1 else 12288
        predictions(n_field)
        colours(n_field)
    commands()
