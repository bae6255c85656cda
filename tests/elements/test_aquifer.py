"""From head to potential and back (Strack 1989, chapter 8; checks 1h)."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from wellshed.elements.aquifer import Aquifer

conductivities = st.floats(1e-3, 1e4)
bases = st.floats(-500, 500)
thicknesses = st.one_of(st.none(), st.floats(0.5, 300))
depths = st.floats(1e-3, 500)


def aquifer_of(k, base, thickness):
    return Aquifer(k, base, None if thickness is None else base + thickness)


@pytest.mark.parametrize(("head", "potential"), [(9, 607.5), (12, 1080), (17.5, 2070)])
def test_published_potentials(head, potential):
    # Phi = K B h - K B^2/2 from h = B on, K h^2/2 below (Strack 1989; Grubb 1993)
    aquifer = Aquifer(15, 0, 12)
    assert float(aquifer.potential(head)) == pytest.approx(potential, rel=1e-12)
    assert float(aquifer.head(potential)) == pytest.approx(head, rel=1e-12)


@given(conductivities, bases, thicknesses, depths)
def test_round_trip(k, base, thickness, depth):
    aquifer = aquifer_of(k, base, thickness)
    head = base + depth
    assert float(aquifer.head(aquifer.potential(head))) == pytest.approx(head, abs=1e-9)


@given(conductivities, bases, thicknesses, depths)
def test_slope_is_the_transmissivity(k, base, thickness, depth):
    aquifer = aquifer_of(k, base, thickness)
    head = base + depth
    h = 1e-4 * depth
    slope = float(aquifer.potential(head + h) - aquifer.potential(head - h)) / (2 * h)
    expected = k * min(depth, aquifer.thickness)
    assert slope == pytest.approx(expected, rel=2e-4, abs=1e-6)
    assert float(aquifer.saturated_thickness(aquifer.potential(head))) == pytest.approx(expected / k, rel=1e-6)


@given(conductivities, bases, thicknesses, st.floats(-50, 500), st.floats(-50, 500))
def test_the_potential_rises_with_the_head(k, base, thickness, one, other):
    aquifer = aquifer_of(k, base, thickness)
    low, high = sorted((one, other))
    assert float(aquifer.potential(base + low)) <= float(aquifer.potential(base + high))


def test_dry_ground_is_a_negative_potential_and_the_base():
    aquifer = Aquifer(10, 5, 20)
    assert float(aquifer.potential(3)) == pytest.approx(-20)
    assert np.array_equal(aquifer.head([-20.0, 0.0]), [5, 5])
    assert np.array_equal(aquifer.saturated_thickness([-20.0, 0.0]), [0, 0])


@pytest.mark.parametrize("top", [None, 12.0])
def test_change_of_the_potential_with_the_ground(top):
    aquifer, heads, h = Aquifer(15, 2, top), np.array([5.0, 11.0, 20.0]), 1e-5
    for name in ("conductivity", "base") + (("top",) if top else ()):
        values = {"conductivity": 15, "base": 2, "top": top}
        moved = [Aquifer(**(values | {name: values[name] + s * h})).potential(heads) for s in (1, -1)]
        assert aquifer.potential_change(heads, **{name: 1.0}) == pytest.approx(
            (moved[0] - moved[1]) / (2 * h), rel=1e-6, abs=1e-6
        )


@pytest.mark.parametrize(
    ("values", "word"),
    [
        ((0, 0), "conductivity"),
        ((np.nan, 0), "conductivity"),
        ((10, 5, 5), "top"),
        ((10, 5, None, 0), "porosity"),
        ((10, 5, None, 1), "porosity"),
    ],
)
def test_values_without_meaning_are_refused(values, word):
    with pytest.raises(ValueError, match=word):
        Aquifer(*values)
