"""Steady plane flow past a cylinder in a channel by quadratic velocities and linear pressure on curved quadrilaterals.

The benchmark 2D-1 of M. Schaefer and S. Turek, "Benchmark computations of laminar flow around a cylinder", in Flow
Simulation with High-Performance Computers II, Notes on Numerical Fluid Mechanics 52 (1996) 547-566. The weak form is

    integral of rho w . (u . grad u) + mu grad w : grad u - p div w - q div u  =  0,

the inlet carries a parabola, walls and cylinder hold the fluid, at the outlet mu du/dn - p n = 0. Velocity and
geometry are biquadratic, pressure is bilinear (C. Taylor, P. Hood, Computers & Fluids 1, 1973).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sparse
import scipy.sparse.linalg as linalg
from numpy.typing import NDArray
from skfem import Basis, BilinearForm, ElementQuad1, ElementQuad2, ElementVector, FacetBasis, MeshQuad, MeshQuad2, asm
from skfem.helpers import ddot, div, dot, grad

__all__ = [
    "CENTRE",
    "DENSITY",
    "DIAMETER",
    "HEIGHT",
    "MEAN_SPEED",
    "PUBLISHED",
    "VISCOSITY",
    "CylinderFlow",
    "coefficients",
    "solve_cylinder",
]

Array = NDArray[np.float64]

LENGTH, HEIGHT = 2.2, 0.41  # m
CENTRE, DIAMETER = np.array([0.2, 0.2]), 0.1  # m
DENSITY, VISCOSITY = 1.0, 1e-3  # kg/m^3, Pa s
MEAN_SPEED = 0.2  # m/s: Reynolds number 20
# G. Nabh 1998; V. John, G. Matthies, Int. J. Numer. Methods Fluids 37 (2001) 885-903
PUBLISHED = {"drag": 5.57953523384, "lift": 0.010618948146, "pressure": 0.11752016697}  # -, -, Pa

_STEPS, _TOLERANCE = 12, 1e-12  # of Newton's method; of the residual, in N/m
_GRADING = 12.0  # how much wider the outermost ring of cells is than the innermost


@dataclass(frozen=True, eq=False)
class CylinderFlow:
    """A solution.

    Attributes
    ----------
    mesh : MeshQuad2
        Curved quadrilaterals; the first ``around * rings`` of them lie in rings round the cylinder, inner ones first.
    around, rings : int
        Cells round the cylinder, and rings of them.
    velocity : Basis
        Biquadratic scalar space: its degrees of freedom are the nodes of the mesh.
    u : ndarray, shape (2, n_nodes), float64
        Velocity at the nodes, m/s.
    p : ndarray, shape (n_nodes,), float64
        Pressure at the nodes (bilinear within a cell), Pa.
    residual : ndarray, shape (2, n_nodes), float64
        Of the momentum equation; on the cylinder its sum is the force of the cylinder on the fluid, N/m.
    """

    mesh: MeshQuad2
    around: int
    rings: int
    velocity: Basis
    u: Array
    p: Array
    residual: Array

    @property
    def nodes(self) -> Array:
        """Places of the nodes, shape (n_nodes, 2), m."""
        return np.asarray(self.mesh.doflocs.T)

    @property
    def wall_nodes(self) -> NDArray[np.int64]:
        """Nodes on the cylinder, in order round it, each facet's middle between its ends."""
        at = np.linalg.norm(self.nodes - CENTRE, axis=1) < 0.5 * DIAMETER * (1 + 1e-6)
        found = np.flatnonzero(at)
        turned = self.nodes[found] - CENTRE
        return found[np.argsort(np.mod(np.arctan2(turned[:, 1], turned[:, 0]) + np.pi / 4, 2 * np.pi))]

    def cells(self) -> NDArray[np.int64]:
        """Nodes of each cell, shape (n_cells, 9): corners, middles of sides, middle."""
        return np.asarray(self.velocity.element_dofs.T, dtype=np.int64)

    def stress(self) -> Array:
        """Viscous stress xx, yy, xy at the nodes, shape (n_nodes, 3), Pa.

        The slopes of each cell are taken at its 2 x 2 Gauss points, where those of biquadratic elements are most
        exact (Barlow points: J. Barlow, Int. J. Numer. Methods Eng. 10, 1976), extended bilinearly to its nodes, and
        averaged there over the cells that meet.
        """
        gauss = np.array([(1 - 3**-0.5) / 2, (1 + 3**-0.5) / 2])
        at = np.array([[a, b] for b in gauss for a in gauss]).T
        basis = Basis(self.mesh, ElementQuad2(), quadrature=(at, np.full(4, 0.25)))
        slope = np.stack([np.asarray(basis.interpolate(part).grad) for part in self.u])  # i, j, cell, point
        stress = VISCOSITY * np.stack([2 * slope[0, 0], 2 * slope[1, 1], slope[0, 1] + slope[1, 0]])
        local = np.asarray(ElementQuad2().doflocs)  # in the unit square
        share = [
            np.stack([(gauss[1] - x) / (gauss[1] - gauss[0]), (x - gauss[0]) / (gauss[1] - gauss[0])]) for x in local.T
        ]
        weights = np.einsum("bn,an->nba", share[1], share[0]).reshape(9, 4)
        values = np.einsum("ceq,nq->ecn", stress, weights)
        cells = self.cells()
        count = np.bincount(cells.ravel(), minlength=self.nodes.shape[0])
        sums = [np.bincount(cells.ravel(), values[:, c].ravel(), minlength=count.size) for c in range(3)]
        return np.column_stack(sums) / count[:, None]


def solve_cylinder(cells: int) -> CylinderFlow:
    """Solve the benchmark by Newton's method.

    Parameters
    ----------
    cells : int
        Cells on each of the four sides round the cylinder; all others follow from it.

    Returns
    -------
    CylinderFlow
        The solution.
    """
    mesh, around, rings = _mesh(cells)
    vector = Basis(mesh, ElementVector(ElementQuad2()), intorder=6)
    scalar = vector.with_element(ElementQuad2())
    pressure = vector.with_element(ElementQuad1())
    x, y = vector.doflocs
    component = np.empty(vector.N, np.int64)
    component[_component(vector, 0)], component[_component(vector, 1)] = 0, 1
    held = vector.get_dofs(mesh.boundary_facets()).all()
    free_end = np.abs(x[held] - LENGTH) < 1e-9
    held = held[~free_end | (y[held] < 1e-9) | (y[held] > HEIGHT - 1e-9)]
    state = np.zeros(vector.N + pressure.N)
    inlet = held[(np.abs(x[held]) < 1e-9) & (component[held] == 0)]
    state[inlet] = 6.0 * MEAN_SPEED * y[inlet] * (HEIGHT - y[inlet]) / HEIGHT**2
    free = np.setdiff1d(np.arange(state.size), held)
    viscous = VISCOSITY * asm(_stiffness, vector)
    coupling = asm(_divergence, vector, pressure)
    linear = sparse.bmat([[viscous, -coupling.T], [-coupling, None]], format="csr")
    for _ in range(_STEPS):
        now = vector.interpolate(state[: vector.N])
        transport, tangent = asm(_transport, vector, w=now), asm(_tangent, vector, w=now)
        residual = linear @ state
        residual[: vector.N] += DENSITY * (transport @ state[: vector.N])
        if np.abs(residual[free]).max() < _TOLERANCE:
            break
        whole = linear + sparse.bmat(
            [[DENSITY * (transport + tangent), None], [None, sparse.csr_matrix((pressure.N, pressure.N))]], format="csr"
        )
        matrix = whole[free][:, free].tocsc()
        # an ordering for symmetric patterns that keeps to the diagonal is five times quicker; Newton mends its rounding
        factors = linalg.splu(
            matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=1e-3, options={"SymmetricMode": True}
        )
        state[free] -= factors.solve(residual[free])
    else:
        raise SystemExit("Newton's method did not come to rest")
    u = np.stack([state[: vector.N][_component(vector, k)] for k in range(2)])
    parts = np.stack([residual[: vector.N][_component(vector, k)] for k in range(2)])
    return CylinderFlow(mesh, around, rings, scalar, u, _at_nodes(scalar, pressure, state[vector.N :]), parts)


def coefficients(flow: CylinderFlow) -> dict[str, dict[str, float]]:
    """Return drag and lift coefficients and the pressure difference of a solution.

    Parameters
    ----------
    flow : CylinderFlow
        The solution.

    Returns
    -------
    dict
        ``residual``: drag and lift from the residual of the discrete momentum equation at the cylinder (the
        form that converges fastest); ``surface``: the same by quadrature of pressure and velocity slopes over it;
        ``points``: p(0.15, 0.2) - p(0.25, 0.2), Pa.
    """
    scale = 2.0 / (DENSITY * MEAN_SPEED**2 * DIAMETER)
    wall = flow.wall_nodes
    drag, lift = -scale * flow.residual[:, wall].sum(axis=1)
    facets = flow.mesh.facets_satisfying(
        lambda x: np.linalg.norm(x - CENTRE[:, None], axis=0) < 0.51 * DIAMETER, boundaries_only=True
    )
    basis = FacetBasis(flow.mesh, ElementQuad2(), facets=facets, intorder=6)
    corners = FacetBasis(flow.mesh, ElementQuad1(), facets=facets, intorder=6)
    slope = np.stack([np.asarray(basis.interpolate(part).grad) for part in flow.u])
    # bilinear: its degrees of freedom are the corners
    pressure = np.asarray(corners.interpolate(flow.p[flow.velocity.nodal_dofs[0]]))
    normal = np.asarray(basis.normals)  # out of the fluid
    traction = np.einsum("ij...,j...->i...", VISCOSITY * (slope + slope.swapaxes(0, 1)), normal) - pressure * normal
    direct = -scale * (traction * basis.dx).sum(axis=(1, 2))
    ends = [np.argmin(np.linalg.norm(flow.nodes - [x, 0.2], axis=1)) for x in (0.15, 0.25)]
    return {
        "residual": {"drag": float(drag), "lift": float(lift)},
        "surface": {"drag": float(direct[0]), "lift": float(direct[1])},
        "points": {"pressure": float(flow.p[ends[0]] - flow.p[ends[1]])},
    }


def _component(vector: Basis, component: int) -> NDArray[np.int64]:
    """Degrees of freedom of one component of a vector space, in the order of the scalar space."""
    found = np.empty(vector.N // 2, np.int64)
    found[vector.with_element(ElementQuad2()).element_dofs] = vector.element_dofs[component::2]
    return found


def _at_nodes(scalar: Basis, pressure: Basis, values: Array) -> Array:
    """Bilinear pressure at all nine nodes of each cell."""
    corners = values[pressure.element_dofs]  # 4, cells
    found = np.empty(scalar.N)
    sides = [corners[k] / 2 + corners[(k + 1) % 4] / 2 for k in range(4)]
    found[scalar.element_dofs] = np.stack([*corners, *sides, corners.mean(axis=0)])
    return found


def _mesh(cells: int) -> tuple[MeshQuad2, int, int]:
    """Rings of cells that turn from the cylinder to a square, and the rest of the channel behind it."""
    around, rings, behind = 4 * cells, round(1.25 * cells), round(1.5 * cells)
    share = (_GRADING ** np.linspace(0, 1, rings + 1) - 1) / (_GRADING - 1)
    # corner (j, i): ring j, i-th round; a quarter turn is one side of the square
    turn = np.arange(around) / cells
    corners = np.stack([_place(np.full(around, s), turn) for s in share])
    number = np.arange((rings + 1) * around).reshape(rings + 1, around)
    following = np.roll(number, -1, axis=1)
    ring_cells = np.stack([number[:-1], number[1:], following[1:], following[:-1]], axis=-1).reshape(-1, 4)
    # the right side of the square is that of the first quarter turn
    side = number[-1, : cells + 1]
    steps = np.cumsum(1.05 ** (np.arange(behind) * 24.0 / cells))
    columns = HEIGHT + (LENGTH - HEIGHT) * steps / steps[-1]
    first = number.size
    extra = first + np.arange(behind * (cells + 1)).reshape(behind, cells + 1)
    rows = np.concatenate([side[None], extra])
    places = np.stack([np.repeat(columns, cells + 1), np.tile(corners[-1, : cells + 1, 1], behind)], axis=1)
    block = np.stack([rows[:-1, :-1], rows[1:, :-1], rows[1:, 1:], rows[:-1, 1:]], axis=-1).reshape(-1, 4)
    points = np.concatenate([corners.reshape(-1, 2), places])
    every = np.concatenate([ring_cells, block])
    mesh = MeshQuad2.from_mesh(MeshQuad(points.T.copy(), every.T.copy()))
    # sides and middles of the cells in the rings go where the corners' map puts them
    node = Basis(mesh, ElementQuad2()).element_dofs[:, : ring_cells.shape[0]]
    j, i = np.divmod(np.asarray(mesh.t[:, : ring_cells.shape[0]]), around)
    s, t = share[j], i / cells
    t = np.where(t < t.max(axis=0) - 2.0, t + 4.0, t)  # round the end
    mids_s = [s.mean(axis=0) if k == 4 else (s[k] + s[(k + 1) % 4]) / 2 for k in range(5)]
    mids_t = [t.mean(axis=0) if k == 4 else (t[k] + t[(k + 1) % 4]) / 2 for k in range(5)]
    places_of = mesh.doflocs.copy()
    for k in range(5):
        places_of[:, node[4 + k]] = _place(mids_s[k], mids_t[k]).T
    return MeshQuad2(places_of, mesh.t), around, rings


def _place(share: Array, turn: Array) -> Array:
    """Place at a share of the way from the cylinder to the square, a quarter turn being one side."""
    angle = (turn - 0.5) * np.pi / 2
    circle = CENTRE + 0.5 * DIAMETER * np.column_stack([np.cos(angle), np.sin(angle)])
    corner = np.array([[HEIGHT, 0.0], [HEIGHT, HEIGHT], [0.0, HEIGHT], [0.0, 0.0], [HEIGHT, 0.0]])
    whole = np.floor(np.mod(turn, 4.0)).astype(int)
    part = (np.mod(turn, 4.0) - whole)[:, None]
    square = (1 - part) * corner[whole] + part * corner[whole + 1]
    return np.asarray((1 - share[:, None]) * circle + share[:, None] * square)


@BilinearForm
def _stiffness(u: Any, v: Any, w: Any) -> Any:
    return ddot(grad(u), grad(v))


@BilinearForm
def _divergence(u: Any, q: Any, w: Any) -> Any:
    return div(u) * q


@BilinearForm
def _transport(u: Any, v: Any, w: Any) -> Any:
    """The flow w carries u."""
    return dot(np.einsum("ij...,j...->i...", grad(u), w["w"]), v)


@BilinearForm
def _tangent(u: Any, v: Any, w: Any) -> Any:
    """The flow u carries w."""
    return dot(np.einsum("ij...,j...->i...", w["w"].grad, u), v)
