"""Nodes and weights of integration, against scipy and numpy."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import roots_legendre

from monitor.methods.quadrature import gauss_legendre, upto


@pytest.mark.parametrize("n", [1, 2, 3, 5, 16, 33, 64, 149, 200, 333, 500])
def test_nodes_and_weights_are_those_of_scipy(n: int) -> None:
    nodes, weights = gauss_legendre(n)
    expected_nodes, expected_weights = roots_legendre(n)
    np.testing.assert_allclose(nodes, expected_nodes, rtol=0, atol=1e-15)
    np.testing.assert_allclose(weights, expected_weights, rtol=1e-9)


@pytest.mark.parametrize("n", [4, 40, 400, 2000])
def test_polynomials_up_to_twice_the_number_of_nodes_are_integrated_exactly(n: int) -> None:
    nodes, weights = gauss_legendre(n)
    degree = 2 * n - 2
    assert weights @ nodes**degree == pytest.approx(2 / (degree + 1), rel=1e-10)


def test_nodes_are_shared_and_cannot_be_written_to() -> None:
    with pytest.raises(ValueError, match="read-only"):
        gauss_legendre(8)[0][0] = 0.0


@pytest.mark.parametrize("n", [1, 2, 5, 16])
def test_parts_are_integrated_exactly_up_to_the_number_of_nodes(n: int) -> None:
    nodes, weights = gauss_legendre(n)
    ends = np.array([-1.0, -0.7, 0.0, 0.4, 1.0])
    of_parts = upto(n, ends)
    for degree in range(n):
        expected = (ends ** (degree + 1) - (-1.0) ** (degree + 1)) / (degree + 1)
        np.testing.assert_allclose(of_parts @ nodes**degree, expected, atol=1e-14)
    np.testing.assert_allclose(of_parts[-1], weights, rtol=1e-12)


def test_parts_of_a_smooth_function_are_those_of_scipy() -> None:
    ends = np.linspace(-1, 1, 7)
    found = upto(16, ends) @ np.exp(-(gauss_legendre(16)[0] ** 2))
    expected = [quad(lambda x: np.exp(-x * x), -1, end)[0] for end in ends]
    np.testing.assert_allclose(found, expected, atol=1e-12)
