"""The main job: a surface and a flow to a balance with its verdict, from a case or from arrays."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any, Final

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
from fluxmesh.integral.layout import PER_GROUP
from fluxmesh.integral.table import IntegralTable
from fluxmesh.job.laid import lay_case
from fluxmesh.job.mesh import Loaded
from fluxmesh.job.shape import Shape, read_shape
from fluxmesh.report.result import result_data
from fluxmesh.surface.surface import ControlSurface

__all__ = ["REVIEWED_FACES", "Outcome", "balance_of", "hardware_of", "run_case"]


if TYPE_CHECKING:
    from fluxmesh.assess.review import Doubt

REVIEWED_FACES: Final = 300_000
"""Most faces that `balance` reviews for doubts on the way: beyond, that costs more than the balance."""


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
    source : dict
        Names and hashes of the files that it came from.
    shape : Shape or None
        The surface with the arrays of its file; None without a case.
    doubts : tuple of Doubt or None
        What a review found; None where there was none.
    """

    title: str
    surface: ControlSurface
    flow: Flow
    balance: Balance
    verdict: Verdict
    assumptions: tuple[str, ...]
    comparison: Comparison | None = None
    source: dict[str, Any] = field(default_factory=dict)
    shape: Shape | None = None
    doubts: tuple[Doubt, ...] | None = None

    @property
    def notes(self) -> tuple[str, ...]:
        """What was mended, sampled or solved on the way, one sentence each."""
        return (*self.surface.notes, *self.flow.notes)

    def picture_notes(self) -> tuple[str, ...]:
        """Return what must stand in a picture: verdict, moment of the reaction, assumptions."""
        verdict = {True: "closes", False: "DOES NOT CLOSE", None: "cannot be judged in full"}[self.verdict.closes]
        said = [f"Verdict: the balance {verdict}"]
        said += [f"DOUBT: {doubt.seen}" for doubt in self.doubts or ()]
        if self.balance.reaction is not None:
            moment = ", ".join(f"{x:.4g}" for x in self.balance.reaction.wrench.moment)
            said.append(f"With the reaction at the anchor goes a moment of ({moment}) N m")
        return (*said, *self.assumptions)

    def data(self) -> dict[str, Any]:
        """Return everything as plain data, the content of ``balance.json``."""
        return result_data(
            self.balance,
            self.verdict,
            title=self.title,
            assumptions=self.assumptions,
            notes=self.notes,
            comparison=self.comparison,
            inputs=self.inputs(),
            doubts=self.doubts,
        )

    def inputs(self) -> dict[str, Any]:
        """Return what the figures were computed from, SI units."""
        setting = self.balance.setting
        hardware = setting.hardware
        return {
            "density": self.flow.uniform_density(),
            "density_of_fluid_held": setting.fluid_density,
            "ambient_pressure": self.flow.ambient,
            "gravity": setting.gravity,
            "pressure": {"kind": self.flow.meaning.kind.value, "head": self.flow.meaning.head.value},
            "anchor": setting.anchor,
            "hardware": None if hardware is None else {"mass": hardware.mass, "centre": hardware.centre},
            "sampling": self.flow.sampling,
            **self.source,
        }


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
    mirror: bool = False,
    heat_ratio: float | None = None,
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
    mirror : bool, optional
        Whether a part model, cut at its symmetry groups, is reported whole.
    heat_ratio : float, optional
        Ratio of the heats of an ideal gas, for Mach numbers.
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
        supplied=tuple(
            group.name
            for k, group in enumerate(surface.groups)
            if group.role.is_port and PER_GROUP in (flow.velocity.where[k], flow.pressure.where[k])
        ),
        heat_ratio=heat_ratio,
        ambient=flow.ambient,
    )
    restored = flow.meaning.head is Head.REMOVED and bool(np.any(flow.gravity))
    if mirror:
        from fluxmesh.balance.mirror import whole_model

        table, setting = whole_model(table, setting, head_restored=restored)
    done = balance_table(table, setting)
    assumptions = assumptions_of(
        done,
        ambient=flow.ambient,
        estimated_density=estimated,
        head_restored=restored,
        mirrored=mirror,
    )
    assumptions += tuple(_viscous_estimates(surface, flow, mirror))
    verdict = verdict_of(done, tolerance=tolerance, encloses_hardware=encloses_hardware)
    return Outcome(title, surface, flow, done, verdict, assumptions)


def _viscous_estimates(surface: ControlSurface, flow: Flow, mirrored: bool) -> list[str]:
    """What is known of the size of viscous forces that are left out at ports."""
    # of a part model the estimates would be those of the part
    if flow.viscosity is None or mirrored:
        return []
    from fluxmesh.field.port_viscous import port_viscous_estimate

    said = []
    for k, group in enumerate(surface.groups):
        if group.role.is_port and not flow.traction.present()[k]:
            estimate = port_viscous_estimate(surface, flow, k, flow.viscosity)
            if estimate is not None:
                said.append(f"Of the viscous force left out at {group.name}: {estimate.text}")
    return said


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
        mirror=case.surface.mirror,
        heat_ratio=None if case.fluid.heat_ratio is None else float(case.fluid.heat_ratio),
        threads=threads,
    )
    files = [case.surface.file, *(case.surface.files or {}).values()]
    source = {
        "case": case.path.name,
        "case_sha256": case.sha256,
        "files": [file.name for file in files if file is not None],
        "length_unit": case.surface.length_unit.unit,
    }
    done = replace(done, source=source, shape=shape)
    asked = case.reported
    if asked is None:
        return done
    return replace(done, comparison=compare_reported(done.balance, force=asked.force, moment=asked.moment, on=asked.on))
