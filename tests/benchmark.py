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


def predictions(n_field):
    """Expected counts and gradients of a whole sky of small fields."""
    from dataclasses import replace

    pixel = np.linspace(0, 12 * 32**2 - 1, n_field).astype(int)
    fields = pixel_fields([f"p{i}" for i in range(n_field)], 32, pixel, "galactic", "ring")
    group = make_group("sky", "G", np.arange(10.0, 22.1, 0.5), fields)
    group = replace(group, sight_lines=single_lines(fields))
    galaxy = read_galaxy()
    start = time.perf_counter()
    model = make_group_model(group, galaxy)
    prepared = time.perf_counter() - start
    projection, v, W = model.projection, galaxy.vector(), model.luminosity_matrix()
    n_node, n_layer, n_y = projection.lines.d_kpc.size, len(galaxy.layers), projection.y_mag.size
    sech = sum(layer.settings.get("vertical", 0.0) > 0 for _, layer in galaxy.layers)
    functions = (n_layer + sech, sech + 1, 2)  # halo: one log; bar and R: one root each
    grid = np.random.default_rng(1).random((32, n_y * n_layer))
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


def commands():
    """Start-up and a small prediction, warm."""
    starcount = [sys.executable, "-m", "starcount"]
    print(f"--help: {wall([*starcount, '--help']):.2f} s")
    print(
        f"predict of the demo survey, warm: {wall([*starcount, 'predict', 'fields/demo', '--run', 'benchmark']):.2f} s"
    )


if __name__ == "__main__":
    with threadpool_limits(1):
        predictions(int(sys.argv[1]) if len(sys.argv) > 1 else 12288)
    commands()
