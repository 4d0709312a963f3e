"""The doubt of every figure of a case: its inputs found, the balance run again by algebra, the table sharpened."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.budget import (
    Budget,
    Contribution,
    left_after_sharpening,
    mesh_contributions,
    off_the_facets,
    round_off,
)
from fluxmesh.assess.doubt.figures import Figures
from fluxmesh.assess.doubt.inputs import NORMAL_95, Input, Sensitivity
from fluxmesh.assess.doubt.levers import HeadOf, Levers, parts_of, pulled
from fluxmesh.assess.doubt.model import BalanceModel
from fluxmesh.assess.doubt.off_facets import off_facets
from fluxmesh.assess.doubt.sampling import SampledErrors, sampling_contributions
from fluxmesh.assess.doubt.told import DoubtOfFigures
from fluxmesh.balance.balance import Balance
from fluxmesh.case.model import Case
from fluxmesh.errors import InputError
from fluxmesh.field.field import Field
from fluxmesh.field.flow import Flow, near_origin
from fluxmesh.field.pressure import Head
from fluxmesh.integral.layout import AT_FACE, AT_SAMPLE, PER_GROUP
from fluxmesh.integral.table import IntegralTable
from fluxmesh.job.doubtful import doubtful_inputs
from fluxmesh.job.fluid import named_fluid
from fluxmesh.job.laid import lay_sharpened
from fluxmesh.job.outcome import Outcome

__all__ = ["DoubtOfFigures", "doubt_of"]

Array = NDArray[np.float64]

_SINGLE: Final = 2.0**-24  # relative rounding of single precision


def doubt_of(
    case: Case | None,
    outcome: Outcome,
    *,
    draws: int = 0,
    seed: int = 0,
    sharpen: bool = True,
    facets_are_geometry: bool = False,
    shapes: Mapping[str, str] | None = None,
    threads: int | None = None,
) -> DoubtOfFigures:
    """Return the doubt of every figure of an outcome.

    Parameters
    ----------
    case : Case or None
        The case; None where the outcome came from arrays, whose inputs have no doubt.
    outcome : Outcome
        What was made of it.
    draws : int, optional
        Draws of the inputs for a Monte Carlo run; none by default.
    seed : int, optional
        The same seed gives the same draws.
    sharpen : bool, optional
        Whether to sharpen the table: without it nothing is said of interpolation and geometry.
    facets_are_geometry : bool, optional
        Whether the facets are the surface that the flow was computed within, so that they
        stand for no curved one.
    shapes : mapping of str to str, optional
        Distribution of inputs by name, ``normal`` or ``rectangular``; normal by default.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    DoubtOfFigures
        Half widths of 95 % intervals. What comes only from quadrature over the ports (means by momentum,
        uniformity, totals of a gas) has none.

    Raises
    ------
    InputError
        A case that cannot be run with an input moved within its own doubt.
    """
    balance, flow = outcome.balance, outcome.flow
    names = [group.name for group in outcome.surface.groups]
    rows = np.array([names.index(group.name) for group in balance.setting.groups], np.int64)
    found = doubtful_inputs(case, outcome, rows, dict(shapes or {}), threads)
    parts = parts_of(
        balance.table,
        head=_head(flow, rows),
        mass_given=np.asarray(flow.mass_flux.where[rows] == AT_FACE),
    )
    model = BalanceModel(balance, parts, found.recipe, found.inputs, found.further, found.rerun)
    middle, slope = model.sensitivity()
    contributions: list[Contribution] = _of_inputs(found.inputs, slope)
    notes = list(found.notes)
    sharp, left = None, 1.0
    if sharpen:
        finer, said = _finer(case, outcome)
        notes += said
        flat, curved = (_as_supplied(_sharpened(outcome, finer, flat, threads), case, model) for flat in (True, False))

        def figured(table: IntegralTable) -> Figures:
            return model.figures_of(table, _held(flow, table, balance, rows))

        best = flat if facets_are_geometry else curved
        sharp = model.balance_of(best, _held(flow, best, balance, rows))
        contributions += mesh_contributions(middle, figured(flat), None if facets_are_geometry else figured(curved))
        left = left_after_sharpening(balance.table, flat, None if facets_are_geometry else curved)
        if facets_are_geometry:
            contributions.append(off_the_facets(middle, figured(flat), figured(off_facets(flat, curved))))
    else:
        notes.append("The doubt is without that of interpolation on the mesh and of flat facets")
    if balance.contents is not None or balance.storage.basis != "given":
        notes.append(
            "What the volume holds, and its rates, count as exact in the doubt: it does not know what the cells of the "
            "volume and the steps in time leave"
        )
    if flow.sampling is not None:
        contributions += sampling_contributions(model, middle, _sampled(flow, balance, rows))
        notes.append(
            "Sampled groups: the doubt holds how well points that are left out are predicted, or what the cells of the "
            "volume leave between their nodes and how far points lie outside them"
        )
    contributions.append(round_off(middle, balance, digits=_digits(flow, outcome.surface.face_count)))
    drawn = model.draw(draws, seed=seed, answer=(middle, slope)) if draws and found.inputs else None
    return DoubtOfFigures(
        middle,
        Budget(middle, tuple(contributions), left),
        found.inputs,
        sharp,
        drawn,
        tuple(notes),
    )


def _of_inputs(inputs: Sequence[Input], slope: Sensitivity) -> list[Contribution]:
    return [Contribution(one.name, "input", NORMAL_95 * np.abs(slope.linear[k])) for k, one in enumerate(inputs)]


def _head(flow: Flow, rows: NDArray[np.int64]) -> HeadOf | None:
    density = flow.uniform_density()
    if flow.meaning.head is not Head.REMOVED or density is None:
        return None
    exported = np.asarray(flow.pressure.where[rows] > PER_GROUP)
    return HeadOf(density, flow.gravity, flow.meaning.datum, exported)


def _held(flow: Flow, table: IntegralTable, balance: Balance, rows: NDArray[np.int64]) -> float | None:
    """Density of the fluid held: as it was, but where it is a mean over the surface that of the table."""
    before = balance.setting.fluid_density
    known = flow.density.present()[rows]
    if before is None or flow.uniform_density() is not None or not known.any():
        return before
    return float(table.total("density_area", known)) / float(table.total("area", known))


def _finer(case: Case | None, outcome: Outcome) -> tuple[Flow, list[str]]:
    """The flow with what is sampled from a volume taken to one order more than its cells have, and what that leaves."""
    flow, told = outcome.flow, outcome.flow.sampling or {}
    if case is None or outcome.shape is None or told.get("share_exact") is None:
        return flow, []
    try:
        finer, share = lay_sharpened(named_fluid(case)[0], outcome.shape)
    except InputError as error:
        # the values in between may be no flow, where those of the file are
        return flow, [f"The doubt is without that of interpolation in the cells of the volume: {error.found}"]
    if share is not None and share < 1.0:
        left = f"{1.0 - share:.2%} of the quadrature points lie in quadratic cells of the volume"
        return finer, [f"{left}: of the interpolation within these the doubt knows nothing"]
    return finer, []


def _sharpened(outcome: Outcome, flow: Flow, flat: bool, threads: int | None) -> IntegralTable:
    """The sharpened table of the groups of the balance, on the facets or on the surface that they stand for."""
    from fluxmesh.field.patches import sharpened_table

    surface, balance = outcome.surface, outcome.balance
    table = sharpened_table(surface, flow, facets_are_geometry=flat, origin=near_origin(surface), threads=threads)
    if len(balance.setting.groups) == len(surface.groups):
        return table
    from fluxmesh.balance.mirror import whole_model
    from fluxmesh.balance.setting import GroupData

    every = np.ones(len(surface.groups), np.bool_)
    part = replace(balance.setting, groups=surface.groups, data=GroupData(every, every, every))
    return whole_model(table, part, head_restored=False)[0]


def _as_supplied(table: IntegralTable, case: Case | None, model: BalanceModel) -> IntegralTable:
    """A sharpened table whose ports carry the flow that the case supplies: it does not hang on their area."""
    if case is None:
        return table
    before, now = (one.column("volume_flow") for one in (model.base.table, table))
    speed = np.ones(len(now))
    solved = None
    for k, group in enumerate(model.base.setting.groups):
        section = case.groups[group.name]
        if (section.flow_rate is not None or section.mass_flow is not None) and now[k] != 0.0:
            speed[k] = before[k] / now[k]
        solved = k if section.from_continuity else solved
    if solved is not None and now[solved] != 0.0:
        mass = speed * table.column("mass_flow")
        mass[solved] = 0.0
        speed[solved] = -mass.sum() / table.column("mass_flow")[solved]
    if (speed == 1.0).all():
        return table
    return pulled(parts_of(table), replace(Levers.at_rest(speed.shape), speed=speed))


def _sampled(flow: Flow, balance: Balance, rows: NDArray[np.int64]) -> SampledErrors:
    """Errors of sampled fields: of the leave-out test of a cloud, or of points outside a volume."""
    told = flow.sampling or {}
    leave_out = told.get("leave_out_relative")
    errors: dict[str, float] = dict(leave_out) if isinstance(leave_out, Mapping) else {}
    share, farthest = told.get("share_exact"), told.get("farthest")
    if isinstance(share, float) and isinstance(farthest, float) and share < 1.0:
        # what lies outside comes from the nearest cell: off by that part of the range that the way is of the surface
        size = float(np.sqrt(balance.table.total("area")))
        errors = dict.fromkeys(
            ("velocity", "pressure", "density", "traction"), (1.0 - share) * min(farthest / size, 1.0)
        )
    area = balance.table.column("area")
    sizes = {
        "velocity": balance.table.column("speed_area"),
        "density": balance.table.column("density_area"),
        "traction": np.linalg.norm(balance.table.column("viscous_force"), axis=1),
        "pressure": area,
    }
    found: dict[str, Array] = {}
    for field in (flow.velocity, flow.pressure, flow.density, flow.traction):
        quantity = field.name
        error = errors.get(quantity, 0.0)
        here = np.asarray(field.where[rows] == AT_SAMPLE) & (sizes[quantity] > 0.0)
        if error > 0.0 and here.any() and field.sample.size:
            width = np.zeros(len(rows))
            width[here] = error * _range(field) * area[here] / sizes[quantity][here]
            found[quantity] = width
    return SampledErrors(found)


def _range(field: Field) -> float:
    """Range of a sampled field, of a vector the length of the ranges of its components; SI."""
    samples = field.sample.reshape(len(field.sample), -1)
    samples = samples[np.isfinite(samples).all(axis=1)]
    if not len(samples):
        return 0.0
    return abs(field.scale) * float(np.linalg.norm(np.ptp(samples, axis=0)))


def _digits(flow: Flow, faces: int) -> float:
    """Relative rounding that data in single precision bring to a sum over the faces, where they err independently."""
    for field in (flow.pressure, flow.velocity):
        for values in (field.node, field.face):
            with np.errstate(over="ignore"):
                single = values.astype(np.float32) == values
            if values.size and bool(single.all()) and not _short(values):
                return float(2 * _SINGLE / max(faces, 1) ** 0.5)
    return 0.0


def _short(values: Array) -> bool:
    """Whether all numbers have so few binary digits that nothing was rounded off: 0, 2.5 or 500."""
    digits = np.ldexp(np.frexp(values)[0], 12)
    return bool((digits == np.round(digits)).all())
