"""The finite-element truth is itself held to closed forms before anything is compared with it."""

import fem
import numpy as np
import pytest


def box(length, width):
    return np.array([[0, 0], [length, 0], [length, width], [0, width]], dtype=float)


def ring(radius, count):
    angle = 2 * np.pi * np.arange(count) / count
    return radius * np.column_stack([np.cos(angle), np.sin(angle)])


def edges(length, width, left, right):
    return (
        fem.Stream("left", np.array([[0.0, width], [0, 0]]), left),
        fem.Stream("right", np.array([[length, 0.0], [length, width]]), right),
    )


def test_round_island_with_a_well_off_its_centre():
    """Image in a circle (Strack 1989): R 500, N 0.001, Q 120, well at (250, 0)."""
    radius, count = 500.0, 360
    # the polygon has the area of the circle: the inscribed one would fall short by 5e-5
    outer = ring(radius * np.sqrt(2 * np.pi / count / np.sin(2 * np.pi / count)), count)
    site = fem.Site(outer, base=0.0, conductivity=10.0, size=40, shore=20.0, recharge=0.001)
    site = fem.replace(site, wells=(fem.Well("W", 250.0, 0.0, 120.0),))
    truth = fem.solve(site)
    x, y = np.array([0.0, 240.0, -300.0]), np.array([0.0, 10.0, 200.0])
    rise = 10.0 * (truth.u(x, y) - 0.5 * 20.0**2)
    assert rise == pytest.approx([49.26186399, -14.78036331, 27.77204723], abs=0.01)
    assert truth.flows["shore"] == pytest.approx(120 - 0.001 * np.pi * radius**2, rel=1e-6)


def test_strip_between_two_edges_free_confined_and_converting():
    """h^2 = h1^2 - (h1^2 - h2^2) x / L + (N / K) (L - x) x (Fetter), and the same in the potential under a top."""
    length, rate, k = 1500.0, 0.001369863014, 1.2
    truth = fem.solve(fem.Site(box(length, 300), 0.0, k, 100, recharge=rate, streams=edges(length, 300, 31, 27)))
    assert truth.head(np.array([500.0]), np.array([140.0]))[0] == pytest.approx(38.13715934, rel=1e-8)
    assert truth.head(np.array([682.256]), np.array([33.0]))[0] == pytest.approx(38.63110349, rel=1e-8)
    assert truth.flows["left"] == pytest.approx(-300 * 0.9345972603, rel=1e-6)
    assert truth.flows["right"] == pytest.approx(-300 * 1.12019726, rel=1e-6)

    site = fem.Site(box(length, 300), 0.0, k, 100, top=25.0, streams=edges(length, 300, 31, 17))
    converting = fem.solve(site)
    u1, u2 = 25 * 31 - 25**2 / 2, 17**2 / 2
    u = u1 + (u2 - u1) * np.array([200.0, 1200.0]) / length
    heads = [(u[0] + 25**2 / 2) / 25, np.sqrt(2 * u[1])]
    assert heads[0] > 25 > heads[1]
    assert converting.head(np.array([200.0, 1200.0]), np.array([120.0, 44.0])) == pytest.approx(heads, rel=1e-8)


def test_uneven_ground_converges_with_the_third_order():
    """K = K0 exp(a x): u' = (C - N x) exp(-a x) / K0, integrated in closed form (derived here)."""
    length, a, k0, rate, u1, u2 = 1000.0, 0.003, 5.0, 0.002, 200.0, 162.0
    x = np.linspace(30, 970, 200)
    y = 100 + 90 * np.sin(x)

    def part(x):
        return (1 - np.exp(-a * x)) / a, (1 - np.exp(-a * x) * (1 + a * x)) / a**2

    whole, first = part(length)
    c = (k0 * (u2 - u1) + rate * first) / whole
    exact = u1 + (c * part(x)[0] - rate * part(x)[1]) / k0
    worst, flow = [], []
    for size in (100, 50):
        streams = edges(length, 200, 20.0, 18.0)
        k = lambda x, y: k0 * np.exp(a * x)  # noqa: E731
        truth = fem.solve(fem.Site(box(length, 200), 0.0, k, size, recharge=rate, streams=streams))
        worst.append(np.sqrt(np.mean((truth.u(x, y) - exact) ** 2)))
        flow.append(abs(truth.flows["left"] + 200 * c))
    assert worst[0] / worst[1] > 5
    assert flow[1] < 1e-5 * 200 * abs(c)


def test_stream_bed_as_a_line():
    """h0 = (T h1/L1 + T h2/L2 + C hs) / (T/L1 + T/L2 + C), gain C (h0 - hs) (derived here: leaky line)."""
    streams = edges(800.0, 200, 52.0, 49.0)
    bed = fem.Stream("bed", np.array([[300.0, 0.0], [300.0, 200.0]]), 48.5, conductance=1.5)
    truth = fem.solve(fem.Site(box(800.0, 200), 0.0, 10.0, 60, top=20.0, streams=(*streams, bed)))
    assert truth.head(np.array([300.0]), np.array([77.0]))[0] == pytest.approx(49.48701299, rel=1e-8)
    assert -truth.flows["bed"] == pytest.approx(200 * 1.480519481, rel=1e-6)
    free = fem.replace(truth.site, top=60.0)
    with pytest.raises(ValueError, match="stays confined"):
        fem.solve(free)


def test_lake_and_stream_close_the_balance_and_the_stream_gains_along_its_way():
    lake = fem.Lake("tarn", ring(120.0, 9) + [700.0, 500.0], 20.0)
    stream = fem.Stream("beck", np.array([[150.0, 900.0], [300, 600], [350, 150]]), np.array([19.6, 19.3, 19.0]))
    well = fem.Well("W", 900.0, 300.0, 90.0)
    site = fem.Site(box(1200.0, 1000), 0.0, 15.0, 80, recharge=6e-4, streams=(stream,), lakes=(lake,), wells=(well,))
    truth = fem.solve(site)
    area = 1200 * 1000 - 0.5 * 9 * 120**2 * np.sin(2 * np.pi / 9)
    assert sum(truth.flows.values()) == pytest.approx(90 - 6e-4 * area, rel=1e-9)
    assert truth.gain("beck") == pytest.approx(-truth.flows["beck"], rel=1e-9)
    assert 0 < truth.gain("beck", 0.4) < truth.gain("beck")
    assert np.isnan(truth.head(700.0, 500.0))
    fine = fem.solve(fem.replace(site, size=50, tip=0.2, slope=0.25))
    at = np.array([500.0, 250.0, 900.0]), np.array([600.0, 800.0, 310.0])
    assert truth.head(*at) == pytest.approx(fine.head(*at), abs=1e-3)
    assert truth.flows["beck"] == pytest.approx(fine.flows["beck"], rel=5e-4)


def test_simulated_ground_has_its_spread_and_patch():
    ln_k = [
        np.log(
            fem.simulated_ground((0, 900, 0, 900), 12.0, 0.6, 150.0, seed)(
                np.array([300.0, 450.0, 700.0]), np.array([300.0, 300.0, 300.0])
            )
        )
        for seed in range(400)
    ]
    spread = np.std(ln_k, axis=0)
    assert np.mean(ln_k) == pytest.approx(np.log(12.0), abs=0.06)
    assert spread == pytest.approx(0.6, rel=0.12)
    assert np.corrcoef(np.transpose(ln_k))[0, 1] == pytest.approx(np.exp(-1), abs=0.12)
    assert np.corrcoef(np.transpose(ln_k))[0, 2] == pytest.approx(np.exp(-400 / 150), abs=0.14)


def test_lines_that_cross_are_refused():
    a = fem.Stream("a", np.array([[100.0, 100.0], [300, 300]]), 10.0)
    b = fem.Stream("b", np.array([[100.0, 300.0], [310, 110]]), 10.0)
    with pytest.raises(ValueError, match="crosses"):
        fem.solve(fem.Site(box(400.0, 400), 0.0, 1.0, 50, streams=(a, b)))
