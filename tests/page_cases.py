"""Shipped cases run once, as what a report page is made of."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import fluxmesh
from fluxmesh.case.read import read_case
from fluxmesh.job.check import with_doubts
from fluxmesh.job.done import done_case
from fluxmesh.job.doubted import with_budget
from fluxmesh.job.governing import governing_instant
from fluxmesh.job.series import run_series
from fluxmesh.report.scene import Scene
from fluxmesh.report.sketch import scene_of

MESHES = Path(fluxmesh.__file__).parent.parent / "meshes"
SHIPPED = {path.stem: path for path in sorted(MESHES.glob("*/*.toml"))}


@dataclass(frozen=True)
class Made:
    """What a page is made of."""

    data: dict[str, Any]
    scene: Scene
    series: dict[str, Any] | None
    case_text: str

    def extra(self) -> dict[str, Any]:
        return {"case_text": self.case_text} | ({"series": self.series} if self.series else {})


@cache
def made(name: str) -> Made:
    """Run a shipped case as `balance` does it, with the doubt of every figure."""
    case, series = read_case(SHIPPED[name]), None
    if case.storage is not None and case.storage.is_series():
        whole = run_series(case, progress=None)
        series = whole.data()
        at, done = governing_instant(case, whole)
        done = with_budget(at, with_doubts(at, done))
    else:
        done = done_case(case, budget=True)
    scene = scene_of(done.title, done.surface, done.flow, done.balance, notes=done.picture_notes())
    return Made(done.data(), scene, series, SHIPPED[name].read_text("utf-8"))
