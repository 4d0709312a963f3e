"""What a case may ask: one model a table of the file, values in SI."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from pydantic import AfterValidator, Field, model_validator

from fluxmesh.case.arrays import FlowSection
from fluxmesh.case.budgets import CarriedSection, EnergySection, LossSection
from fluxmesh.case.checks import flow_problems, group_problems, section_problems
from fluxmesh.case.groups import GroupSection
from fluxmesh.case.motion import FrameSection, StorageSection
from fluxmesh.case.motion_checks import budget_problems, motion_problems
from fluxmesh.case.naming import naming_problems
from fluxmesh.case.problems import ProblemList
from fluxmesh.case.sections import (
    AnchorSection,
    ClosureSection,
    FluidSection,
    HardwareSection,
    ReportedSection,
    SurfaceSection,
)
from fluxmesh.case.values import Table, Title
from fluxmesh.errors import CaseError
from fluxmesh.units.wording import quoted

__all__ = ["Case", "CaseTables"]


def _named(groups: dict[str, GroupSection]) -> dict[str, GroupSection]:
    if not groups:
        raise CaseError("there is no group", remedy="Write a table [groups.NAME] with a role for each face group")
    for name in groups:
        if not name.strip() or name != name.strip() or not name.isprintable():
            raise CaseError(
                f"the group name {quoted(name)} is empty, starts or ends blank, or does not print",
                remedy="Give the group a plain name, and its faces by tag",
            )
    return groups


class CaseTables(Table):
    """The tables of a case file, each valid in itself and together.

    Attributes
    ----------
    title : str
        Heads the report.
    surface : SurfaceSection
        The mesh and how its groups are named.
    fluid : FluidSection
        Properties of the fluid.
    flow : FlowSection
        Which exported array is what.
    groups : dict of str to GroupSection
        The face groups, in the order of the file; at least one.
    frame : FrameSection or None
        Motion of the control surface; None where it stands.
    storage : StorageSection or None
        Rates of what it holds; None where they are zero.
    energy : EnergySection or None
        Heat and shaft power.
    carried : tuple of CarriedSection
        Scalars that the flow carries.
    loss : tuple of LossSection
        Loss coefficients wanted.
    hardware : HardwareSection or None
        Mass of the hardware.
    anchor : AnchorSection
        Where it is held.
    closure : ClosureSection
        When a balance counts as closed.
    reported : ReportedSection or None
        What the solver printed; compared, never used.
    """

    title: Title = ""
    surface: SurfaceSection = Field(description="a table [surface] with the file of the mesh")
    fluid: FluidSection = Field(default_factory=FluidSection)
    flow: FlowSection = Field(default_factory=FlowSection)
    groups: Annotated[dict[str, GroupSection], AfterValidator(_named)] = Field(
        description="a table [groups.NAME] with a role for each face group"
    )
    frame: FrameSection | None = None
    storage: StorageSection | None = None
    energy: EnergySection | None = None
    carried: Annotated[tuple[CarriedSection, ...], Field(strict=False)] = ()
    loss: Annotated[tuple[LossSection, ...], Field(strict=False)] = ()
    hardware: HardwareSection | None = None
    anchor: AnchorSection = Field(default_factory=AnchorSection)
    closure: ClosureSection = Field(default_factory=ClosureSection)
    reported: ReportedSection | None = None

    @model_validator(mode="after")
    def _fit_together(self) -> CaseTables:
        problems = [
            *naming_problems(self.surface, self.groups, series=self.storage is not None and self.storage.is_series()),
            *group_problems(self.fluid, self.flow, self.groups),
            *flow_problems(self.fluid, self.flow),
            *section_problems(self.fluid, self.groups, self.hardware, self.closure, self.reported),
        ]
        problems += motion_problems(self.surface, self.flow, self.groups, self.frame, self.storage)
        problems += budget_problems(self.fluid, self.flow, self.groups, self.energy, self.carried, self.loss)
        if problems:
            raise ProblemList(problems)
        return self


class Case(CaseTables):
    """A case and where it was read.

    Attributes
    ----------
    path : Path
        The case file.
    sha256 : str
        Hash of its bytes, in hexadecimal.
    """

    path: Path
    sha256: str

    @property
    def name(self) -> str:
        """Name of the case: that of its file without the suffix, never one that leads to another folder."""
        return self.path.stem.strip(". ") or "case"

    @property
    def folder(self) -> Path:
        """Folder of the case file, from which its paths start."""
        return self.path.parent
