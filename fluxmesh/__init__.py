"""fluxmesh: mass and momentum balances over closed, tagged surfaces.

The Python door to the main job, on arrays and without files::

    surface = fluxmesh.control_surface(points, faces, {"feed": ("inlet", mask), ...})
    flow = fluxmesh.lay_flow(surface, density=998.2, velocity=u, pressure=p, traction=t)
    outcome = fluxmesh.balance_of(surface, flow, anchor=(0, 0, 0))
    outcome.balance.reaction, outcome.verdict

Public names load what they need on first use, so that importing the package is quick.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from fluxmesh.balance.balance import Balance
    from fluxmesh.balance.setting import Hardware
    from fluxmesh.balance.storage import Storage
    from fluxmesh.case.read import read_case
    from fluxmesh.errors import FluxmeshError
    from fluxmesh.field.contents import Contents
    from fluxmesh.field.flow import Flow, lay_flow
    from fluxmesh.field.frame import Frame
    from fluxmesh.field.pressure import PressureMeaning
    from fluxmesh.field.scalars import lay_scalar
    from fluxmesh.job.outcome import Outcome
    from fluxmesh.job.run import balance_of, run_case
    from fluxmesh.job.scalars import Carried, Scalars
    from fluxmesh.report.notebook import html_of
    from fluxmesh.surface.build import control_surface
    from fluxmesh.surface.surface import ControlSurface

__all__ = [
    "Balance",
    "Carried",
    "Contents",
    "ControlSurface",
    "Flow",
    "FluxmeshError",
    "Frame",
    "Hardware",
    "Outcome",
    "PressureMeaning",
    "Scalars",
    "Storage",
    "__version__",
    "balance_of",
    "control_surface",
    "html_of",
    "lay_flow",
    "lay_scalar",
    "read_case",
    "run_case",
]

__version__ = "0.1.0"

_HOMES = {
    "Balance": "fluxmesh.balance.balance",
    "Carried": "fluxmesh.job.scalars",
    "Contents": "fluxmesh.field.contents",
    "ControlSurface": "fluxmesh.surface.surface",
    "Flow": "fluxmesh.field.flow",
    "FluxmeshError": "fluxmesh.errors",
    "Frame": "fluxmesh.field.frame",
    "Hardware": "fluxmesh.balance.setting",
    "Outcome": "fluxmesh.job.outcome",
    "PressureMeaning": "fluxmesh.field.pressure",
    "Scalars": "fluxmesh.job.scalars",
    "Storage": "fluxmesh.balance.storage",
    "balance_of": "fluxmesh.job.run",
    "control_surface": "fluxmesh.surface.build",
    "html_of": "fluxmesh.report.notebook",
    "lay_flow": "fluxmesh.field.flow",
    "lay_scalar": "fluxmesh.field.scalars",
    "read_case": "fluxmesh.case.read",
    "run_case": "fluxmesh.job.run",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'fluxmesh' has no attribute '{name}'")
    from importlib import import_module

    value = getattr(import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
