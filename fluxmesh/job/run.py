"""The main job: a surface and a flow to a balance with its verdict, from a case or from arrays."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fluxmesh.assess.assumptions import assumptions_of
from fluxmesh.assess.comparison import Comparison, compare_reported
from fluxmesh.assess.verdict import Verdict, verdict_of
from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.setting import GroupData, Hardware, Setting
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError
from fluxmesh.field.flow import Flow, integrate_flow
from fluxmesh.field.pressure import Head
from fluxmesh.integral.table import IntegralTable
from fluxmesh.job.laid import lay_case
from fluxmesh.job.mesh import Loaded
from fluxmesh.job.shape import read_shape
from fluxmesh.report.result import result_data
from fluxmesh.surface.surface import ControlSurface

__all__ = ["Outcome", "balance_of", "hardware_of", "run_case"]


@dataclass(frozen=True, eq=False)
class Outcome:
    """A job done.

    Attributes
    ----------
    title : str
        Title of the case.
    surface : ControlSurface
        The surface.
    flow : Flow
        The flow on it.
    balance : Balance
        Every law.
    verdict : Verdict
        Whether the numbers close.
    assumptions : tuple of str
        What the figures assume.
    comparison : Comparison or None
        A reported load beside ours.
    """

    title: str
    surface: ControlSurface
    flow: Flow
    balance: Balance
    verdict: Verdict
    assumptions: tuple[str, ...]
    comparison: Comparison | None = None

    def data(self) -> dict[str, Any]:
        """Return everything as plain data, the content of ``balance.json``."""
        return result_data(
            self.balance,
            self.verdict,
            title=self.title,
            assumptions=self.assumptions,
            notes=self.surface.notes,
            comparison=self.comparison,
        )


def _held_density(flow: Flow, table: IntegralTable) -> tuple[float | None, bool]:
    """Density of the fluid held, and whether it is only a mean over the surface."""
    one = flow.uniform_density()
    known = flow.density.present()
    if one is not None or not known.any():
        return one, False
    return float(table.total("density_area", known)) / float(table.total("area", known)), True


def balance_of(
    surface: ControlSurface,
    flow: Flow,
    *,
    anchor: Sequence[float] = (0.0, 0.0, 0.0),
    hardware: Hardware | None = None,
    tolerance: float = 0.01,
    encloses_hardware: bool = True,
    title: str = "",
    threads: int | None = None,
) -> Outcome:
    """Balance a flow over a surface and judge it.

    Parameters
    ----------
    surface : ControlSurface
        The surface, see `fluxmesh.control_surface`.
    flow : Flow
        The flow on it, see `fluxmesh.lay_flow`.
    anchor : sequence of 3 floats, optional
        Point that moments and the reaction are about, m.
    hardware : Hardware, optional
        Mass and centre of the device.
    tolerance : float, optional
        Largest relative residual that closes.
    encloses_hardware : bool, optional
        For a surface without walls: whether a body may be inside.
    title : str, optional
        Title for reports.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.

    Returns
    -------
    Outcome
        Balance, verdict and assumptions.

    Raises
    ------
    FieldError
        An anchor that is no point, or fields that cannot be integrated.
    """
    at = [float(x) for x in anchor]
    if len(at) != 3 or not np.isfinite(at).all():
        raise FieldError(f"anchor is {anchor!r}", remedy="Three finite coordinates in metres are needed")
    table = integrate_flow(surface, flow, threads=threads)
    density, estimated = _held_density(flow, table)
    flux = (flow.velocity.present() | flow.mass_flux.present()) & flow.density.present()
    setting = Setting(
        groups=surface.groups,
        data=GroupData(flux, flow.pressure.present(), flow.traction.present()),
        closed=surface.closed,
        gravity=flow.gravity,
        fluid_density=density,
        anchor=(at[0], at[1], at[2]),
        hardware=hardware,
    )
    done = balance_table(table, setting)
    assumptions = assumptions_of(
        done,
        ambient=flow.ambient,
        estimated_density=estimated,
        head_restored=flow.meaning.head is Head.REMOVED and bool(np.any(flow.gravity)),
    )
    verdict = verdict_of(done, tolerance=tolerance, encloses_hardware=encloses_hardware)
    return Outcome(title, surface, flow, done, verdict, assumptions)


def hardware_of(case: Case) -> Hardware | None:
    """Return the hardware of a case, or None when its mass is not given.

    Parameters
    ----------
    case : Case
        A case that was read.
    """
    if case.hardware is None or case.hardware.mass is None:
        return None
    return Hardware(float(case.hardware.mass), case.hardware.centre or (0.0, 0.0, 0.0))


def run_case(case: Case, *, loaded: Loaded | None = None, threads: int | None = None) -> Outcome:
    """Do the main job for a case.

    Parameters
    ----------
    case : Case
        A case that was read.
    loaded : Loaded, optional
        Its mesh, if it was read before.
    threads : int, optional
        Threads; all cores by default.

    Returns
    -------
    Outcome
        Balance, verdict and assumptions.

    Raises
    ------
    InputError
        The input is at fault; the message says where.
    """
    shape = read_shape(case, loaded)
    flow = lay_case(case, shape)
    done = balance_of(
        shape.surface,
        flow,
        anchor=case.anchor.at,
        hardware=hardware_of(case),
        tolerance=case.closure.tolerance,
        encloses_hardware=case.closure.encloses_hardware,
        title=case.title or case.name,
        threads=threads,
    )
    asked = case.reported
    if asked is None:
        return done
    return replace(done, comparison=compare_reported(done.balance, force=asked.force, moment=asked.moment, on=asked.on))
