"""The doubt that the mesh leaves in one figure, from the same case on several meshes.

For three meshes this is the procedure of Celik, Ghia, Roache, Freitas, Coleman and Raad (2008), "Procedure for
Estimation and Reporting of Uncertainty Due to Discretization in CFD Applications", J. Fluids Eng. 130:078001. For more
meshes order and extrapolated value are fitted over all of them by least squares; their scatter then joins the index,
after Eça and Hoekstra (2014), J. Comput. Phys. 262 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from math import exp, expm1, inf, isfinite, log, log1p
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError

__all__ = ["Behaviour", "Convergence", "convergence", "representative_size"]

_SAFETY: Final = 1.25  # of three or more meshes, Roache; Celik et al. eq. (7)
_LEAST_REFINEMENT: Final = 1.3  # advised by Celik et al., step 2
_ORDERS: Final = (-2.0, 12.0)  # searched by the fit
_MOST_UNEXPLAINED: Final = 0.5  # share of the variance that a fit may leave
_PLAUSIBLE: Final = (0.5, 4.0)  # orders of the schemes in use

Array = NDArray[np.float64]


class Behaviour(Enum):
    """How a figure changes from mesh to finer mesh."""

    MONOTONE = "monotone"
    """It goes one way, in ever smaller steps."""
    OSCILLATING = "oscillating"
    """It goes to and fro, in ever smaller steps."""
    DIVERGING = "diverging"
    """Its steps do not shrink as the mesh does: no limit is in sight."""
    IDENTICAL = "identical"
    """It does not change, or no more: no order can be told."""


@dataclass(frozen=True)
class Convergence:
    """What several meshes say of one figure; None where it cannot be told.

    Attributes
    ----------
    behaviour : Behaviour
        How the figure changes under refinement.
    order : float or None
        Apparent order of convergence.
    extrapolated : float or None
        The figure at vanishing mesh size, in its own unit.
    relative_error : float or None
        Change between the two finest meshes over the finest value; None for a
        finest value of zero.
    extrapolated_error : float or None
        Distance of the finest value from the extrapolated one, over the latter.
    index : float or None
        Grid convergence index of the finest mesh: half width of the doubt over
        the finest value.
    refinement : tuple of float
        Ratios of successive mesh sizes, from the finest on, each above 1.
    reasons : tuple of str
        What is doubtful or could not be told, one sentence each.
    uncertainty : float or None
        Half width of the doubt of the finest value, in the unit of the figure.
    scatter : float or None
        Standard deviation of the values about the fit, in the unit of the
        figure; None for three meshes, which are met exactly.
    """

    behaviour: Behaviour
    order: float | None
    extrapolated: float | None
    relative_error: float | None
    extrapolated_error: float | None
    index: float | None
    refinement: tuple[float, ...]
    reasons: tuple[str, ...]
    uncertainty: float | None = None
    scatter: float | None = None


def representative_size(count: int, *, dimension: int = 3, extent: float = 1.0) -> float:
    """Return the representative size of a mesh, ``(extent / count)^(1/dimension)``.

    Parameters
    ----------
    count : int
        Cells of a volume mesh, or faces of a surface mesh.
    dimension : {1, 2, 3}, optional
        3 for cells of a volume, 2 for faces of a surface.
    extent : float, optional
        Volume in m^3 or area in m^2; with 1 only ratios of sizes mean something,
        which is all that `convergence` needs.

    Returns
    -------
    float
        Size, m (Celik et al. 2008, eqs. 1 and 2).

    Raises
    ------
    FieldError
        No cells, no extent, or a dimension other than 1, 2, 3.
    """
    if dimension not in (1, 2, 3):
        raise FieldError(f"the dimension of a mesh is {dimension!r}", remedy="Allowed: 1, 2, 3")
    if count < 1 or not extent > 0 or not isfinite(extent):
        raise FieldError(f"a mesh has {count} cells over {extent:g}", remedy="Both must be positive")
    return float((extent / count) ** (1 / dimension))


def convergence(sizes: ArrayLike, values: ArrayLike, *, round_off: float = 1e-12) -> Convergence:
    """Judge how one figure converges over three or more meshes.

    Parameters
    ----------
    sizes : array_like, shape (n,)
        Representative mesh sizes in any one unit and any order (see
        `representative_size`); n is 3 or more.
    values : array_like, shape (n,)
        The figure on each mesh, in any unit.
    round_off : float, optional
        Changes below this part of the largest value count as none.

    Returns
    -------
    Convergence
        With ``e21 = f2 - f1``, ``e32 = f3 - f2``, ``r21 = h2/h1``, ``r32 = h3/h2``, 1 the finest
        mesh, and ``s = sign(e32/e21)`` (Celik et al. 2008, eqs. 3 to 7): the order p solves
        ``p ln r21 = ln|e32/e21| + ln((r21^p - s)/(r32^p - s))``, the extrapolated value is
        ``(r21^p f1 - f2)/(r21^p - 1)``, and the index ``1.25 |e21/f1| / (r21^p - 1)``. A figure whose
        steps do not shrink is named diverging and gets no order and no index.

    Raises
    ------
    FieldError
        Fewer than three meshes, lists of unlike length, values that are not
        finite, sizes that are not positive, or two meshes of one size.
    """
    h, f = _sorted(sizes, values)
    ratios = h[1:] / h[:-1]
    steps = np.diff(f)
    steps[np.abs(steps) <= round_off * np.abs(f).max()] = 0.0
    reasons: list[str] = []
    if ratios.min() < _LEAST_REFINEMENT:
        reasons.append(
            f"Meshes differ in size by a factor of {ratios.min():.3g} only; at least {_LEAST_REFINEMENT} is advised"
        )
    behaviour = _behaviour(steps, ratios)
    found = _Found()
    if behaviour is Behaviour.IDENTICAL:
        what = "All meshes" if not steps.any() else "The two finest meshes"
        reasons.append(f"{what} give the same value, so that no order can be told")
    elif behaviour is not Behaviour.DIVERGING:
        found = _three(f, steps, ratios) if len(f) == 3 else _fitted(h, f)
        if found.order is not None and found.order <= 0:
            behaviour, found = Behaviour.DIVERGING, _Found()
        elif found.order is None:
            reasons.append("The values do not follow a power of the mesh size, so that no order can be told")
    if behaviour is Behaviour.DIVERGING:
        reasons.append("Changes do not shrink from mesh to finer mesh: no limit and no uncertainty can be given")
    if behaviour is Behaviour.OSCILLATING:
        reasons.append("The value goes to and fro under refinement, so that order and limit are weak")
    if found.order is not None and not _PLAUSIBLE[0] <= found.order <= _PLAUSIBLE[1]:
        reasons.append(
            f"The order {found.order:.3g} is not one that schemes in use have: the meshes may be too coarse to tell"
        )
    if f[0] == 0.0:
        reasons.append("The finest value is zero, so that errors relative to it mean nothing")
    return Convergence(
        behaviour=behaviour,
        order=found.order,
        extrapolated=found.limit,
        relative_error=_share(float(f[1] - f[0]), float(f[0])),
        extrapolated_error=None if found.limit is None else _share(found.limit - float(f[0]), found.limit),
        index=None if found.doubt is None else _share(found.doubt, float(f[0])),
        refinement=tuple(ratios.tolist()),
        reasons=tuple(reasons),
        uncertainty=found.doubt,
        scatter=found.scatter,
    )


@dataclass(frozen=True)
class _Found:
    order: float | None = None
    limit: float | None = None
    doubt: float | None = None
    scatter: float | None = None


def _share(part: float, whole: float) -> float | None:
    share = abs(part / whole) if whole != 0.0 else inf
    return share if isfinite(share) else None


def _sorted(sizes: ArrayLike, values: ArrayLike) -> tuple[Array, Array]:
    h, f = np.asarray(sizes, dtype=np.float64), np.asarray(values, dtype=np.float64)
    if h.ndim != 1 or h.shape != f.shape:
        raise FieldError(f"sizes have the shape {h.shape}, values {f.shape}", remedy="Give one value for each mesh")
    if h.size < 3:
        raise FieldError(f"there are {h.size} meshes", remedy="An order of convergence needs three or more")
    if not (np.isfinite(h).all() and np.isfinite(f).all()):
        raise FieldError("sizes or values are not finite", remedy="Check what the meshes gave")
    if not (h > 0).all():
        raise FieldError(f"the smallest mesh size is {h.min():g}", remedy="Sizes must be positive")
    order = np.argsort(h, kind="stable")
    h, f = h[order], f[order]
    # closer sizes than that leave nothing to tell an order from
    if (h[1:] / h[:-1] < 1 + 1e-6).any():
        raise FieldError(
            "two meshes have the same size",
            where="mesh sizes",
            remedy="Refine the whole mesh, by 1.3 or more each time",
        )
    return h, f


def _behaviour(steps: Array, ratios: Array) -> Behaviour:
    """Name what the steps do, from the finest on; a fit may still find a falling order."""
    if steps[0] == 0.0 and (len(steps) == 2 or not steps.any()):
        return Behaviour.IDENTICAL
    signs = np.sign(steps[steps != 0])
    oscillating = bool((signs != signs[0]).any())
    if len(steps) == 2:
        # where the order falls to zero, steps go as ln r if of one sign, and as 1 if not
        least = 1.0 if oscillating else log(ratios[1]) / log(ratios[0])
        if abs(steps[1] / steps[0]) <= least:
            return Behaviour.DIVERGING
    elif oscillating:
        # half of the steps is the finer one: as a whole it must be the smaller
        half = len(steps) // 2
        if np.abs(steps[:half]).mean() >= np.abs(steps[-half:]).mean():
            return Behaviour.DIVERGING
    return Behaviour.OSCILLATING if oscillating else Behaviour.MONOTONE


def _three(f: Array, steps: Array, ratios: Array) -> _Found:
    quotient = float(steps[1] / steps[0])
    order = _apparent_order(abs(quotient), 1 if quotient > 0 else -1, log(ratios[0]), log(ratios[1]))
    if order is None:
        return _Found()
    growth = order * log(ratios[0])
    beyond = float(steps[0]) / expm1(growth) if growth < 700 else 0.0  # exp(700) is near the largest number
    return _Found(order, float(f[0]) - beyond, _SAFETY * abs(beyond))


def _apparent_order(quotient: float, sign: int, fine: float, coarse: float) -> float | None:
    """Solve for the order; `fine` and `coarse` are the logarithms of the ratios.

    The paper suggests to iterate ``p = (ln|e32/e21| + q(p)) / ln r21``. That swings ever wider where
    r32 is above r21², so the same equation is halved in: its left side rises steadily with p.
    """

    def part(x: float) -> float:  # ln(1 - s exp(-x)), exact for small x too
        return log(-expm1(-x)) if sign > 0 else log1p(exp(-x))

    def excess(p: float) -> float:
        return p * coarse + part(p * coarse) - part(p * fine) - log(quotient)

    high = 1.0
    while excess(high) < 0:
        high *= 2
        if high > 1e6:
            return None
    low = 0.0
    while low < (middle := (low + high) / 2) < high:
        low, high = (middle, high) if excess(middle) < 0 else (low, middle)
    return high


def _fitted(h: Array, f: Array) -> _Found:
    """Fit ``f = f0 + C h^p`` over all meshes."""
    x, centred = np.log(h / h[0]), f - f.mean()
    size = float(np.abs(centred).max())
    order = _best_order(x, centred / size)
    if order is None or order <= 0:
        return _Found(order)
    basis = _basis(order, x)
    about = basis - basis.mean()
    slope = float(about @ centred / (about @ about))
    residual = centred - slope * about
    if residual @ residual > _MOST_UNEXPLAINED * (centred @ centred):
        return _Found()
    limit = float(f.mean() - slope * basis.mean() - slope / order)
    scatter = float(np.sqrt(residual @ residual / (len(f) - 3)))
    return _Found(order, limit, _SAFETY * abs(limit - float(f[0])) + scatter + abs(float(residual[0])), scatter)


def _basis(order: float, x: Array) -> Array:
    """Return ``(h^p - 1)/p``, which turns into ln h at p = 0: falling orders are seen too."""
    return np.asarray(np.expm1(order * x) / order if abs(order) > 1e-8 else x)


def _misfit(order: float, x: Array, f: Array) -> float:
    about = _basis(order, x)
    about = about - about.mean()
    left = f - about * (about @ f) / (about @ about)
    return float(left @ left)


def _best_order(x: Array, f: Array) -> float | None:
    """Return the order of least misfit; None at the upper end, where the coarsest value alone would speak.

    For each order the rest is linear, so the order is searched alone: in steps, then between two of
    them where the misfit neither falls nor rises, which is seen to the last digits.
    """
    low, high, count = *_ORDERS, 71
    tried = np.linspace(low, high, count)
    best = int(np.argmin([_misfit(float(p), x, f) for p in tried]))
    if best in (0, count - 1):
        return None if best else low
    low, high = float(tried[best - 1]), float(tried[best + 1])
    if not _tilt(low, x, f) < 0 < _tilt(high, x, f):
        return float(tried[best])
    while low < (middle := (low + high) / 2) < high:
        low, high = (middle, high) if _tilt(middle, x, f) < 0 else (low, middle)
    return low


def _tilt(order: float, x: Array, f: Array) -> float:
    """Return half the derivative of the misfit by the order: its zero is seen to more digits than a least value."""
    basis = _basis(order, x)
    about = basis - basis.mean()
    slope = float(about @ f) / float(about @ about)
    grown = (x * np.exp(order * x) - basis) / order if abs(order) > 1e-8 else x * x / 2
    return -slope * float((f - slope * about) @ grown)
