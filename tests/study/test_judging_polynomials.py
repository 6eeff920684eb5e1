"""Roots, extremes, integrals and movement of quartics, held against numpy's own, quadrature and fine grids."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from judging_builders import SHARES, held, sampled
from scipy.integrate import quad

from loopsim.results import FloatArray, Pieces
from loopsim.study.path import (
    between,
    corners,
    duration,
    farthest,
    highest,
    integral_of_size,
    largest_jump,
    lowest,
    mean,
    mean_square,
    path_of,
    reversals,
    stays_above,
    stays_outside,
    steepest,
    travel,
)
from loopsim.study.polynomials import coefficients, hull, sign_changes, value

numbers = st.integers(-40, 40).map(float)
quartics = st.lists(numbers, min_size=5, max_size=5)


def piece(samples: list[float], length: float = 1.0) -> Pieces:
    return Pieces(("x",), np.array([0.0]), np.array([length]), np.array(samples)[None, :, None])


@given(quartics)
def test_the_quartic_goes_through_its_samples(samples: list[float]) -> None:
    found = coefficients(np.array([samples]))
    assert value(found, SHARES[None, :])[0] == pytest.approx(samples, abs=1e-10)
    # numpy's interpolation as the reference
    fitted = np.polynomial.Polynomial.fit(SHARES, samples, 4).convert()
    dense = np.linspace(0, 1, 17)
    assert value(found, dense[None, :])[0] == pytest.approx(fitted(dense), abs=1e-9)


def test_equal_samples_are_an_exact_constant() -> None:
    assert np.array_equal(coefficients(np.full((1, 5), 328.15)), [[328.15, 0, 0, 0, 0]])


@given(quartics)
def test_the_hull_contains_the_quartic(samples: list[float]) -> None:
    found = coefficients(np.array([samples]))
    low, high = hull(found)
    dense = value(found, np.linspace(0, 1, 101)[None, :])
    assert low[0] <= dense.min() + 1e-9 and dense.max() <= high[0] + 1e-9


@given(st.lists(st.integers(1, 99), min_size=1, max_size=4, unique=True), st.sampled_from([-1.0, 1.0]))
def test_all_roots_of_a_product_of_factors_are_found(percents: list[int], sign: float) -> None:
    roots = sorted(percent / 100 for percent in percents)
    product = sign * np.polynomial.polynomial.polyfromroots(roots)
    padded = np.zeros((1, 5))
    padded[0, : len(product)] = product
    found = sign_changes(padded)[0]
    assert found[~np.isnan(found)] == pytest.approx(roots, abs=1e-6)


def test_a_curve_that_only_touches_does_not_cross() -> None:
    touching = np.polynomial.polynomial.polyfromroots([0.5, 0.5])
    assert np.isnan(sign_changes(-touching[None, :])).all()
    triple = np.polynomial.polynomial.polyfromroots([0.5, 0.5, 0.5])
    assert sign_changes(triple[None, :])[0, 0] == pytest.approx(0.5, abs=1e-5)


@given(quartics)
def test_extremes_against_the_roots_of_the_derivative(samples: list[float]) -> None:
    curve = np.polynomial.Polynomial.fit(SHARES, samples, 4).convert()
    turns = [one.real for one in curve.deriv().roots() if abs(one.imag) < 1e-7 and 0 < one.real < 1]
    wanted = [float(curve(one)) for one in (0.0, *turns, 1.0)]
    path = path_of(piece(samples), "x")
    assert highest(path).value == pytest.approx(max(wanted), abs=1e-8)
    assert lowest(path).value == pytest.approx(min(wanted), abs=1e-8)
    assert abs(farthest(path).value) == pytest.approx(max(abs(one) for one in wanted), abs=1e-8)
    assert float(curve(highest(path).at)) == pytest.approx(max(wanted), abs=1e-7)


@settings(max_examples=40)
@given(quartics)
def test_integrals_against_antiderivative_and_quadrature(samples: list[float]) -> None:
    curve = np.polynomial.Polynomial.fit(SHARES, samples, 4).convert()
    points = sorted(one.real for one in curve.roots() if abs(one.imag) < 1e-6 and 0 < one.real < 1)
    whole, edges = curve.integ(), [0.0, *points, 1.0]
    size = sum(abs(float(whole(b) - whole(a))) for a, b in pairwise(edges))
    path = path_of(piece(samples, 3.0), "x")
    assert integral_of_size(path) == pytest.approx(3.0 * size, abs=1e-6)
    assert mean(path) == pytest.approx(quad(curve, 0, 1)[0], abs=1e-9)
    assert mean_square(path) == pytest.approx(quad(lambda t: curve(t) ** 2, 0, 1)[0], abs=1e-6)


@settings(max_examples=40)
@given(st.lists(quartics, min_size=1, max_size=4), st.integers(1, 30))
def test_time_outside_and_travel_against_a_fine_grid(pieces: list[list[float]], band: int) -> None:
    count = len(pieces)
    made = Pieces(("x",), np.arange(count) * 1.0, np.ones(count), np.array(pieces)[:, :, None])
    path = path_of(made, "x")
    shares = np.linspace(0, 1, 4001)
    grid: FloatArray = np.concatenate([value(coefficients(np.array([one])), shares[None, :])[0] for one in pieces])
    inner = grid.reshape(count, -1)
    outside = (np.abs(0.5 * (inner[:, 1:] + inner[:, :-1])) > band).sum() / 4000
    stays = stays_outside(path, float(band))
    assert sum(stay.end - stay.begin for stay in stays) == pytest.approx(outside, abs=0.01)
    assert travel(path) == pytest.approx(np.abs(np.diff(grid)).sum(), rel=1e-4, abs=1e-9)


def test_the_first_of_equal_extremes_counts() -> None:
    path = path_of(held("x", [0, 3, 1, 3, 0, -3]), "x")
    assert highest(path) == highest(between(path, 0.0, 6.0)) and highest(path).at == 1.0
    assert farthest(path).value == 3.0 and farthest(path).at == 1.0


def test_a_sine_has_its_travel_reversals_and_steepest_rate() -> None:
    period = 2 * math.pi
    path = path_of(sampled({"x": np.sin}, list(np.linspace(0, 2 * period, 81))), "x")
    assert travel(path) == pytest.approx(8.0, rel=1e-5)  # closed form: four amplitudes a period
    assert reversals(path) == 4
    assert steepest(path).value == pytest.approx(1.0, rel=1e-4)  # closed form: amplitude times frequency
    assert integral_of_size(path) == pytest.approx(8.0, rel=1e-5)  # closed form: the integral of |sin| is 2 each half
    assert mean_square(path) == pytest.approx(0.5, rel=1e-5)


@pytest.mark.parametrize(
    ("values", "band", "count"),
    [
        ([0, 1, 0, 1, 0], 0.0, 3),
        ([0, 1, 0, 1, 0], 1.0, 3),  # a movement of the size of the band counts
        ([0, 1, 0, 1, 0], 1.001, 0),
        ([0, 5, 4.5, 9, 0], 1.0, 1),  # the small step back does not count
        ([0, 10, 9.5, 12, 10, 13], 1.0, 2),  # after a small step back the next one counts from the top
        ([10, 0, 0.5, -2, 0, -3], 1.0, 2),
        ([1, 1, 1], 0.0, 0),
        ([328.15] * 3, 0.0, 0),
        ([0, 1, 2, 3], 0.0, 0),
    ],
)
def test_reversals_with_a_dead_zone(values: list[float], band: float, count: int) -> None:
    assert reversals(path_of(held("x", values), "x"), band) == count


def test_rounding_is_no_movement() -> None:
    path = path_of(held("x", [328.15, 328.15 + 6e-14, 328.15, 328.15 + 6e-14]), "x")
    assert reversals(path) == 0 and largest_jump(path).value == 0 and steepest(path).value < 1e-9


def test_a_jump_is_infinitely_steep() -> None:
    point = steepest(path_of(held("x", [0, 0, 2, 2]), "x"))
    assert math.isinf(point.value) and point.at == 2.0


def test_stays_above_a_level() -> None:
    path = path_of(held("x", [1, 0, 1, 1, 0, 1]), "x")
    assert [(stay.begin, stay.end) for stay in stays_above(path, 0.5)] == [(0, 1), (2, 4), (5, 6)]


# ---------------------------------------------------------------- windows
def test_a_window_cuts_exactly_inside_a_piece() -> None:
    path = path_of(sampled({"x": lambda t: t**4}, [0.0, 2.0, 4.0]), "x")
    part = between(path, 1.0, 3.0)
    assert part.first()[0] == pytest.approx(1.0, rel=1e-9) and part.last()[-1] == pytest.approx(81.0, rel=1e-9)
    assert duration(part) == pytest.approx(2.0) and math.isnan(part.before)
    assert integral_of_size(part) == pytest.approx((3**5 - 1) / 5, rel=1e-9)


def test_a_jump_belongs_to_the_window_that_it_begins() -> None:
    path = path_of(held("x", [0, 5, 7]), "x")
    assert corners(between(path, 0.0, 1.0)).tolist() == [0, 0]
    assert corners(between(path, 1.0, 2.0)).tolist() == [0, 5, 5]
    assert highest(between(path, 0.0, 1.0)).value == 0 and lowest(between(path, 1.0, 2.0)).value == 5


def test_a_jump_starts_from_the_value_just_before_it() -> None:
    rising = Pieces(("x",), np.array([0.0, 1.0]), np.ones(2), np.array([SHARES, 5 + 0 * SHARES])[:, :, None])
    part = between(path_of(rising, "x"), 1.0, 2.0)
    assert part.before == 1.0 and travel(part) == 4.0


def test_the_last_instant_belongs_to_the_run_but_not_to_a_window_before_an_event() -> None:
    whole = Pieces(("x",), np.array([0.0, 1.0]), np.array([1.0, 0.0]), np.array([[0.0] * 5, [9.0] * 5])[:, :, None])
    path = path_of(whole, "x")
    assert highest(between(path, 0.0, 1.0, closing=True)).value == 9
    assert highest(between(path, 0.0, 1.0)).value == 0
    assert travel(between(path, 0.0, 1.0, closing=True)) == 9


@given(st.floats(1e-13, 1e-10))
def test_rounded_edges_do_not_let_the_neighbour_in(slip: float) -> None:
    path = path_of(held("x", [0, 5, 0]), "x")
    for low, high in ((1 - slip, 2 + slip), (1 + slip, 2 - slip)):
        part = between(path, low, high)
        assert highest(part).value == 5 and lowest(part).value == 5
