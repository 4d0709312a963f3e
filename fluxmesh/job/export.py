"""A case done and handed on to other programs."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from fluxmesh.case.model import Case
    from fluxmesh.job.outcome import Outcome
    from fluxmesh.report.export_faces import FaceScalar

__all__ = ["export_case", "export_scalars"]


def export_case(path: Path, *, out: Path | None = None) -> list[Path]:
    """Do a case and write its surface with all face fields, its force vectors and its ledgers.

    Parameters
    ----------
    path : Path
        Case file.
    out : Path, optional
        Folder; ``results/<case name>/export`` by default. It is made if it is not there.

    Returns
    -------
    list of Path
        The files that were written.

    Raises
    ------
    FluxmeshError
        A case that cannot be used, or a folder that cannot be written to.
    """
    from fluxmesh.case.read import read_case
    from fluxmesh.report.whole import require_writable

    case = read_case(path)
    folder = out if out is not None else Path("results") / case.name / "export"
    require_writable(folder)

    from fluxmesh.job.done import done_case
    from fluxmesh.report.export import write_export

    done = done_case(case, budget=True)
    remarks = ["The ledgers are sharpened by quadratic patches; the arrays here are the plain ones"]
    return write_export(
        folder,
        done.surface,
        done.flow,
        done.balance,
        done.data(),
        export_scalars(case, done),
        remarks=remarks if done.sharpened_reported else (),
    )


def export_scalars(case: Case, done: Outcome) -> list[FaceScalar]:
    """Return what the flow carries beside mass and momentum, as its face fields are named.

    Parameters
    ----------
    case : Case
        The case.
    done : Outcome
        What it gave.

    Returns
    -------
    list of FaceScalar
        Temperature, enthalpy and carried scalars, those that the case has; for a series of instants none.
    """
    from fluxmesh.job.fluid import named_fluid
    from fluxmesh.job.laid import lay_with_scalars
    from fluxmesh.report.export_faces import FaceScalar

    series = case.storage is not None and case.storage.is_series()
    thermal = done.energy is not None and done.energy.basis != "mechanical"
    if series or done.shape is None or not (thermal or done.carried):
        return []
    case, _ = named_fluid(case)
    _, scalars = lay_with_scalars(case, done.shape)
    found = []
    flow = "enthalpy_flow_out_W"
    if thermal and scalars.enthalpy is not None:
        found.append(FaceScalar(scalars.enthalpy, "enthalpy_J_per_kg", flow))
    elif thermal and scalars.temperature is not None and scalars.heat_capacity is not None:
        liquid = done.flow.uniform_density() is not None and not scalars.gas
        found.append(
            FaceScalar(scalars.temperature, "temperature_K", flow, with_flow_work=liquid, factor=scalars.heat_capacity)
        )
    for scalar in scalars.carried:
        name = f"carried_{scalar.field.name}"
        found.append(FaceScalar(scalar.field, f"{name}_mean", f"{name}_flow_out", per=scalar.per))
    return found
