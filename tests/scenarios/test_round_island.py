"""The whole way on a round island, whose heads are known in closed form: the fit, its spread, a case's drawdown.

Phi = N (R^2 - r^2)/4 + (Q/2 pi) ln(R |z - a| / |R^2 - a z|) + Phi_shore (image in a circle, Strack 1989; checks 5).
"""

from dataclasses import replace

import numpy as np
import pytest
from wellshed.scenarios.answering import answer
from wellshed.scenarios.building import build
from wellshed.scenarios.fitting import fit_scenario
from wellshed.scenarios.reading import load
from wellshed.solver.fit import fit

R, K, N, BASE, STAGE, A = 500.0, 12.0, 0.0009, 5.0, 20.0, 180.0
SIDES = 36  # what a polygon of the same area differs by dies away as (r/R)^36


def exact(x, y, rate, k=K, n=N):
    """Head (m) at x, y with a well of some rate (m3/d) at (A, 0)."""
    z = x + 1j * y
    phi = n * (R**2 - abs(z) ** 2) / 4 + rate / (2 * np.pi) * np.log(R * abs(z - A) / abs(R**2 - A * z))
    return BASE + np.sqrt(2 * (phi / k + 0.5 * (STAGE - BASE) ** 2))


def scenario(folder, heads, sd, extra=""):
    angle = 2 * np.pi * np.arange(SIDES) / SIDES
    even = R * np.sqrt(2 * np.pi / SIDES / np.sin(2 * np.pi / SIDES))  # the polygon has the circle's area
    shore = ", ".join(f"[{even * np.cos(a):.6f}, {even * np.sin(a):.6f}]" for a in angle)
    rows = [f"P{i},{x:.4f},{y:.4f},{h:.6f}" for i, (x, y, h) in enumerate(heads)]
    (folder / "levels.csv").write_text("name,x,y,head\n" + "\n".join(rows) + "\n", encoding="utf-8")
    (folder / "scenario.yaml").write_text(
        f"""wellshed: 1
title: A round island
site: {{crs: local, length: m, heights: local benchmark, draw: {{x: [-520, 520], y: [-520, 520]}}}}
aquifer:
  base: {BASE}
  conductivity: {{estimate: 20 m/d, factor: 3}}
  porosity: 0.2
  uneven: none
beyond: {{balance: none}}
wells: {{W: {{at: [{A}, 0], pumps: 200 m3/d, radius: 0.2}}}}
lakes: {{Sea: {{edge: [{shore}], stage: {STAGE}, land: inside}}}}
recharge: {{rain: {{area: everywhere, rate: {{estimate: 0.7 mm/d, factor: 1.5}}}}}}
levels: {{file: levels.csv, error: {sd}}}
{extra}
cases:
  more: [{{change: wells.W.pumps, to: 320 m3/d}}]
  off: [{{remove: wells.W}}]
  drier: [{{change: recharge.rain.rate, by: x0.8}}]
questions: [{{water_table: {{cases: [more]}}}}]
""",
        encoding="utf-8",
    )
    return load(folder / "scenario.yaml")


def places(count, seed):
    rng = np.random.default_rng(seed)
    r, a = R * np.sqrt(rng.uniform(0.01, 0.9, count)), rng.uniform(0, 2 * np.pi, count)
    return r * np.cos(a), r * np.sin(a)


@pytest.fixture(scope="module")
def fitted(tmp_path_factory):
    """Levels without error: the truth must come out, but for the polygon in the circle's place."""
    x, y = places(16, 4)
    return answer(scenario(tmp_path_factory.mktemp("exact"), zip(x, y, exact(x, y, 200.0), strict=True), 0.01))


def test_levels_of_the_closed_form_give_back_its_numbers(fitted):
    k, n = (fitted.fitted.result.value(i) for i in range(2))
    assert k == pytest.approx(K, rel=5e-3)
    assert n == pytest.approx(N, rel=5e-3)
    x, y = places(60, 9)
    assert fitted.flow.head(x, y) == pytest.approx(exact(x, y, 200.0), abs=2e-3)


@pytest.mark.parametrize(("case", "rate", "rain"), [("more", 320.0, 1.0), ("off", 0.0, 1.0), ("drier", 200.0, 0.8)])
def test_cases_are_those_of_the_closed_form(fitted, case, rate, rain):
    done = fitted.cases[case]
    x, y = places(60, 9)
    assert done.solution.flow.head(x, y) == pytest.approx(exact(x, y, rate, n=N * rain), abs=3e-3)
    for level in fitted.scenario.levels:
        fall = float(exact(level.x, level.y, 200.0) - exact(level.x, level.y, rate, n=N * rain))
        assert done.drawdown[level.name] == pytest.approx(fall, abs=3e-3)
    shore = -N * np.pi * R**2 * (1 - rain) + (200.0 - rate)  # what the shore takes less
    assert done.exchange_change["Sea"] == pytest.approx(-shore, rel=5e-3)


def test_spreads_hold_the_truth_as_often_as_they_say(tmp_path):
    # 60 sets of readings with independent errors: 90% intervals of two numbers, 120 in all; binomial sd 3.3 about 108
    x, y = places(14, 21)
    rng = np.random.default_rng(77)
    read = scenario(tmp_path, zip(x, y, exact(x, y, 200.0), strict=True), 0.05)
    model = build(read)
    first = fit_scenario(read, model)
    even = np.zeros((x.size, x.size))
    held = 0
    for _ in range(60):
        readings = replace(model.readings, head=exact(x, y, 200.0) + rng.normal(0, 0.05, x.size))
        result = fit(first.solution.state.system, model.inputs, model.parameters, readings, even)
        for i, value in enumerate((K, N)):
            low, high = result.interval(i)
            held += low <= value <= high
    assert 98 <= held <= 118  # three sds
