"""Slips of the model as a whole: half of it taken for all, or a computation that has not settled."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.facts import Source
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect
from fluxmesh.surface.surface import Role

__all__ = ["half_model", "not_converged"]

_MOST: Final = 0.25  # mass residual over all flows beyond which it is no lack of convergence
_ALIKE: Final = 3.0  # momentum residuals may be as much larger than the mass residual


def half_model(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect figures of the whole given for a half model, or the other way round.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        For supplied flows beside exported ones, and for rates of what is inside.
    """
    del now
    facts, setting = entries.facts, entries.balance.setting
    symmetric = facts.mirrored or any(group.role is Role.SYMMETRY for group in setting.groups)
    cost = COST["common" if symmetric else "rare"]
    supplied = facts.supplied()
    names = [name for name, given in zip(entries.names(), supplied) if given]
    lists = ", ".join(names)
    keys = {Source.FLOW_RATE: "flow_rate", Source.MASS_FLOW: "mass_flow", Source.VELOCITY: "velocity"}
    if supplied.any() and np.any(entries.mass[~supplied] != 0.0):
        where = " and ".join(f"groups.{name}.{keys[facts.flow[entries.names().index(name)]]}" for name in names)
        yield Suspect(
            "half-model",
            Change(supplied=0.5),
            f"the flow supplied for {lists} is that of the whole, and half of it is modelled",
            f"halve {where}",
            cost,
        )
        yield Suspect(
            "half-model",
            Change(supplied=2.0),
            f"the flow supplied for {lists} is that of a half, and the whole is modelled",
            f"double {where}",
            cost + 1.0,
        )
    if entries.stored_mass or entries.stored.any():
        for factor, said in (
            (2.0, "those of the half, and the whole is balanced"),
            (0.5, "those of the whole, and half of it is balanced"),
        ):
            yield Suspect(
                "half-model",
                Change(storage=factor),
                f"the rates in [storage] are {said} is balanced",
                f"multiply the rates in [storage] by {factor:g}",
                cost + 0.5,
            )


def not_converged(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect a computation that has not settled: mass lacks a little, and momentum about as much.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are.

    Yields
    ------
    Suspect
        None where mass closes, is not judged, or where nothing was exported.
    """
    if not entries.laws.mass or not entries.facts.exported().any() or entries.open:
        return
    del now

    def words(_fitted: NDArray[np.float64], left: Residuals) -> tuple[str, str] | None:
        lacking = float(left.mass_relative()[0])
        momentum = float(np.max(left.relative()[0])) if entries.laws.linear else 0.0
        if not 1e-3 < lacking < _MOST or momentum > _ALIKE * lacking:
            return None
        said = (
            f"the computation has not settled: mass lacks {lacking:.2%} of the flows"
            + (f", momentum up to {momentum:.2%} of its entries" if entries.laws.linear else "")
            + ", and no other cause fits"
        )
        return said, "run the computation on until mass closes, and export anew"

    yield Suspect(
        "not-converged",
        Change(),
        "the computation has not settled",
        "",
        COST["common"],
        expected=1.0,
        words=words,
    )
