"""A small invented sky with the shape of the forward model, for tests of fitting: two discs seen through dust.

Nothing here is measured. ``v`` is (thin height, thick height, ln thin amplitude, ln thick amplitude); the rows of the
luminosity matrix are (distance, layer).
"""

from dataclasses import dataclass, replace
from types import SimpleNamespace

import numpy as np
from numba import njit

from starcount.forward.knots import KNOTS_MAG, hat
from starcount.galaxy.component import Parameter
from starcount.stars import CLASSES, M_EDGES_MAG
from starcount.survey import Survey, circle_fields, make_group

D_KPC = 10 ** np.arange(-1.4, 1.2, 0.05)
MIDDLE = 0.5 * (M_EDGES_MAG[1:] + M_EDGES_MAG[:-1])
TRUTH = {"thin.h_z_kpc": 0.31, "thick.h_z_kpc": 0.85, "thin.density": 1.1, "thick.share": 0.10}


@njit(nogil=True, error_model="numpy")
def project(v, W, ln_dust, sin_b, d_kpc, weight, fading):
    n_d = d_kpc.size
    counts = np.zeros((sin_b.size, W.shape[1]))
    for f in range(sin_b.size):
        for j in range(n_d):
            dimmed = weight[f, j] * np.exp(-fading[f, j] * np.exp(ln_dust[f]))
            for k in range(2):
                stars = dimmed * np.exp(v[2 + k] - sin_b[f] * d_kpc[j] / v[k])
                for b in range(W.shape[1]):
                    counts[f, b] += stars * W[2 * j + k, b]
    return counts


@njit(nogil=True, error_model="numpy")
def project_back(v, W, ln_dust, cotangent, want_W, sin_b, d_kpc, weight, fading):
    gv, gW, g_dust = np.zeros(v.size), np.zeros(W.shape), np.zeros(sin_b.size)
    for f in range(sin_b.size):
        for j in range(d_kpc.size):
            dust = fading[f, j] * np.exp(ln_dust[f])
            for k in range(2):
                depth = sin_b[f] * d_kpc[j] / v[k]
                stars = weight[f, j] * np.exp(-dust + v[2 + k] - depth)
                g = 0.0
                for b in range(W.shape[1]):
                    g += W[2 * j + k, b] * cotangent[f, b]
                    if want_W:
                        gW[2 * j + k, b] += stars * cotangent[f, b]
                gv[k] += g * stars * depth / v[k]
                gv[2 + k] += g * stars
                g_dust[f] -= g * stars * dust
    return gv, gW, g_dust


@njit(nogil=True, error_model="numpy")
def luminosity(factors, owner, pieces):
    """W (row, bin) from the factors (curve, knot) and the matrix of every knot (row, bin, knot)."""
    W = np.zeros(pieces.shape[:2])
    for i in range(pieces.shape[0]):
        for k in range(pieces.shape[2]):
            for b in range(pieces.shape[1]):
                W[i, b] += factors[owner[i], k] * pieces[i, b, k]
    return W


@njit(nogil=True, error_model="numpy")
def luminosity_back(gW, shape, owner, pieces):
    g = np.zeros(shape)
    for i in range(pieces.shape[0]):
        for k in range(pieces.shape[2]):
            for b in range(pieces.shape[1]):
                g[owner[i], k] += gW[i, b] * pieces[i, b, k]
    return g


def matrix(lf, first_bin, n_bin):
    """W (distance x layer, bin) of functions (layer, class, cell) whose cells fall into bins (distance, cell)."""
    W = np.zeros((first_bin.shape[0], len(lf), n_bin))
    for b in range(n_bin):
        W[:, :, b] = (first_bin == b) @ lf.sum(axis=1).T
    return W.reshape(-1, n_bin)


KERNELS = SimpleNamespace(
    DIGEST="toy sky 1", project=project, project_back=project_back, luminosity=luminosity,
    luminosity_back=luminosity_back,
)  # fmt: skip


@dataclass(frozen=True, eq=False)
class ToyGroup:
    """A group of fields, or the census, with the attributes of a group model."""

    name: str
    group: object
    galaxy: object
    counts: np.ndarray | None
    used: np.ndarray
    projection: SimpleNamespace
    lf: np.ndarray
    first_bin: np.ndarray
    extra_names: tuple
    extra: np.ndarray

    @property
    def matrix(self):
        """What ``luminosity`` takes after the factors."""
        n = self.first_bin.shape[0]
        pieces = [
            matrix(self.lf * hat(MIDDLE)[:, k], self.first_bin, self.used.shape[1]) for k in range(KNOTS_MAG.size)
        ]
        layer, pieces = np.tile([0, 1], n), np.ascontiguousarray(np.stack(pieces, axis=-1))
        return SimpleNamespace(arrays=lambda owner: (owner[layer], pieces))

    def luminosity_matrix(self, factors=None):
        """W (row, bin)."""
        factors = np.ones((2, KNOTS_MAG.size)) if factors is None else factors
        return luminosity(factors, *self.matrix.arrays(np.arange(2)))

    def expected(self, values=None, *, factors=None, parts=False):
        """Counts expected (field, bin), or by component."""
        v, W = self.galaxy.vector(values or {}), self.luminosity_matrix(factors)
        found = {}
        for k, component in enumerate(("thin", "thick")):
            alone = np.where(np.arange(W.shape[0])[:, None] % 2 == k, W, 0.0)
            found[component] = project(v, alone, np.zeros(self.used.shape[0]), *self.projection.arrays)
        found |= dict(zip(self.extra_names, self.extra, strict=True))
        return found if parts else sum(found.values())


def toy_group(name, galaxy, sin_b, edges_mag, per_kpc3, group=None, extra=0.0):
    """Fields at these latitudes; ``per_kpc3`` scales their size, ``extra`` adds as many galaxies to each bin."""
    fading = 0.15 * np.outer(np.linspace(0.5, 2.0, sin_b.size), 1 - np.exp(-D_KPC / 0.5))
    m_mag = MIDDLE[None, :] + 5 * np.log10(D_KPC)[:, None] + 10
    bins = np.searchsorted(edges_mag, m_mag, side="right") - 1
    bins[bins >= edges_mag.size - 1] = -1
    names = ("galaxies",) if extra else ()
    shape = (sin_b.size, edges_mag.size - 1)
    return ToyGroup(
        name=name,
        group=group,
        galaxy=galaxy,
        counts=None,
        used=np.ones(shape, bool),
        projection=SimpleNamespace(arrays=(sin_b, D_KPC, per_kpc3 * np.ones((sin_b.size, 1)) * D_KPC**3, fading)),
        lf=luminosity_functions(),
        first_bin=bins,
        extra_names=names,
        extra=np.full((len(names), *shape), extra),
    )


def luminosity_functions():
    """Two invented luminosity functions (layer, class, cell), one star in the window 4.5 ... 8.5 each."""
    width = 0.05
    young = np.exp(0.35 * (np.minimum(MIDDLE, 12) - 6.5)) * (MIDDLE > 0) * (MIDDLE < 15)
    old = np.exp(0.25 * (np.minimum(MIDDLE, 10) - 6.5)) * (MIDDLE > 3.5) * (MIDDLE < 14)
    lf = np.zeros((2, len(CLASSES), MIDDLE.size))
    lf[:, 0] = 0.25 * width * np.array([young, old])
    return lf


class ToyGalaxy:
    """Two discs; the second one's amplitude is a share of the first one's."""

    def __init__(self):
        rows = (
            ("thin.h_z_kpc", 0.30, 0.06, "lognormal", 0.0, 2.0),
            ("thick.h_z_kpc", 0.90, 0.20, "lognormal", 0.2, 5.0),
            ("thin.density", 1.0, 0.2, "lognormal", 0.0, 10.0),
            ("thick.share", 0.12, 0.04, "normal", 0.0, 1.0),
            ("thick.truncation_kpc", 9.0, 0.0, "normal", 0.0, 99.0),
        )
        self.parameters = {
            name: Parameter(name, value, error, "kpc", lower, upper, prior, "invented", "invented")
            for name, value, error, prior, lower, upper in rows
        }
        self.layers = tuple(
            (SimpleNamespace(name=name, population=kind, anchor="sun"), None)
            for name, kind in (("thin", "census"), ("thick", "old stars"))
        )

    @property
    def values(self):
        return {name: p.value for name, p in self.parameters.items()}

    def vector(self, values, xp=np):
        values = {**self.values, **values}
        thin = xp.log(values["thin.density"])
        flat = [values["thin.h_z_kpc"], values["thick.h_z_kpc"], thin, thin + xp.log(values["thick.share"])]
        return np.array(flat, float) if xp is np else xp.stack(flat)


def toy_model(n_field=12, seed=2, floor=0.0, n_bin=8, extra=0.0, wrong_lf=0.0, spacing_deg=10.0):
    """The toy model of one group and a census around the Sun, with counts drawn from ``TRUTH``."""
    galaxy = ToyGalaxy()
    sin_b = np.linspace(0.25, 1.0, n_field)
    edges = np.linspace(13.0, 20.0, n_bin + 1)
    names = [f"F{i}" for i in range(n_field)]
    fields = circle_fields(names, spacing_deg * np.arange(n_field), np.degrees(np.arcsin(sin_b)), np.full(n_field, 0.5))
    survey_group = make_group("G", "G", edges, fields)
    group = toy_group("G", galaxy, sin_b, edges, 600.0, survey_group, extra)
    census = toy_group("census", galaxy, np.zeros(1), np.array([7.0, 9.0, 11.0, 13.0]), 100.0)
    rng = np.random.default_rng(seed)
    bent = group.lf * np.exp(wrong_lf * np.sin(MIDDLE / 2.2))
    counted = []
    for one in (group, census):
        mean = replace(one, lf=bent).expected(TRUTH)
        if floor and one is group:
            mean = mean * rng.gamma(floor**-2, floor**2, mean.shape)
        counted.append(replace(one, counts=rng.poisson(mean)))
    survey = Survey("toy", "invented", True, (survey_group,))
    return SimpleNamespace(galaxy=galaxy, survey=survey, groups=(counted[0],), census=counted[1])
