"""Uniform space: the same density everywhere. The oldest closed form of star counts, N(m) growing as 10^(0.6 m)."""

from starcount.galaxy.law import Law, compiled


@compiled
def ln_density(n, theta, R, cos_phi, sin_phi, z, out):
    for j in range(n):
        out[j] = 0.0


@compiled
def slopes(n, theta, R, cos_phi, sin_phi, z, out):
    for j in range(3 * n):
        out[j] = 0.0


UNIFORM = Law(
    name="uniform",
    meaning="the same density everywhere",
    reference="Seeliger 1898 (the 10^(0.6 m) law of counts in uniform space)",
    parameters=(),
    ln_density=ln_density,
    slopes=slopes,
)
