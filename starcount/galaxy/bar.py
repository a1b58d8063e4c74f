"""The bar: the boxy triaxial Gaussian, ln n = -r_s^2 / 2 with r_s^4 = [(X/a)^2 + (Y/b)^2]^2 + (Z/c)^4.

Form G2 of Dwek et al. 1995, ApJ 445, 716. X runs along the bar, whose near end lies at positive longitude: the angle
between bar and Sun-centre line is alpha, X = R cos(phi - alpha), Y = -R sin(phi - alpha), Z = z. Normalised by its
integral over space, pi sqrt(2 pi) B(1/4, 1/2)/2 a b c: a bar has no sensible value at the Sun.
"""

import math

from starcount.galaxy.law import Law, LawParameter, compiled
from starcount.vector_math import log

_INTEGRAL = math.pi * math.sqrt(2.0 * math.pi) * 5.244115108584239 / 2.0  # 5.244... = B(1/4, 1/2)
_DEGREE = math.pi / 180.0


@compiled
def ln_density(n, theta, R, cos_phi, sin_phi, z, out):
    c, s = math.cos(theta[3] * _DEGREE), math.sin(theta[3] * _DEGREE)
    x0, y0, z0 = theta[0], theta[1], theta[2]
    for j in range(n):
        X = R[j] * (cos_phi[j] * c + sin_phi[j] * s) / x0
        Y = R[j] * (cos_phi[j] * s - sin_phi[j] * c) / y0
        Z2 = z[j] * z[j] / (z0 * z0)
        P = X * X + Y * Y
        out[j] = -0.5 * math.sqrt(P * P + Z2 * Z2)


@compiled
def slopes(n, theta, R, cos_phi, sin_phi, z, out):
    c, s = math.cos(theta[3] * _DEGREE), math.sin(theta[3] * _DEGREE)
    x0, y0, z0 = theta[0], theta[1], theta[2]
    for j in range(n):
        X = R[j] * (cos_phi[j] * c + sin_phi[j] * s) / x0
        Y = R[j] * (cos_phi[j] * s - sin_phi[j] * c) / y0
        Z2 = z[j] * z[j] / (z0 * z0)
        P = X * X + Y * Y
        r2 = max(math.sqrt(P * P + Z2 * Z2), 1e-30)
        a, b = P / r2, Z2 / r2
        out[j] = a * X * X / x0
        out[n + j] = a * Y * Y / y0
        out[2 * n + j] = b * Z2 / z0
        turn = a * X * Y * (x0 / y0 - y0 / x0)  # d/d(alpha): X gains -Y y0/x0, Y gains X x0/y0
        out[3 * n + j] = -turn * _DEGREE
        out[4 * n + j] = -a * P / max(R[j], 1e-30)
        out[5 * n + j] = turn
        out[6 * n + j] = -b * z[j] / (z0 * z0)


@compiled
def ln_total(n, theta, R, cos_phi, sin_phi, z, out):
    out[0] = log(_INTEGRAL * theta[0] * theta[1] * theta[2])
    out[1] = 1.0 / theta[0]
    out[2] = 1.0 / theta[1]
    out[3] = 1.0 / theta[2]
    out[4] = 0.0


BAR = Law(
    name="bar",
    meaning="boxy triaxial Gaussian bar",
    reference="Dwek et al. 1995, ApJ 445, 716 (form G2)",
    parameters=(
        LawParameter("a_kpc", "kpc", "scale along the bar", 0.2, 5.0),
        LawParameter("b_kpc", "kpc", "scale across the bar in the plane", 0.1, 3.0),
        LawParameter("c_kpc", "kpc", "vertical scale", 0.05, 2.0),
        LawParameter("alpha_deg", "deg", "angle of the bar, near end at positive longitude", -90.0, 90.0),
    ),
    ln_density=ln_density,
    slopes=slopes,
    ln_total=ln_total,
)
