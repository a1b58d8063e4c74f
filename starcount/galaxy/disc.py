"""The disc: exponential in R, and one of a family of vertical laws that share the far-field scale height.

    ln n = -R/h_R - R_hole/R - ln(1 + exp((R - R_edge)/w_edge)) + ln g(z)
    g(z) = sech^(2/k)(k |z| / (2 h_z)),  k = 1 (sech^2), 2 (sech), infinity (exponential)

The family is van der Kruit 1988, A&A 192, 117: for every member n falls as exp(-|z|/h_z) far from the plane. The hole
is the form of Lopez-Corredoira et al. 2004, A&A 421, 953: neutral at R_hole = 0, and to be used only together with a
bar. The edge is a logistic cut-off, neutral when it lies far outside the Galaxy.
"""

from starcount.galaxy.law import Law, LawParameter, compiled
from starcount.vector_math import exp, log

_LN2 = 0.6931471805599453
_NO_EDGE_KPC = 1000.0
_AXIS_KPC = 1e-6  # on the axis the hole is empty; keeps its slope finite
_LARGEST = 650.0  # exponents beyond this have saturated; keeps exp finite


@compiled
def ln_density(n, theta, R, cos_phi, sin_phi, z, out):
    h_R, h_z, k = theta[0], theta[1], theta[5]
    R_hole, R_edge, w_edge = theta[2], theta[3], theta[4]
    if k > 0.0:
        for j in range(n):
            u = 0.5 * k * abs(z[j]) / h_z
            out[j] = -R[j] / h_R + (2.0 / k) * (_LN2 - u - log(1.0 + exp(-2.0 * u)))
    else:
        for j in range(n):
            out[j] = -R[j] / h_R - abs(z[j]) / h_z
    if R_hole > 0.0:
        for j in range(n):
            out[j] -= R_hole / max(R[j], _AXIS_KPC)
    if R_edge < _NO_EDGE_KPC:
        for j in range(n):
            out[j] -= log(1.0 + exp(min((R[j] - R_edge) / w_edge, _LARGEST)))


@compiled
def slopes(n, theta, R, cos_phi, sin_phi, z, out):
    h_R, h_z, k = theta[0], theta[1], theta[5]
    R_hole, R_edge, w_edge = theta[2], theta[3], theta[4]
    for j in range(n):
        out[j] = R[j] / (h_R * h_R)
        out[2 * n + j] = -1.0 / max(R[j], _AXIS_KPC)
        out[3 * n + j] = 0.0
        out[4 * n + j] = 0.0
        out[5 * n + j] = 0.0  # the vertical family is a setting
        out[6 * n + j] = -1.0 / h_R + R_hole / max(R[j] * R[j], _AXIS_KPC * _AXIS_KPC)
        out[7 * n + j] = 0.0
    for j in range(n):
        height = abs(z[j])
        fall = 1.0 / h_z  # -d ln g / d|z|
        if k > 0.0:
            e = exp(-k * height / h_z)
            fall = (1.0 - e) / (1.0 + e) / h_z
        out[n + j] = fall * height / h_z
        out[8 * n + j] = -fall if z[j] > 0.0 else fall
    if R_edge < _NO_EDGE_KPC:
        for j in range(n):
            t = min((R[j] - R_edge) / w_edge, _LARGEST)
            inside = 1.0 / (1.0 + exp(-t)) / w_edge
            out[3 * n + j] = inside
            out[4 * n + j] = inside * t
            out[6 * n + j] -= inside


DISC = Law(
    name="disc",
    meaning="exponential disc with a vertical family, optional central hole and outer edge",
    reference="van der Kruit 1988, A&A 192, 117 (family); Lopez-Corredoira et al. 2004, A&A 421, 953 (hole)",
    parameters=(
        LawParameter("h_R_kpc", "kpc", "radial scale length", 0.3, 20.0),
        LawParameter("h_z_kpc", "kpc", "far-field exponential scale height", 0.01, 5.0),
        LawParameter("R_hole_kpc", "kpc", "scale of the central hole; 0 for none", 0.0, 10.0, neutral=0.0),
        LawParameter(
            "R_edge_kpc", "kpc", "radius of the outer edge; 1000 for none", 5.0, _NO_EDGE_KPC, neutral=_NO_EDGE_KPC
        ),
        LawParameter("w_edge_kpc", "kpc", "width of the outer edge", 0.05, 10.0, neutral=1.0),
        LawParameter(
            "vertical",
            "",
            "vertical family",
            0.0,
            2.0,
            neutral=0.0,
            fittable=False,
            choices=(("exponential", 0.0), ("sech2", 1.0), ("sech", 2.0)),
        ),
    ),
    ln_density=ln_density,
    slopes=slopes,
)
