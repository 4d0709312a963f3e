"""Doubts by drawing: propagation of distributions by a Monte Carlo method.

The method is that of JCGM 101:2008, Supplement 1 to the Guide to the expression of uncertainty
in measurement. It needs no model that is nearly linear, and gives the coverage interval that the
distributions of the inputs really make.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.assess.doubt.inputs import COVERAGE, Input, covariance_of
from fluxmesh.compiling import run_parts
from fluxmesh.errors import FieldError

__all__ = ["FEWEST", "Drawn", "draw_inputs", "summarise"]

Array = NDArray[np.float64]

FEWEST = 1000
"""Fewest draws that a 95 % interval can be read from."""


@dataclass(frozen=True, eq=False)
class Drawn:
    """What many draws say of each figure.

    Attributes
    ----------
    count : int
        How many draws.
    mean, standard : ndarray, shape (n_figures,), float64
        Estimate and standard uncertainty (JCGM 101, 7.6).
    shortest, symmetric : ndarray, shape (n_figures, 2), float64
        Ends of the shortest interval that holds 95 % of the draws, and of that with as many
        draws below it as above it (7.7).
    """

    count: int
    mean: Array
    standard: Array
    shortest: Array
    symmetric: Array


def draw_inputs(inputs: Sequence[Input], count: int, *, seed: int = 0, correlation: ArrayLike | None = None) -> Array:
    """Draw values of the inputs.

    Parameters
    ----------
    inputs : sequence of Input
        Their distributions.
    count : int
        How many draws.
    seed : int, optional
        The same seed gives the same draws.
    correlation : array_like, shape (n_inputs, n_inputs), optional
        Of normal inputs (JCGM 101, 6.4.8); independent by default.

    Returns
    -------
    ndarray, shape (count, n_inputs), float64
        By the generator PCG64.

    Raises
    ------
    FieldError
        Fewer draws than `FEWEST`, or correlated inputs that are not all normal.
    """
    if count < FEWEST:
        raise FieldError(f"{count} draws are asked for", remedy=f"An interval needs {FEWEST} at least")
    generator = np.random.Generator(np.random.PCG64(seed))
    if correlation is not None:
        if any(one.shape != "normal" for one in inputs):
            raise FieldError("correlated inputs are not all normal", remedy="Draw them as normal, or as independent")
        matrix = covariance_of([one.standard for one in inputs], correlation)
        size, turn = np.linalg.eigh(matrix)
        spread = turn * np.sqrt(np.maximum(size, 0.0))
        return np.asarray(
            np.array([one.value for one in inputs]) + generator.standard_normal((count, len(inputs))) @ spread.T
        )
    drawn = np.empty((count, len(inputs)))
    for k, one in enumerate(inputs):
        if one.shape == "normal":
            drawn[:, k] = one.value + one.standard * generator.standard_normal(count)
        else:
            drawn[:, k] = generator.uniform(one.value - one.half_width, one.value + one.half_width, count)
    return drawn


def summarise(samples: Array, *, coverage: float = COVERAGE) -> Drawn:
    """Return mean, standard uncertainty and coverage intervals of draws.

    Parameters
    ----------
    samples : ndarray, shape (n_figures, count), float64
        Draws of each figure. They are sorted in place.
    coverage : float, optional
        Share of the draws that an interval is to hold.

    Returns
    -------
    Drawn
        Intervals by the rule of JCGM 101:2008, 7.7.2: with ``q = coverage × count`` the ends are the
        r-th and the (r + q)-th of the sorted draws.
    """
    figures, count = samples.shape
    # the mean of a constant must be that constant, and its deviation zero
    shift = samples[:, :1].copy()
    samples -= shift
    mean = samples.mean(axis=1)
    standard = samples.std(axis=1, ddof=1)
    held = min(int(coverage * count + 0.5), count - 1)
    low = (count - held) // 2
    shortest = np.empty((figures, 2))
    symmetric = np.empty((figures, 2))

    def look(k: int) -> None:
        row = samples[k]
        if standard[k] == 0.0:
            shortest[k] = symmetric[k] = row[0]
            return
        row.sort()
        at = int(np.argmin(row[held:] - row[: count - held]))
        shortest[k] = row[at], row[at + held]
        symmetric[k] = row[low], row[low + held]

    run_parts(look, figures, None)  # sorting lets other threads run
    shift = shift[:, 0]
    samples += shift[:, None]
    return Drawn(count, mean + shift, standard, shortest + shift[:, None], symmetric + shift[:, None])
