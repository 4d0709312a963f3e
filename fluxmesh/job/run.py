"""The main job: a surface and a flow to a balance with its verdict, from a case or from arrays."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Final

import numpy as np

from fluxmesh.assess.assumptions import assumptions_of
from fluxmesh.assess.comparison import compare_reported
from fluxmesh.assess.verdict import verdict_of
from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.losses import port_losses
from fluxmesh.balance.setting import GroupData, Hardware, Setting
from fluxmesh.balance.storage import Storage
from fluxmesh.case.model import Case
from fluxmesh.errors import FieldError
from fluxmesh.field.contents import Contents
from fluxmesh.field.flow import Flow, integrate_flow
from fluxmesh.field.port_samples import sample_ports
from fluxmesh.field.pressure import Head
from fluxmesh.integral.layout import PER_GROUP
from fluxmesh.integral.table import IntegralTable
from fluxmesh.job.fluid import named_fluid
from fluxmesh.job.inside import contents_in, storage_in
from fluxmesh.job.laid import lay_with_scalars
from fluxmesh.job.mesh import Loaded
from fluxmesh.job.outcome import Outcome
from fluxmesh.job.scalars import Scalars, balance_scalars
from fluxmesh.job.shape import read_shape
from fluxmesh.surface.surface import ControlSurface

__all__ = ["REVIEWED_FACES", "Outcome", "balance_of", "hardware_of", "run_case"]

REVIEWED_FACES: Final = 300_000
"""Most faces that `balance` reviews for doubts on the way: beyond, that costs more than the balance."""


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
    gas_constant: float | None = None,
    scalars: Scalars | None = None,
    losses: Sequence[tuple[tuple[str, str], str | None]] = (),
    storage: Storage | None = None,
    contents: Contents | None = None,
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
        Ratio of the heats of an ideal gas, for Mach numbers and total pressures.
    gas_constant : float, optional
        Of an ideal gas, J/(kg K), for temperatures.
    scalars : Scalars, optional
        What is known of temperature, enthalpy and other carried scalars.
    losses : sequence of ((str, str), str or None), optional
        Pairs of ports to give the loss between, and the port whose speed it refers to.
    storage : Storage, optional
        Rates of what the volume holds, seen from the control surface; steady by default.
    contents : Contents, optional
        What the volume holds, of velocity relative to the control surface: for what
        the surface alone cannot tell where it turns, or where the density varies.
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
        frame=flow.frame,
    )
    restored = flow.meaning.head is Head.REMOVED and bool(np.any(flow.gravity))
    thermal = Scalars() if scalars is None else scalars
    ports = sample_ports(
        surface, flow, table, temperature=thermal.temperature, heat_ratio=heat_ratio, gas_constant=gas_constant
    )
    if mirror:
        from fluxmesh.balance.mirror import whole_model

        table, setting = whole_model(table, setting, head_restored=restored)
    done = balance_table(table, setting, storage=storage, contents=contents, ports=ports)
    assumptions = assumptions_of(
        done,
        ambient=flow.ambient,
        estimated_density=estimated,
        head_restored=restored,
        mirrored=mirror,
    )
    assumptions += tuple(_viscous_estimates(surface, flow, mirror))
    assumptions += tuple(f"At {name} {note}" for name, port in ports.items() for note in port.notes)
    energy, carried = balance_scalars(surface, flow, done, thermal, storage=storage, mirror=mirror, threads=threads)
    verdict = verdict_of(done, tolerance=tolerance, encloses_hardware=encloses_hardware, energy=energy, carried=carried)
    return Outcome(
        title,
        surface,
        flow,
        done,
        verdict,
        assumptions,
        energy=energy,
        carried=carried,
        losses=port_losses(done.table, done.setting, done.ports, losses),
    )


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


def run_case(
    case: Case,
    *,
    loaded: Loaded | None = None,
    threads: int | None = None,
    storage: Storage | None = None,
    contents: Contents | None = None,
) -> Outcome:
    """Do the main job for a case.

    Parameters
    ----------
    case : Case
        A case that was read.
    loaded : Loaded, optional
        Its mesh, if it was read before.
    threads : int, optional
        Threads; all cores by default.
    storage : Storage, optional
        Rates of what the volume holds, in place of those that the case gives.
    contents : Contents, optional
        What the volume holds, in place of the volume that the case gives.

    Returns
    -------
    Outcome
        Balance, verdict and assumptions.

    Raises
    ------
    InputError
        The input is at fault; the message says where.
    """
    case, said = named_fluid(case)
    shape = read_shape(case, loaded)
    flow, scalars = lay_with_scalars(case, shape)
    fluid = case.fluid
    done = balance_of(
        shape.surface,
        flow,
        anchor=case.anchor.at,
        hardware=hardware_of(case),
        tolerance=case.closure.tolerance,
        encloses_hardware=case.closure.encloses_hardware,
        title=case.title or case.name,
        mirror=case.surface.mirror,
        heat_ratio=None if fluid.heat_ratio is None else float(fluid.heat_ratio),
        gas_constant=None if fluid.gas_constant is None else float(fluid.gas_constant),
        scalars=scalars,
        losses=[((loss.between[0], loss.between[1]), loss.speed_of) for loss in case.loss],
        storage=storage_in(case, shape) if storage is None else storage,
        contents=contents_in(case, shape) if contents is None else contents,
        threads=threads,
    )
    files = [case.surface.file, *(case.surface.files or {}).values()]
    source = {
        "case": case.path.name,
        "case_sha256": case.sha256,
        "files": [file.name for file in files if file is not None],
        "length_unit": case.surface.length_unit.unit,
    }
    done = replace(done, source=source, shape=shape, said=said)
    asked = case.reported
    if asked is None:
        return done
    comparison = compare_reported(
        done.balance,
        force=asked.force,
        moment=asked.moment,
        on=asked.on,
        density=flow.uniform_density(),
    )
    return replace(done, comparison=comparison)
