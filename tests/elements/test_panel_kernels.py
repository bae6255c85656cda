"""Panels against 30-digit arithmetic: quadrature of the density written out here, and a closed form in bulk.

Errors are relative to the largest order at the point; the bound is 1e-12.
"""

import mpmath as mp
import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.field_arrays import make_panels
from wellshed.elements.flow_field import superpose
from wellshed.elements.kernels_line import N_COEF, NEAR, far_terms

Z1, Z2 = -3 + 2j, 5 + 8j  # middle and half vector are exact in floating point
LENGTH = 10.0
KINDS = [0, 1, 2, 3]  # tip, plain, square and cube map
BOUND = 1e-12
AQUIFER = Aquifer(10.0, 0.0)


def one_panel(kind, order, z1=Z1, z2=Z2, **more):
    """Field of a single panel with unit strength of one order."""
    coef = np.zeros((1, N_COEF))
    coef[0, order] = 1.0
    ints = (np.array([kind]), np.array([0]), np.array([N_COEF]))
    panels = make_panels(np.array([z1]), np.array([z2]), *ints)
    return superpose(AQUIFER, panels=panels, coef=coef, **more)


def computed(kind, z):
    """Potential (orders, n) and W = Qx - i Qy (orders, n) of the kernels at points z (n,)."""
    phi, w = [], []
    for order in range(N_COEF):
        field = one_panel(kind, order)
        phi.append(field.potential(z.real, z.imag))
        qx, qy = field.discharge(z.real, z.imag)
        w.append(qx - 1j * qy)
    return np.array(phi), np.array(w)


# ---------------------------------------------------------------------------------------------- the slow twins


def density(kind, order, u):
    """Strength of one order per unit of u: the mapped Legendre polynomial."""
    return mp.legendre(2 * order, u) if kind == 0 else mp.legendre(order, 2 * u - 1)


def exact_tau(z):
    z1, z2 = mp.mpc(Z1), mp.mpc(Z2)
    return (mp.mpc(complex(z)) - z1) / (z2 - z1)


def by_quadrature(kind, order, z, slope):
    """Potential, or W where ``slope``, by integration of the density over the panel."""
    q = 2 if kind == 0 else kind
    tau = exact_tau(z)
    foot = min(max(mp.re(tau), mp.mpf(0)), mp.mpf(1))
    gap = max(abs(tau - foot), mp.mpf(10) ** -30)
    nearest = foot ** (mp.mpf(1) / q)
    breaks = {mp.mpf(0), mp.mpf(1), nearest}
    reach = gap / 4
    while reach < 1:  # intervals that grow away from the nearest place
        breaks |= {b for b in (nearest - reach, nearest + reach) if 0 < b < 1}
        reach *= 8
    if slope:
        total = mp.quad(lambda u: density(kind, order, u) / (tau - u**q), sorted(breaks))
        return -mp.mpf(LENGTH) / (2 * mp.pi) * total / (mp.mpc(Z2) - mp.mpc(Z1))

    def weighted(u):
        r = abs(tau - u**q)
        return density(kind, order, u) * mp.log(LENGTH * r) if r else mp.mpf(0)  # a node rounded onto the point

    total = mp.quad(weighted, sorted(breaks))
    return mp.mpf(LENGTH) / (2 * mp.pi) * total


def legendre_second(z, n_max):
    """Q_0 .. Q_n_max of z by the forward recurrence in enough digits to outlast its growth (DLMF 14.10.3)."""
    q = [mp.log((z + 1) / (z - 1)) / 2]
    q.append(z * q[0] - 1)
    for n in range(1, n_max):
        q.append(((2 * n + 1) * z * q[n] - n * q[n - 1]) / (n + 1))
    return q


def by_closed_form(kind, z):
    """Potentials and W of all orders from Legendre functions (DLMF 14.12.13), in up to several hundred digits.

    int P_n(s)/(Z - s) ds = 2 Q_n(Z), int P_n(s) ln(Z - s) ds = 2 (Q_{n+1} - Q_{n-1})/(2n + 1) for n > 0.
    """
    far = max(1.0, abs(2 * complex(z) - Z1 - Z2) / LENGTH)
    with mp.workdps(40 + int(2 * (2 * N_COEF + 1) * np.log10(2.5 * far))):
        tau = exact_tau(z)
        on = mp.im(tau) == 0 and 0 < mp.re(tau) < 1
        q = 2 if kind == 0 else kind
        zeta = mp.root(tau, q) if tau != 0 else mp.mpc(0)
        n_max = 2 * N_COEF if kind == 0 else N_COEF
        phi, w = [mp.mpc(0)] * N_COEF, [mp.mpc(0)] * N_COEF
        turns = [mp.mpf(1)] if kind == 0 else [mp.expjpi(mp.mpf(2 * j) / q) for j in range(q)]
        for turn in turns:
            # the tip integrates even polynomials: half of the integral over (-1, 1)
            at = zeta if kind == 0 else 2 * turn * zeta - 1
            second = legendre_second(at, n_max)
            logs = (at + 1) * mp.log(at + 1) - (at - 1) * mp.log(at - 1) - 2
            for n in range(N_COEF):
                m = 2 * n if kind == 0 else n
                g = logs if n == 0 else 2 * (second[m + 1] - second[m - 1]) / (2 * m + 1)
                phi[n] += g if kind == 0 else g / 2
                if n == 0 and kind != 0:
                    phi[n] -= mp.log(2)
                w[n] += second[m] / zeta if kind == 0 else 2 * turn * zeta / (q * tau) * second[m]
        c = mp.mpf(LENGTH) / (2 * mp.pi)
        direction = mp.mpc(Z2) - mp.mpc(Z1)
        potentials = [float(c * (mp.re(p) + (mp.log(LENGTH) if n == 0 else 0))) for n, p in enumerate(phi)]
        # on the panel: the mean of both sides, real part of dOmega/dtau
        slopes = [complex(-c * (mp.re(v) if on else v) / direction) for v in w]
    return potentials, slopes


# ------------------------------------------------------------------------------------------------------ points


def around(rng, n, low, high):
    """Points at log-uniform distances (half lengths) from random places of the panel, all round."""
    t = rng.uniform(-1, 1, n)
    distance = 10 ** rng.uniform(low, high, n)
    big = t + distance * np.exp(2j * np.pi * rng.uniform(0, 1, n))
    return (Z1 + Z2) / 2 + (Z2 - Z1) / 2 * big


def near_ends(rng, n):
    distance = 10 ** rng.uniform(-9, -0.5, n)
    end = rng.choice(np.array([Z1, Z2]), n)
    return end + LENGTH / 2 * distance * np.exp(2j * np.pi * rng.uniform(0, 1, n))


def on_panel(n):
    t = np.random.default_rng(5).integers(1, 1024, n) / 1024.0  # dyadic: the point lies on the line exactly
    return Z1 + (Z2 - Z1) * t


def on_extension(rng, n):
    t = np.concatenate([1 + rng.integers(1, 4096, n // 2) / 1024.0, -rng.integers(1, 4096, n - n // 2) / 1024.0])
    return Z1 + (Z2 - Z1) * t


def at_switches(rng, n):
    """Round the distance where the closed form hands over to the far series, and where its terms change."""
    grid = np.geomspace(NEAR, 1e3, 20001)
    terms = np.array([far_terms(r * r) for r in grid])
    switches = np.concatenate([[NEAR], grid[1:][terms[1:] != terms[:-1]]])
    assert len(switches) > 8
    radius = rng.choice(switches, n) * (1 + rng.normal(0, 1e-3, n))
    return (Z1 + Z2) / 2 + (Z2 - Z1) / 2 * radius * np.exp(2j * np.pi * rng.uniform(0, 1, n))


def places(kind, count):
    rng = np.random.default_rng(100 + kind)
    return {
        "near": around(rng, count, -1.5, 0.4),
        "close to the panel": around(rng, count, -6, -1.5),
        "close to an end": near_ends(rng, count),
        "on the panel": on_panel(count),
        "on the extension": on_extension(rng, count),
        "at a change of method": at_switches(rng, count),
        "far": around(rng, count, 0.4, 6),
    }


def errors(got, exact):
    exact = np.array(exact).T
    return np.max(abs(got - exact) / np.max(abs(exact), axis=0), axis=0)


@pytest.mark.parametrize("kind", KINDS)
def test_panels_against_the_closed_form(kind):
    worst = {}
    for where, z in places(kind, 120).items():
        phi, w = computed(kind, z)
        exact_phi, exact_w = zip(*(by_closed_form(kind, point) for point in z), strict=True)
        worst[where] = errors(phi, exact_phi).max(), errors(w, exact_w).max()
    assert max(max(pair) for pair in worst.values()) < BOUND, worst


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("slope", [False, True], ids=["potential", "discharge"])
def test_panels_against_quadrature(kind, slope):
    rng = np.random.default_rng(7 + kind)
    z = np.concatenate([around(rng, 5, -3, 0.4), around(rng, 3, 0.4, 4), near_ends(rng, 3)])
    if not slope:  # the flow on the line is a principal value, which quadrature does not take
        z = np.concatenate([z, on_panel(3), on_extension(rng, 3)])
    phi, w = computed(kind, z)
    got = w if slope else phi
    size = np.max(abs(got), axis=0)
    with mp.workdps(30):
        for i, point in enumerate(z):
            order = int(rng.integers(0, N_COEF)) if i % 4 else N_COEF - 1
            exact = complex(by_quadrature(kind, order, point, slope))
            assert abs(got[order, i] - exact) < BOUND * size[i], (point, order)


@pytest.mark.parametrize("kind", KINDS)
def test_potential_at_the_ends_is_the_limit(kind):
    # int ln|tau - u^q| P_n du at tau = 0 and 1 by quadrature; the closed form has 0 ln 0 there
    q = 2 if kind == 0 else kind
    phi, _ = computed(kind, np.array([Z1, Z2]))
    with mp.workdps(30):
        for order in range(0, N_COEF, 2):
            for i, tau in enumerate((0, 1)):
                f = lambda u, o=order, t=tau: density(kind, o, u) * mp.log(LENGTH * abs(t - u**q))  # noqa: E731
                exact = float(LENGTH / (2 * mp.pi) * mp.quad(f, [0, 0.5, 1]))
                assert abs(phi[order, i] - exact) < BOUND * np.max(abs(phi[:, i]))


# Checks 9a: Phi = (1/2 pi) int P_n(t) ln r ds, Strack 1989 for order 0, derived for the others.
@pytest.mark.parametrize(
    ("order", "x", "y", "values"),
    [
        (0, 2, 1, (2.498054249, -0.1187354672, 0.2647284622)),
        (0, 60, -45, (6.921328123, -0.01567227293, 0.01329781314)),
        (0, 2, 5.75, (1.020217968, -0.06504033846, -0.04878025385)),
        (1, 2, 1, (0.1459646828, 0.09144962715, 0.01603386872)),
        (1, 60, -45, (-0.00761040227, 0.0002042679376, 0.0003925331216)),
        (1, 2, 5.75, (-0.3894915455, 0.2383878243, 0.1787908682)),
        (2, 2, 1, (0.09115838663, -0.002806697778, -0.03580791316)),
        (2, 60, -45, (0.0003991321527, 1.105981247e-05, -2.894914418e-06)),
        (2, 2, 5.75, (0.4331435906, 0.1219156034, 0.09143670252)),
    ],
)
def test_published_line_sink(order, x, y, values):
    field = one_panel(1, order)
    got = (float(field.potential(x, y)), *(float(q) for q in field.discharge(x, y)))
    assert got == pytest.approx(values, rel=2e-9)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("order", [0, 1, 2, 5, 10])
def test_jump_of_the_normal_flow_is_the_strength(kind, order):
    # strength per length = P_n du/dtau; the water taken arrives from both sides
    q = 2 if kind == 0 else kind
    tau = np.array([0.1, 0.37, 0.8])
    u = tau ** (1 / q)
    legendre = np.polynomial.legendre.Legendre.basis(2 * order if kind == 0 else order)
    sigma = legendre(u if kind == 0 else 2 * u - 1) * u ** (1 - q) / q
    normal = 1j * (Z2 - Z1) / LENGTH
    field = one_panel(kind, order)
    z = Z1 + (Z2 - Z1) * tau
    step = 1e-9 * normal
    towards = []
    for side in (step, -step):
        qx, qy = field.discharge((z + side).real, (z + side).imag)
        towards.append(-(qx * normal.real + qy * normal.imag) * np.sign((side / step).real))
    assert sum(towards) == pytest.approx(sigma, rel=1e-5, abs=1e-6)


@pytest.mark.parametrize("kind", KINDS)
def test_far_away_a_line_sink_is_a_well(kind):
    # the net rate is L int P_n du: L for order 0, none for the others
    z = 1e9 * np.exp(1j * np.linspace(0, 6, 7))
    phi, w = computed(kind, z)
    c = LENGTH / (2 * np.pi)
    assert phi[0] == pytest.approx(c * np.log(abs(z)), rel=1e-8)
    assert w[0] == pytest.approx(-c / z, rel=1e-8)
    assert np.max(abs(w[1:])) < 1e-7 * np.min(abs(w[0]))


def test_plain_panel_is_the_sum_of_its_halves():
    z = around(np.random.default_rng(3), 200, -4, 3)
    whole = one_panel(1, 0)
    halves = [one_panel(1, 0, Z1, (Z1 + Z2) / 2), one_panel(1, 0, (Z1 + Z2) / 2, Z2)]
    total = sum(h.potential(z.real, z.imag) for h in halves)
    exact = whole.potential(z.real, z.imag)
    assert np.max(abs(total - exact) / np.maximum(1.0, abs(exact))) < 1e-13
    for k in (0, 1):
        part = sum(h.discharge(z.real, z.imag)[k] for h in halves)
        assert part == pytest.approx(whole.discharge(z.real, z.imag)[k], rel=1e-10, abs=1e-12)


@pytest.mark.parametrize("kind", KINDS)
def test_scale_invariance(kind):
    # all lengths times 2^20, the length in the logarithm too: potentials scale with L, discharges stay
    z = around(np.random.default_rng(4), 100, -4, 3)
    factor = 2.0**20
    for order in (0, 3, 10):
        small = one_panel(kind, order)
        large = one_panel(kind, order, Z1 * factor, Z2 * factor, scale=factor)
        a, b = small.potential(z.real, z.imag), large.potential(z.real * factor, z.imag * factor)
        assert np.max(abs(b / factor - a)) < 1e-13 * max(1.0, np.max(abs(a)))
        qa, qb = small.discharge(z.real, z.imag), large.discharge(z.real * factor, z.imag * factor)
        for first, second in zip(qa, qb, strict=True):
            assert second == pytest.approx(first, rel=1e-12, abs=1e-13)


@pytest.mark.parametrize("kind", KINDS)
def test_the_length_in_the_logarithm_moves_the_potential_by_a_constant(kind):
    z = around(np.random.default_rng(6), 50, -3, 3)
    shift = one_panel(kind, 0).potential(z.real, z.imag) - one_panel(kind, 0, scale=250.0).potential(z.real, z.imag)
    assert shift == pytest.approx(np.full(50, LENGTH / (2 * np.pi) * np.log(250.0)), rel=1e-13)
