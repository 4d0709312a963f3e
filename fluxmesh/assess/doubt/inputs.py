"""Inputs with a plus-minus, and the law of propagation of uncertainty.

The formulas are those of JCGM 100:2008, Guide to the expression of uncertainty in measurement.
What stands after a plus-minus is the half width of the 95 % interval.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import sqrt
from typing import Final, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import FieldError

__all__ = ["COVERAGE", "NORMAL_95", "Input", "Propagated", "Sensitivity", "covariance_of", "propagate", "sensitivity"]

Array = NDArray[np.float64]

COVERAGE: Final = 0.95
"""Probability that an interval is to hold the value."""

NORMAL_95: Final = 1.959963984540054
"""Half width of the 95 % interval of a normal distribution over its standard deviation (JCGM 100, table G.1)."""


@dataclass(frozen=True)
class Input:
    """A number that the figures rest on, with its doubt.

    Attributes
    ----------
    name : str
        Key in the case, such as ``fluid.density``.
    value : float
        SI.
    half_width : float
        As written after the plus-minus, SI: of the 95 % interval of a normal distribution, or
        the bounds of a rectangular one.
    unit : str
        SI unit.
    shape : {"normal", "rectangular"}
        Distribution.

    Raises
    ------
    FieldError
        A half width that is negative, numbers that are not finite, or a shape that is not known.
    """

    name: str
    value: float
    half_width: float
    unit: str = ""
    shape: Literal["normal", "rectangular"] = "normal"

    def __post_init__(self) -> None:
        """Check once, at the door."""
        if not (np.isfinite(self.value) and np.isfinite(self.half_width) and self.half_width >= 0.0):
            raise FieldError(f"'{self.name}' is {self.value} +/- {self.half_width}", remedy="Give finite numbers")
        if self.shape not in ("normal", "rectangular"):
            raise FieldError(
                f"the distribution of '{self.name}' is {self.shape!r}", remedy="Allowed: normal, rectangular"
            )

    @property
    def standard(self) -> float:
        """Standard uncertainty: half width over 1.96, or over √3 (JCGM 100, 4.3.4 and 4.3.7)."""
        return self.half_width / (NORMAL_95 if self.shape == "normal" else sqrt(3.0))


@dataclass(frozen=True, eq=False)
class Sensitivity:
    """How figures answer to inputs that move by their standard uncertainties.

    Attributes
    ----------
    value : ndarray, shape (n_figures,), float64
        Figures at the estimates.
    linear, square : ndarray, shape (n_inputs, n_figures), float64
        Half the difference, and half the second difference, of the figures at plus and minus one standard
        uncertainty: the first is ``c_i u_i`` of JCGM 100, 5.1.3 note 2.
    """

    value: Array
    linear: Array
    square: Array


@dataclass(frozen=True, eq=False)
class Propagated:
    """Doubts of figures by the law of propagation.

    Attributes
    ----------
    covariance : ndarray, shape (n_figures, n_figures), float64
        Of the figures.
    """

    covariance: Array

    @property
    def standard(self) -> Array:
        """Combined standard uncertainties, shape (n_figures,)."""
        return np.asarray(np.sqrt(np.diagonal(self.covariance)))

    @property
    def correlation(self) -> Array:
        """Correlation coefficients, shape (n_figures, n_figures); NaN beside a figure without doubt."""
        size = np.outer(self.standard, self.standard)
        return np.asarray(np.divide(self.covariance, size, out=np.full(size.shape, np.nan), where=size > 0.0))


def sensitivity(
    function: Callable[[Array], ArrayLike], values: Sequence[float] | Array, standard: Sequence[float] | Array
) -> Sensitivity:
    """Return how figures answer to each input alone.

    Parameters
    ----------
    function : callable
        From inputs, shape (n_inputs,), to figures, shape (n_figures,).
    values, standard : array_like, shape (n_inputs,)
        Estimates and standard uncertainties of the inputs.
    """
    at, steps = np.asarray(values, dtype=np.float64), np.asarray(standard, dtype=np.float64)
    middle = np.atleast_1d(np.asarray(function(at), dtype=np.float64))
    linear, square = np.zeros((at.size, middle.size)), np.zeros((at.size, middle.size))
    for k in range(at.size):
        step = np.where(np.arange(at.size) == k, steps, 0.0)
        up, down = (np.atleast_1d(np.asarray(function(at + s * step), dtype=np.float64)) for s in (1.0, -1.0))
        linear[k], square[k] = (up - down) / 2, (up + down) / 2 - middle
    return Sensitivity(middle, linear, square)


def covariance_of(standard: Sequence[float] | Array, correlation: ArrayLike | None = None) -> Array:
    """Return the covariance matrix of inputs.

    Parameters
    ----------
    standard : array_like, shape (n_inputs,)
        Standard uncertainties.
    correlation : array_like, shape (n_inputs, n_inputs), optional
        Correlation coefficients; independent by default.

    Returns
    -------
    ndarray, shape (n_inputs, n_inputs), float64

    Raises
    ------
    FieldError
        A matrix that is none of correlations: not symmetric, not 1 on its diagonal, or with a
        combination of inputs of negative variance.
    """
    u = np.asarray(standard, dtype=np.float64)
    if correlation is None:
        return np.diag(u**2)
    r = np.asarray(correlation, dtype=np.float64)
    sound = r.shape == (u.size, u.size) and bool(np.isfinite(r).all())
    if not sound or not np.allclose(r, r.T, rtol=0, atol=1e-12) or not np.allclose(np.diagonal(r), 1.0):
        raise FieldError("the correlations are no symmetric matrix with ones on its diagonal")
    if float(np.linalg.eigvalsh(r).min()) < -1e-10:
        raise FieldError(
            "the correlations contradict one another: some combination of the inputs has a negative variance",
            remedy="Give coefficients that can be together",
        )
    return np.asarray(r * np.outer(u, u))


def propagate(linear: ArrayLike, correlation: ArrayLike | None = None) -> Propagated:
    """Return the doubts of figures by the law of propagation of uncertainty.

    Parameters
    ----------
    linear : array_like, shape (n_inputs, n_figures)
        ``c_i u_i`` from `sensitivity`.
    correlation : array_like, shape (n_inputs, n_inputs), optional
        Of the inputs; independent by default.

    Returns
    -------
    Propagated
        ``u_c² = ΣΣ c_i u_i c_j u_j r_ij`` (JCGM 100:2008, eq. 13; several figures: H.2.3, eq. H.9).

    Raises
    ------
    FieldError
        Coefficients that are no correlations.
    """
    moved = np.asarray(linear, dtype=np.float64)
    return Propagated(moved.T @ covariance_of(np.ones(moved.shape[0]), correlation) @ moved)
