"""The halo: an oblate power law with a core, ln n = -(gamma/2) ln(R^2 + z^2/q^2 + a^2).

The flattened power law of Juric et al. 2008, ApJ 673, 864; the core keeps the density finite at the centre, where no
star count has measured it.
"""

from starcount.galaxy.law import Law, LawParameter, compiled
from starcount.vector_math import log


@compiled
def ln_density(n, theta, R, cos_phi, sin_phi, z, out):
    half = 0.5 * theta[0]
    q2, a2 = theta[1] * theta[1], theta[2] * theta[2]
    for j in range(n):
        out[j] = -half * log(R[j] * R[j] + z[j] * z[j] / q2 + a2)


@compiled
def slopes(n, theta, R, cos_phi, sin_phi, z, out):
    gamma, q, a = theta[0], theta[1], theta[2]
    for j in range(n):
        s = R[j] * R[j] + z[j] * z[j] / (q * q) + a * a
        out[j] = -0.5 * log(s)
        out[n + j] = gamma * z[j] * z[j] / (q * q * q * s)
        out[2 * n + j] = -gamma * a / s
        out[3 * n + j] = -gamma * R[j] / s
        out[4 * n + j] = 0.0
        out[5 * n + j] = -gamma * z[j] / (q * q * s)


HALO = Law(
    name="halo",
    meaning="oblate power law with a core",
    reference="Juric et al. 2008, ApJ 673, 864 (flattened power law)",
    parameters=(
        LawParameter("gamma", "", "index: density falls as r^-gamma", 0.5, 8.0),
        LawParameter("q", "", "axis ratio: z is divided by q", 0.1, 2.0),
        LawParameter("r_core_kpc", "kpc", "core radius", 0.01, 10.0, neutral=0.5),
    ),
    ln_density=ln_density,
    slopes=slopes,
)
