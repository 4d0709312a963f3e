"""Quadratic faces against an independent quadrature: their own shape functions, by many Gauss points."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from fluxmesh import lay_flow
from fluxmesh.field.flow import integrate_flow
from tests.solids import one_group

Array = NDArray[np.float64]
_SQUARE = [(-1, -1), (1, -1), (1, 1), (-1, 1), (0, -1), (1, 0), (0, 1), (-1, 0), (0, 0)]
# points of the reference face in the order of the open VTK file format, and the powers (u, v) that span its functions
FACES = {
    6: ([(0, 0), (1, 0), (0, 1), (0.5, 0), (0.5, 0.5), (0, 0.5)], [(0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2)]),
    8: (_SQUARE[:8], [(i, j) for i in range(3) for j in range(3) if i + j < 4]),
    9: (_SQUARE, [(i, j) for i in range(3) for j in range(3)]),
}


def quadrature(size: int) -> tuple[Array, Array, Array]:
    """Gauss points (u, v) of the reference face and their weights."""
    nodes, weights = np.polynomial.legendre.leggauss(14)
    u, v = (a.ravel() for a in np.meshgrid(nodes, nodes, indexing="ij"))
    w = np.outer(weights, weights).ravel()
    if size == 6:  # the square folded onto the triangle
        u, v = (1 + u) / 2, (1 + v) / 2
        return u, v * (1 - u), w * (1 - u) / 4
    return u, v, w


def power(base: Array, exponent: int) -> Array:
    return base**exponent if exponent >= 0 else 0 * base


def shape(size: int, u: Array, v: Array) -> tuple[Array, Array, Array]:
    """Functions and their derivatives by u and v, shape (n, size), from the monomials that span them."""
    places, powers = FACES[size]
    at = np.array(places, dtype=float)
    solve = np.linalg.inv(np.column_stack([at[:, 0] ** i * at[:, 1] ** j for i, j in powers]))
    value = np.column_stack([u**i * v**j for i, j in powers])
    by_u = np.column_stack([i * power(u, i - 1) * v**j for i, j in powers])
    by_v = np.column_stack([j * u**i * power(v, j - 1) for i, j in powers])
    return value @ solve, by_u @ solve, by_v @ solve


@pytest.mark.parametrize("size", FACES)
@pytest.mark.parametrize("seed", range(3))
def test_all_polynomial_integrals_are_exact(size: int, seed: int) -> None:
    # position, velocity, pressure and density quadratic in (u, v), the area vector of degree 2 (3 on quads):
    # the moment of momentum flux has degree 10 (11 in each direction on quads)
    rng = np.random.default_rng(seed)
    flat = np.array(FACES[size][0], dtype=float)
    points = np.column_stack([flat, 0 * flat[:, 0]]) + 0.15 * rng.standard_normal((size, 3))
    velocity, pressure = rng.standard_normal((size, 3)), rng.standard_normal(size)
    density = 1 + 0.3 * rng.random(size)
    surface = one_group(points, [np.arange(size)], curved=True).surface(closed=False)
    table = integrate_flow(surface, lay_flow(surface, density=density, velocity=velocity, pressure=pressure))

    u, v, w = quadrature(size)
    value, by_u, by_v = shape(size, u, v)
    x = value @ points - table.origin
    normal = np.cross(by_u @ points, by_v @ points) * w[:, None]
    at = value @ velocity
    carried = (value @ density) * (at * normal).sum(axis=1)
    push = -(value @ pressure)[:, None] * normal
    expected = {
        "area_vector": normal,
        "pressure_force": push,
        "moment_of_pressure": np.cross(x, push),
        "mass_flow": carried,
        "momentum_flux": carried[:, None] * at,
        "moment_of_momentum_flux": np.cross(x, carried[:, None] * at),
        "kinetic_energy_flux": carried * (at**2).sum(axis=1) / 2,
        "position_normal": np.einsum("qi,qj->qij", x, normal).reshape(-1, 9),
    }
    for name, terms in expected.items():
        scale = np.abs(terms).sum()
        assert_allclose(table.total(name), terms.sum(axis=0), rtol=0, atol=1e-13 * scale, err_msg=name)
