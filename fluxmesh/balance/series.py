"""Balances of a flow at several instants, and figures over the time that they cover."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.balance.balance import Balance
from fluxmesh.balance.wrench import Vector, Wrench
from fluxmesh.errors import FieldError

__all__ = ["Instant", "Series", "Statistics", "statistics"]

# half as many instants must still make two steps
_FEWEST_FOR_ERROR: Final = 5


@dataclass(frozen=True, eq=False)
class Instant:
    """The balance at one instant.

    Attributes
    ----------
    time : float
        s.
    source : str
        The file it came from.
    balance : Balance
        Every law.
    """

    time: float
    source: str
    balance: Balance

    def angular_known(self) -> bool:
        """Return whether the residual of angular momentum means something."""
        return self.balance.complete and self.balance.angular.known


@dataclass(frozen=True, eq=False)
class Series:
    """Balances at rising times.

    Attributes
    ----------
    instants : tuple of Instant
        In the order of time; at least two.

    Raises
    ------
    FieldError
        Fewer than two instants, or times that do not rise.
    """

    instants: tuple[Instant, ...]

    def __post_init__(self) -> None:
        """Check the times at the door."""
        _rising(self.times())

    def times(self) -> NDArray[np.float64]:
        """Return the times, shape (n,), s."""
        return np.array([one.time for one in self.instants])

    def load(self) -> Vector:
        """Return the force of the flow on the hardware, shape (n, 3), N; NaN where it is not known."""
        return np.array([_force(one.balance.load.best()) for one in self.instants])

    def load_moment(self) -> Vector:
        """Return the moment of the flow on the hardware about the anchor, shape (n, 3), N m; NaN where not known."""
        return np.array([_moment(one.balance.load.best()) for one in self.instants])

    def reaction(self) -> Vector:
        """Return the force of the anchor on the hardware, shape (n, 3), N; NaN where it is not known."""
        found = [one.balance.reaction for one in self.instants]
        return np.array([_force(None if one is None else one.wrench) for one in found])

    def reaction_moment(self) -> Vector:
        """Return the moment of the anchor on the hardware about the anchor, shape (n, 3), N m; NaN where not known."""
        found = [one.balance.reaction for one in self.instants]
        return np.array([_moment(None if one is None else one.wrench) for one in found])

    def mass_residual(self) -> NDArray[np.float64]:
        """Return storage plus outflow minus inflow, shape (n,), kg/s; NaN where it is not known."""
        found = [one.balance.mass for one in self.instants]
        return np.array([np.nan if one is None else one.residual for one in found])

    def mass_size(self) -> float:
        """Return the largest sum of what enters, leaves and is stored at one instant, kg/s."""
        found = [one.balance.mass for one in self.instants]
        sizes = [one.inflow + one.outflow + abs(one.storage) for one in found if one is not None]
        return _largest(np.array(sizes))

    def momentum_residual(self) -> Vector:
        """Return the residual of linear momentum, shape (n, 3), N; NaN where it is not known."""
        return np.array(
            [one.balance.momentum.residual() if one.balance.complete else np.full(3, np.nan) for one in self.instants]
        )

    def momentum_size(self) -> float:
        """Return the largest size of the entries of linear momentum at one instant, N."""
        return _largest(np.array([one.balance.momentum.size() for one in self.instants if one.balance.complete]))

    def angular_residual(self) -> Vector:
        """Return the residual of angular momentum, shape (n, 3), N m; NaN where it is not known."""
        return np.array(
            [one.balance.angular.residual() if one.angular_known() else np.full(3, np.nan) for one in self.instants]
        )

    def angular_size(self) -> float:
        """Return the largest size of the entries of angular momentum at one instant, N m."""
        return _largest(np.array([one.balance.angular.size() for one in self.instants if one.angular_known()]))


def _force(wrench: Wrench | None) -> Vector:
    return np.full(3, np.nan) if wrench is None else wrench.force


def _moment(wrench: Wrench | None) -> Vector:
    return np.full(3, np.nan) if wrench is None else wrench.moment


def _largest(sizes: NDArray[np.float64]) -> float:
    known = sizes[np.isfinite(sizes)]
    return float(known.max()) if known.size else 0.0


@dataclass(frozen=True, eq=False)
class Statistics:
    """Figures of a quantity over time; every one of them NaN where an instant is not known.

    Attributes
    ----------
    mean : ndarray, shape () or (k,), float64
        Time mean, in the quantity's unit.
    rms : ndarray, shape () or (k,), float64
        Root of the mean square.
    deviation : ndarray, shape () or (k,), float64
        Root of the mean square of what is left when the mean is taken off.
    least, greatest : ndarray, shape () or (k,), float64
        Extremes among the instants.
    least_at, greatest_at : ndarray, shape () or (k,), float64
        When they occur first, s.
    impulse : ndarray, shape () or (k,), float64
        Integral over time, in the quantity's unit times s.
    impulse_error : ndarray, shape () or (k,), float64, or None
        Estimated error of `impulse` from the steps in time; None where there
        are too few instants.
    """

    mean: Vector
    rms: Vector
    deviation: Vector
    least: Vector
    least_at: Vector
    greatest: Vector
    greatest_at: Vector
    impulse: Vector
    impulse_error: Vector | None


def statistics(times: ArrayLike, values: ArrayLike) -> Statistics:
    """Return figures of a scalar or a vector over time.

    Parameters
    ----------
    times : array_like, shape (n,), n >= 2
        Strictly rising, s; the steps may be uneven.
    values : array_like, shape (n,) or (n, k)
        The quantity; NaN where it is not known.

    Returns
    -------
    Statistics
        Means and integrals by the trapezoidal rule. The error of the impulse is a
        third of what it changes by when every other instant is left out
        (Richardson 1911, Phil. Trans. R. Soc. A 210, from memory: the rule is of second
        order); it tells of the spacing of the instants, not of the data.

    Raises
    ------
    FieldError
        Times that do not rise, or values at another number of times.
    """
    instants = _rising(times)
    rows = np.asarray(values, dtype=np.float64)
    if rows.ndim not in (1, 2) or rows.shape[0] != instants.size:
        raise FieldError(f"{instants.size} times are given, and values of the shape {rows.shape}")
    span = instants[-1] - instants[0]
    impulse = _integral(instants, rows)
    mean = impulse / span
    unknown = ~np.isfinite(rows).all(axis=0)
    sound = np.where(unknown, 0.0, rows)

    def extreme(place: NDArray[np.intp]) -> tuple[Vector, Vector]:
        value = np.take_along_axis(sound, place[None], axis=0)[0] if rows.ndim == 2 else sound[place]
        return np.where(unknown, np.nan, value), np.where(unknown, np.nan, instants[place])

    least, least_at = extreme(sound.argmin(axis=0))
    greatest, greatest_at = extreme(sound.argmax(axis=0))
    return Statistics(
        mean=mean,
        rms=np.sqrt(_integral(instants, rows * rows) / span),
        deviation=np.sqrt(_integral(instants, (rows - mean) ** 2) / span),
        least=least,
        least_at=least_at,
        greatest=greatest,
        greatest_at=greatest_at,
        impulse=impulse,
        impulse_error=_impulse_error(instants, rows),
    )


def _rising(times: ArrayLike) -> NDArray[np.float64]:
    instants = np.asarray(times, dtype=np.float64)
    if instants.ndim != 1 or instants.size < 2:
        raise FieldError("a series needs two instants or more")
    falls = np.flatnonzero(~(np.diff(instants) > 0))
    if falls.size:
        k = int(falls[0])
        raise FieldError(
            f"the times do not rise: number {k + 1} is {instants[k]:.12g} s and number {k + 2} is "
            f"{instants[k + 1]:.12g} s",
            remedy="List the instants in the order of time, each time once",
        )
    return instants


def _integral(times: NDArray[np.float64], rows: Vector) -> Vector:
    return np.asarray(np.trapezoid(rows, times, axis=0))


def _impulse_error(times: NDArray[np.float64], rows: Vector) -> Vector | None:
    if times.size < _FEWEST_FOR_ERROR:
        return None
    every = np.arange(times.size)
    # of an odd number of steps one stays as it is: the last, or the first, whichever tells more
    thinned = {tuple(np.union1d(every[start::2], every[[0, -1]])) for start in (0, 1)}
    if times.size % 2:
        thinned = {tuple(every[::2])}
    fine = _integral(times, rows)
    gaps = [np.abs(_integral(times[list(kept)], rows[list(kept)]) - fine) for kept in thinned]
    return np.asarray(np.max(gaps, axis=0) / 3)
