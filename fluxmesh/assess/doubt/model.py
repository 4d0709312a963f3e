"""The balance as a function of the numbers of the case, by algebra on its table.

Most figures are linear in the parts of the table, and these are products of powers of the inputs: so many
draws of the inputs make many draws of the figures by one multiplication of matrices, exactly. What
is no such sum, but follows from such sums, is computed from them draw by draw
(`fluxmesh.assess.doubt.derived`); the few figures left are expanded to second order in the inputs.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.derived import derived_figures
from fluxmesh.assess.doubt.draws import Drawn, draw_inputs
from fluxmesh.assess.doubt.figures import Figures, Path, figures
from fluxmesh.assess.doubt.inputs import Input, Sensitivity
from fluxmesh.assess.doubt.levers import Levers, Parts, pulled
from fluxmesh.assess.doubt.recipe import Moved, Recipe
from fluxmesh.assess.doubt.sums import Summary, Sums
from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance
from fluxmesh.balance.losses import Loss
from fluxmesh.balance.storage import Storage
from fluxmesh.field.contents import Contents
from fluxmesh.integral.table import IntegralTable

__all__ = ["BalanceModel", "Further", "Laws"]

Array = NDArray[np.float64]
Laws = tuple[EnergyBalance | None, Sequence[CarriedBalance], Sequence[Loss]]
Further = Callable[[Balance, Levers | None, Array], Laws]
"""What makes the energy, the carried scalars and the losses of a changed balance, by the levers that changed it; by
None where its table is another one, which only some of them can be made of."""

_LINEAR: Final = {
    "geometry": None,
    "groups": None,
    "mass": {"residual", "storage"},
    "momentum": {"flux", "pressure", "viscous", "weight", "storage", "residual"},
    "angular_momentum": {"flux", "pressure", "viscous", "weight", "storage", "residual"},
    "hardware_load": None,
    "reaction": {"force", "moment"},
    "fluid": None,
    "short_form": {"full_flux"},
}
_PROBES: Final = 32
_MOST_CROSSED: Final = 16  # inputs whose effects together are looked at, pair by pair
_MATTERS: Final = 1e-3  # of a standard uncertainty
_AT_A_TIME: Final = 8192  # draws whose levers are pulled at a time
_STILL: Final = Moved(np.array(1.0), np.array(1.0), np.array(1.0), np.array(0.0), np.array(0.0))


@dataclass(frozen=True, eq=False)
class _Term:
    """One thing that draws move: a part of a row of the table, or a number of the setting."""

    channel: str
    group: int = -1


@dataclass(frozen=True, eq=False)
class BalanceModel:
    """A balance as a function of inputs.

    Attributes
    ----------
    base : Balance
        At the numbers of the case.
    parts : Parts
        Its table, cut.
    recipe : Recipe
        How the inputs pull at it.
    inputs : tuple of Input
        The numbers with a doubt.
    further : callable or None
        Makes energy, carried scalars and losses of a changed balance.
    rerun : mapping of int to callable
        For inputs that no algebra reaches: from a value of that input to the figures.
    """

    base: Balance
    parts: Parts
    recipe: Recipe
    inputs: tuple[Input, ...]
    further: Further | None = None
    rerun: dict[int, Callable[[float], Figures]] | None = None

    @property
    def values(self) -> Array:
        """Values of the inputs in the case, shape (n_inputs,)."""
        return np.array([one.value for one in self.inputs])

    def balance(self, values: Array) -> Balance:
        """Return the balance at other values of the inputs.

        Parameters
        ----------
        values : ndarray, shape (n_inputs,), float64
            SI; those of inputs that need a new run are not looked at.
        """
        levers = self.recipe.levers(values)
        return self._put_together(pulled(self.parts, levers), self.recipe.moved(values, levers))

    def figures(self, values: Array) -> Figures:
        """Return the figures at other values of the inputs.

        Parameters
        ----------
        values : ndarray, shape (n_inputs,), float64
            As for `balance`.
        """
        levers = self.recipe.levers(values)
        return self._all_of(self.balance(values), levers, values)

    def figures_with(self, levers: Levers) -> Figures:
        """Return the figures where levers are pulled that no input pulls.

        Parameters
        ----------
        levers : Levers
            Shape (n_groups,).
        """
        return self._all_of(self._put_together(pulled(self.parts, levers), _STILL), levers, self.values)

    def figures_of(self, table: IntegralTable, density: float | None) -> Figures:
        """Return the figures of another table of the same groups.

        Parameters
        ----------
        table : IntegralTable
            A sharpened one, say.
        density : float or None
            Of the fluid held, kg/m³.
        """
        return self._all_of(self.balance_of(table, density), None, self.values)

    def balance_of(self, table: IntegralTable, density: float | None) -> Balance:
        """Return the balance of another table of the same groups.

        Parameters
        ----------
        table : IntegralTable
            A sharpened one, say.
        density : float or None
            Of the fluid held, kg/m³.
        """
        setting = replace(self.base.setting, fluid_density=density)
        return balance_table(table, setting, storage=self.base.storage, contents=self.base.contents)

    def sensitivity(self) -> tuple[Figures, Sensitivity]:
        """Return the figures at the numbers of the case, and how they answer to each input.

        Returns
        -------
        figures : Figures
            Without what only quadrature over the ports tells.
        sensitivity : Sensitivity
            By one standard uncertainty up and down.
        """
        at = self.values
        middle = self.figures(at)
        count = middle.values.size
        linear, square = np.zeros((at.size, count)), np.zeros((at.size, count))
        for k, one in enumerate(self.inputs):
            run = (self.rerun or {}).get(k)
            if run is not None:
                first, up, down = (middle.like(run(one.value + s * one.standard)) for s in (0.0, 1.0, -1.0))
            else:
                step = np.where(np.arange(at.size) == k, one.standard, 0.0)
                first = middle.values
                up, down = (middle.like(self.figures(at + s * step)) for s in (1.0, -1.0))
            linear[k], square[k] = (up - down) / 2, (up + down) / 2 - first
        return middle, Sensitivity(middle.values, linear, square)

    def draw(self, count: int, *, seed: int = 0, answer: tuple[Figures, Sensitivity] | None = None) -> Drawn:
        """Return what draws of the inputs make of every figure.

        Parameters
        ----------
        count : int
            How many draws.
        seed : int, optional
            The same seed gives the same result.
        answer : tuple of Figures and Sensitivity, optional
            From `sensitivity`, if it was made before.

        Returns
        -------
        Drawn
            In the order of the figures; NaN where a figure is not known in every draw.

        Raises
        ------
        FieldError
            Too few draws.
        """
        middle, slope = self.sensitivity() if answer is None else answer
        return self.summary(draw_inputs(self.inputs, count, seed=seed), middle, slope)

    def summary(self, draws: Array, middle: Figures, slope: Sensitivity) -> Drawn:
        """Return what given draws make of every figure.

        Parameters
        ----------
        draws : ndarray, shape (count, n_inputs), float64
            Values of the inputs.
        middle : Figures
            At the numbers of the case.
        slope : Sensitivity
            From `sensitivity`.
        """
        sums = self._sums(draws, middle, slope)
        found = Summary(len(draws), middle.values.size)
        linear = np.zeros(middle.values.size, np.bool_)
        for spot in middle.spots:
            linear[spot.slice] = _is_linear(spot.path)
        found.sums(np.flatnonzero(linear), sums)
        derived = derived_figures(middle, self.base, sums.rows, sums.columns)
        for path, samples in derived.items():
            found.samples(middle.spot(path).slice, samples)
        rest = ~linear
        for path in derived:
            rest[middle.spot(path).slice] = False
        found.sums(np.flatnonzero(rest), self._expanded(draws, middle, slope, rest))
        return found.drawn

    # ---- the pieces --------------------------------------------------------------------------

    def _all_of(self, done: Balance, levers: Levers | None, values: Array) -> Figures:
        if self.further is None:
            return figures(done)
        energy, carried, losses = self.further(done, levers, values)
        return figures(done, energy=energy, carried=carried, losses=losses)

    def _put_together(self, table: IntegralTable, moved: Moved) -> Balance:
        base, setting = self.base, self.base.setting
        density, hardware = setting.fluid_density, setting.hardware
        changed = replace(
            setting,
            fluid_density=None if density is None else density * float(moved.held),
            ambient=None if setting.ambient is None else setting.ambient + float(moved.ambient),
            hardware=None if hardware is None else replace(hardware, mass=hardware.mass * float(moved.hardware)),
        )
        storage = _storage_times(base.storage, float(moved.contents), float(moved.mass_rate))
        contents = None if base.contents is None else _contents_times(base.contents, float(moved.contents))
        return balance_table(table, changed, storage=storage, contents=contents)

    def _sums(self, draws: Array, middle: Figures, slope: Sensitivity) -> Sums:
        """What each draw moves, and what that does to the figures and to the table."""
        terms = self._terms(draws)
        moved = [self._deviations(terms, draws)]
        base = self._vector(self.base.table, _STILL, middle)
        rows = [self._moved_by(term, middle) - base for term in terms]
        turned = self._turned(draws)
        again = sorted(self.rerun or {})
        table = np.zeros(self.base.table.values.size)
        for k in again:
            moved += [turned[k][None], turned[k][None] ** 2]
            rows += [np.concatenate([slope.linear[k], table]), np.concatenate([slope.square[k], table])]
        answer = np.array(rows) if rows else np.zeros((0, base.size))
        return Sums(np.concatenate(moved), answer, base, middle, self.base.table.values.shape)

    def _expanded(self, draws: Array, middle: Figures, slope: Sensitivity, wanted: NDArray[np.bool_]) -> Sums:
        """Figures to second order, with what inputs do together where algebra reaches them and it matters."""
        turned = self._turned(draws)
        moved, rows = [turned, turned**2], [slope.linear, slope.square]
        least = _MATTERS * np.sqrt((slope.linear**2).sum(axis=0) + 2 * (slope.square**2).sum(axis=0))
        free = [k for k in range(len(self.inputs)) if k not in (self.rerun or {})]
        if len(free) <= _MOST_CROSSED:
            steps = np.diag([one.standard for one in self.inputs])
            for m, k in enumerate(free):
                for other in free[:m]:
                    both = middle.like(self.figures(self.values + steps[k] + steps[other]))
                    alone = slope.linear[[k, other]].sum(axis=0) + slope.square[[k, other]].sum(axis=0)
                    row = both - middle.values - alone
                    if (np.abs(row) > least)[wanted].any():
                        moved.append((turned[k] * turned[other])[None])
                        rows.append(row[None])
        return Sums(np.concatenate(moved), np.concatenate(rows), middle.values)

    def _turned(self, draws: Array) -> Array:
        """Draws as multiples of the standard uncertainties, shape (n_inputs, count)."""
        steps = np.array([one.standard or 1.0 for one in self.inputs])
        return np.ascontiguousarray(((draws - self.values) / steps).T)

    def _terms(self, draws: Array) -> list[_Term]:
        some = draws[:: max(len(draws) // _PROBES, 1)]
        levers = self.recipe.levers(some)
        first = self.recipe.levers(self.values).multipliers(self.parts.mass_given)
        terms = []
        for name, factor in levers.multipliers(self.parts.mass_given).items():
            varies = (factor != first[name]).any(axis=0) & self.parts.channels[name].any(axis=1)
            terms += [_Term(name, int(k)) for k in np.flatnonzero(varies)]
        moved = self.recipe.moved(some, levers)
        for name, rest in (("held", 1.0), ("contents", 1.0), ("hardware", 1.0), ("mass_rate", 0.0)):
            if (getattr(moved, name) != rest).any():
                terms.append(_Term(name))
        return terms

    def _deviations(self, terms: list[_Term], draws: Array) -> Array:
        """How far each draw moves each term, shape (n_terms, count)."""
        found = np.empty((len(terms), len(draws)))
        for first in range(0, len(draws), _AT_A_TIME):
            some = slice(first, first + _AT_A_TIME)
            levers = self.recipe.levers(draws[some])
            moved = self.recipe.moved(draws[some], levers)
            factors = levers.multipliers(self.parts.mass_given)
            for k, term in enumerate(terms):
                if term.group < 0:
                    factor: Array = getattr(moved, term.channel)
                    added = term.channel == "mass_rate"
                else:
                    factor = factors[term.channel][:, term.group]
                    added = term.channel.startswith("added")
                found[k, some] = factor if added else factor - 1.0
        return found

    def _moved_by(self, term: _Term, middle: Figures) -> Array:
        if term.group < 0:
            two = replace(_STILL, **{term.channel: getattr(_STILL, term.channel) + 1.0})
            return self._vector(self.base.table, two, middle)
        values = self.base.table.values.copy()
        values[term.group] += self.parts.channels[term.channel][term.group]
        return self._vector(IntegralTable(values, self.base.table.origin), _STILL, middle)

    def _vector(self, table: IntegralTable, moved: Moved, middle: Figures) -> Array:
        done = self._put_together(table, moved)
        return np.concatenate([middle.like(figures(done)), table.values.ravel()])


def _is_linear(path: Path) -> bool:
    if path[:2] in (("frame", "power_on_hardware"), ("frame", "about_axis")):
        return path[-1] != "relative"
    if path[0] not in _LINEAR:
        return False
    keys = _LINEAR[path[0]]
    return keys is None or path[-1] in keys


def _storage_times(storage: Storage, factor: float, mass_rate: float) -> Storage:
    if storage.basis == "given":
        return replace(storage, mass=storage.mass + mass_rate) if mass_rate != 0.0 else storage
    if factor == 1.0:
        return storage
    return replace(
        storage,
        mass=factor * storage.mass,
        momentum=factor * storage.momentum,
        angular_momentum=factor * storage.angular_momentum,
        energy=None if storage.energy is None else factor * storage.energy,
        mass_moment=None if storage.mass_moment is None else factor * storage.mass_moment,
        inertia=None if storage.inertia is None else factor * storage.inertia,
    )


def _contents_times(contents: Contents, factor: float) -> Contents:
    if factor == 1.0:
        return contents

    def times(value: Array | None) -> Array | None:
        return None if value is None else factor * value

    return replace(
        contents,
        mass=None if contents.mass is None else factor * contents.mass,
        mass_moment=times(contents.mass_moment),
        mass_inertia=times(contents.mass_inertia),
        momentum=times(contents.momentum),
        moment_of_velocity=times(contents.moment_of_velocity),
        kinetic_energy=None if contents.kinetic_energy is None else factor * contents.kinetic_energy,
        internal_energy=None if contents.internal_energy is None else factor * contents.internal_energy,
    )
