"""Steady incompressible flow in the manifold by Taylor-Hood tetrahedra, and its reaction on the wall.

Everything here is dimensionless: lengths in inlet diameters, speeds in inlet mean
speeds, pressure and stress in density times speed squared. The weak form is

    integral of w . (u . grad u) + grad w : grad u / Re - p div w  =  boundary term,

with quadratic velocity and linear pressure on straight tetrahedra (C. Taylor, P. Hood,
Computers & Fluids 1, 1973). Walls hold the fluid; the inlet carries the developed profile
of its own section; at the outlets -p n + (du/dn) / Re = 0, which lets a developed
flow leave undisturbed (J. Heywood, R. Rannacher, S. Turek, "Artificial boundaries and flux and
pressure conditions", Int. J. Numer. Methods Fluids 22, 1996).
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.sparse as sparse
import scipy.sparse.linalg as linalg
from numpy.typing import NDArray
from skfem import Basis, BilinearForm, ElementTetP1, ElementTetP2, FacetBasis, MeshTet, asm
from skfem.helpers import dot, grad

__all__ = ["Domain", "Flow", "add_midpoints", "head_load", "port_quadrature", "solve", "wall_reaction"]

Array = NDArray[np.float64]
NEWTON_TOLERANCE = 1e-7  # of the residual, in density times speed squared times diameter squared
LINEAR_TOLERANCE = 3e-3  # of each linear solve: the steps still converge to NEWTON_TOLERANCE


@dataclass(frozen=True, eq=False)
class Domain:
    """The mesh, its function spaces and boundaries.

    Attributes
    ----------
    mesh : MeshTet
        Straight tetrahedra.
    velocity, pressure : Basis
        Quadratic and linear scalar spaces with one quadrature, exact for the convective term.
    ports : dict of str to ndarray of int
        Boundary facets of each port.
    inlet : str
        The port whose velocity is given.
    wall_nodes, rim_nodes : ndarray of int
        Velocity nodes on the wall, its rims with the ports included; those of them on the inlet.
    """

    mesh: MeshTet
    velocity: Basis
    pressure: Basis
    ports: dict[str, NDArray[np.int64]]
    inlet: str
    wall: NDArray[np.int64]
    wall_nodes: NDArray[np.int64]
    rim_nodes: NDArray[np.int64]

    @classmethod
    def build(cls, mesh: MeshTet, ports: dict[str, NDArray[np.int64]], inlet: str) -> Domain:
        """Lay the function spaces on a mesh whose port facets are known; all others are wall."""
        velocity = Basis(mesh, ElementTetP2(), intorder=5)
        pressure = velocity.with_element(ElementTetP1())
        wall = np.setdiff1d(mesh.boundary_facets(), np.concatenate(list(ports.values())))
        wall_nodes = velocity.get_dofs(wall).all()
        rim_nodes = np.intersect1d(wall_nodes, velocity.get_dofs(ports[inlet]).all())
        return cls(mesh, velocity, pressure, ports, inlet, wall, wall_nodes, rim_nodes)

    def facet_basis(self, facets: NDArray[np.int64], quadrature: tuple[Array, Array] | None = None) -> FacetBasis:
        """Quadratic space on some boundary facets; the default rule is exact for the momentum flux."""
        if quadrature is not None:
            return FacetBasis(self.mesh, ElementTetP2(), facets=facets, quadrature=quadrature)
        return FacetBasis(self.mesh, ElementTetP2(), facets=facets, intorder=7)


@dataclass(frozen=True, eq=False)
class Flow:
    """A solution: velocity, shape (3, nodes), at corners and mid-edges; pressure, shape (corners,)."""

    velocity: Array
    pressure: Array
    reynolds: float
    steps: int


def add_midpoints(domain: Domain, corner_values: Array) -> Array:
    """Extend linear corner values to all velocity nodes: exact, since the edges are straight."""
    nodes = np.zeros(domain.velocity.N)
    nodes[domain.velocity.nodal_dofs[0]] = corner_values
    nodes[domain.velocity.edge_dofs[0]] = corner_values[domain.mesh.edges].mean(axis=0)
    return nodes


def solve(domain: Domain, reynolds: float, flow_rate: float, guess: Array | None, say: Callable[[str], None]) -> Flow:
    """Solve by Newton's method, each step by preconditioned GMRES.

    Without a guess, shape (4, nodes), velocity and pressure, two fixed-point
    steps (convecting velocity held) come first.
    """
    system = _System(domain, reynolds)
    velocity, pressure = _first_guess(domain, guess)
    fixed = np.union1d(domain.wall_nodes, domain.velocity.get_dofs(domain.ports[domain.inlet]).all())
    velocity[:, fixed] = 0.0
    velocity += _inlet_velocity(domain, flow_rate)
    free = np.setdiff1d(np.arange(domain.velocity.N), fixed)
    preconditioner = None
    for step in range(20):
        start = time.perf_counter()
        transport = system.transport(velocity)
        momentum, continuity = system.residual(transport, velocity, pressure)
        size = float(np.hypot(np.linalg.norm(momentum[:, free]), np.linalg.norm(continuity)))
        if size <= NEWTON_TOLERANCE:
            return Flow(velocity, pressure, reynolds, step)
        newton = guess is not None or step >= 2
        tangent = system.tangent(velocity, free) if newton else None
        transport = transport[free][:, free]
        if preconditioner is None or (guess is None and step <= 2):
            preconditioner = None  # free the old factors first
            preconditioner = _Preconditioner(transport, [g[free] for g in system.gradient], system.mass[free])
        right = -np.concatenate([momentum[:, free].ravel(), continuity])
        change, iterations = _solve_linear(transport, tangent, preconditioner, right)
        velocity[:, free] += change[: 3 * free.size].reshape(3, -1)
        pressure += change[3 * free.size :]
        kind = "Newton" if newton else "fixed point"
        seconds = time.perf_counter() - start
        say(f"  step {step + 1} ({kind}): residual {size:.2e}, {iterations} iterations, {seconds:.1f} s")
    raise SystemExit("the flow did not converge in 20 steps: lower the Reynolds number or refine the mesh")


class _System:
    """Assembled parts of the discrete equations."""

    def __init__(self, domain: Domain, reynolds: float) -> None:
        self.domain = domain
        self.viscous = asm(_stiffness, domain.velocity).tocsr() / reynolds
        self.mass = asm(_mass, domain.velocity).diagonal()
        self.gradient = [asm(_divergence(k), domain.pressure, domain.velocity).tocsr() for k in range(3)]

    def transport(self, velocity: Array) -> Any:
        """Viscous and convective terms for one component, the convecting velocity held."""
        basis = self.domain.velocity
        field = np.stack([np.asarray(basis.interpolate(component)) for component in velocity])
        return self.viscous + asm(_convection, basis, field=field).tocsr()

    def tangent(self, velocity: Array, free: NDArray[np.int64]) -> list[list[Any]]:
        """Derivative of the convective term by the convecting velocity, component by component."""
        basis = self.domain.velocity
        slopes = [basis.interpolate(component).grad for component in velocity]
        return [
            [asm(_weighted_mass, basis, field=slopes[k][j]).tocsr()[free][:, free] for j in range(3)] for k in range(3)
        ]

    def residual(self, transport: Any, velocity: Array, pressure: Array) -> tuple[Array, Array]:
        """Residual of momentum, shape (3, nodes), without boundary conditions, and of continuity."""
        momentum = np.stack([transport @ velocity[k] - self.gradient[k] @ pressure for k in range(3)])
        continuity = -sum(self.gradient[k].T @ velocity[k] for k in range(3))
        return momentum, np.asarray(continuity)


@BilinearForm
def _stiffness(u: Any, v: Any, w: Any) -> Any:
    return dot(grad(u), grad(v))


@BilinearForm
def _mass(u: Any, v: Any, w: Any) -> Any:
    return u * v


@BilinearForm
def _convection(u: Any, v: Any, w: Any) -> Any:
    return dot(w["field"], grad(u)) * v


@BilinearForm
def _weighted_mass(u: Any, v: Any, w: Any) -> Any:
    return w["field"] * u * v


@BilinearForm
def _surface_stiffness(u: Any, v: Any, w: Any) -> Any:
    return dot(grad(u), grad(v)) - dot(grad(u), w.n) * dot(grad(v), w.n)


def _divergence(axis: int) -> BilinearForm:
    return BilinearForm(lambda p, v, w: p * grad(v)[axis])


def _first_guess(domain: Domain, guess: Array | None) -> tuple[Array, Array]:
    if guess is None:
        return np.zeros((3, domain.velocity.N)), np.zeros(domain.pressure.N)
    return guess[:3].copy(), guess[3][domain.velocity.nodal_dofs[0]]


def _inlet_velocity(domain: Domain, flow_rate: float) -> Array:
    """Developed laminar flow through the inlet section: the plane Poisson equation on its own facets."""
    basis = domain.facet_basis(domain.ports[domain.inlet])
    inside = np.setdiff1d(basis.get_dofs(domain.ports[domain.inlet]).all(), domain.rim_nodes)
    stiffness = asm(_surface_stiffness, basis).tocsr()[inside][:, inside]
    load = asm(_mass, basis) @ np.ones(basis.N)
    profile = np.zeros(basis.N)
    profile[inside] = linalg.spsolve(stiffness.tocsc(), load[inside])
    normal = np.asarray(basis.normals)[:, 0, 0]
    return np.asarray(-normal[:, None] * profile * flow_rate / (load @ profile))


class _Preconditioner:
    """Block-triangular approximate inverse, kept over several Newton steps.

    Velocity: the sparse factors of the one-component transport matrix. Pressure: least-squares
    commutator (H. Elman et al., "Block preconditioners based on approximate commutators",
    SIAM J. Sci. Comput. 27, 2006).
    """

    def __init__(self, transport: Any, gradient: list[Any], mass: Array) -> None:
        self.transport = transport
        self.gradient = gradient
        self.divergence = [part.T.tocsr() for part in gradient]
        self.weight = 1 / mass
        laplacian = sum(d @ sparse.diags(self.weight) @ g for d, g in zip(self.divergence, gradient))
        options = {"permc_spec": "MMD_AT_PLUS_A", "diag_pivot_thresh": 0.0, "options": {"SymmetricMode": True}}
        self.velocity_factors = linalg.splu(transport.tocsc(), **options)
        self.pressure_factors = linalg.splu(laplacian.tocsc(), **options)

    def apply(self, x: Array) -> Array:
        n = self.weight.size
        f, g = x[: 3 * n].reshape(3, n), x[3 * n :]
        q = self.pressure_factors.solve(g)
        middle = sum(
            d @ (self.weight * (self.transport @ (self.weight * (e @ q))))
            for d, e in zip(self.divergence, self.gradient)
        )
        p = -self.pressure_factors.solve(middle)
        right = np.stack([part + e @ p for part, e in zip(f, self.gradient)], axis=1)
        return np.concatenate([self.velocity_factors.solve(right).T.ravel(), p])


def _solve_linear(
    transport: Any, tangent: list[list[Any]] | None, preconditioner: _Preconditioner, right: Array
) -> tuple[Array, int]:
    """Solve one linear step by GMRES; return the change and the number of iterations."""
    n = transport.shape[0]

    def apply(x: Array) -> Array:
        u, p = x[: 3 * n].reshape(3, n), x[3 * n :]
        momentum = np.stack([transport @ u[k] - preconditioner.gradient[k] @ p for k in range(3)])
        if tangent is not None:
            for k in range(3):
                for j in range(3):
                    momentum[k] += tangent[k][j] @ u[j]
        continuity = -sum(d @ part for d, part in zip(preconditioner.divergence, u))
        return np.concatenate([momentum.ravel(), np.asarray(continuity)])

    count = 0

    def tick(_: float) -> None:
        nonlocal count
        count += 1

    shape = (right.size, right.size)
    # preconditioned from the right, so that the tolerance is one of the residual itself
    unknown, failed = linalg.gmres(
        linalg.LinearOperator(shape, lambda x: apply(preconditioner.apply(x)), dtype=float),
        right,
        rtol=LINEAR_TOLERANCE,
        restart=150,
        maxiter=3,
        callback=tick,
        callback_type="pr_norm",
    )
    if failed:
        raise SystemExit("a linear solve did not converge")
    return preconditioner.apply(unknown), count


def wall_reaction(domain: Domain, flow: Flow, *, whole_inlet: bool = False) -> tuple[Array, Array]:
    """Force and moment about the origin of the flow on the wall, from the assembled residual.

    The momentum residual is tested with the field w that is 1 at every velocity node
    of the wall, rims included, and 0 at all others. By the weak form this is the
    traction on the fluid over the wall plus the traction over the ports weighted by
    w, which lives there on the ring of faces along the rim. At the outlets that
    weighted traction is 0 by the natural condition; at the inlet it is taken by quadrature
    of the finite-element stress and subtracted (leaving the ring out would cost some per cent). For the
    moment w is the rotation about the axis instead of 1: linear, so the nodes carry it exactly.

    With ``whole_inlet`` w is 1 at all nodes of the inlet as well and the whole inlet traction is
    subtracted: the same force in the limit, so the difference shows how well it is known.
    """
    system = _System(domain, flow.reynolds)
    residual, _ = system.residual(system.transport(flow.velocity), flow.velocity, flow.pressure)
    inlet = domain.ports[domain.inlet]
    on_inlet = domain.velocity.get_dofs(inlet).all() if whole_inlet else domain.rim_nodes
    nodes = np.union1d(domain.wall_nodes, on_inlet)
    position = domain.velocity.doflocs
    force = -residual[:, nodes].sum(axis=1)
    moment = -np.cross(position[:, nodes], residual[:, nodes], axis=0).sum(axis=1)

    basis = domain.facet_basis(inlet)
    normal = np.asarray(basis.normals)
    slope = np.stack([np.asarray(basis.interpolate(u).grad) for u in flow.velocity])
    stress = np.einsum("kjfq,jfq->kfq", slope, normal) / flow.reynolds
    stress -= normal * np.asarray(basis.interpolate(add_midpoints(domain, flow.pressure)))
    weight = np.zeros(domain.velocity.N)
    weight[on_inlet] = 1.0
    force += (stress * np.asarray(basis.interpolate(weight)) * basis.dx).sum(axis=(1, 2))
    arm = np.stack([np.asarray(basis.interpolate(weight * x)) for x in position])
    moment += (np.cross(arm, stress, axis=0) * basis.dx).sum(axis=(1, 2))
    return force, moment


def port_quadrature(domain: Domain, flow: Flow, facets: NDArray[np.int64]) -> dict[str, Any]:
    """Outward area vector, volume flow and forces on the fluid, exact on the finite-element solution."""
    basis = domain.facet_basis(facets)
    normal = np.asarray(basis.normals)
    velocity = np.stack([np.asarray(basis.interpolate(u)) for u in flow.velocity])
    slope = np.stack([np.asarray(basis.interpolate(u).grad) for u in flow.velocity])
    pressure = np.asarray(basis.interpolate(add_midpoints(domain, flow.pressure)))
    outward = (velocity * normal).sum(axis=0)
    strain = slope + np.swapaxes(slope, 0, 1)

    def total(values: Array) -> Array:
        return np.asarray((values * basis.dx).sum(axis=(-2, -1)))

    return {
        "area_vector": total(normal * np.ones_like(pressure)),
        "flow": float(total(outward)),
        "momentum_flux": total(velocity * outward),
        "pressure_force": total(-pressure * normal),
        "viscous_force": total(np.einsum("kjfq,jfq->kfq", strain, normal)) / flow.reynolds,
        "reversed_flow": float(total(np.minimum(outward, 0.0))),
    }


def head_load(domain: Domain, facets: NDArray[np.int64], gradient: Array) -> tuple[Array, Array]:
    """Force and moment about the origin, on the facets, of a pressure that rises linearly from 0 at the origin."""
    basis = domain.facet_basis(facets)
    position = np.asarray(basis.global_coordinates())
    push = np.einsum("k,kfq->fq", gradient, position) * np.asarray(basis.normals)
    force = (push * basis.dx).sum(axis=(1, 2))
    return force, (np.cross(position, push, axis=0) * basis.dx).sum(axis=(1, 2))
