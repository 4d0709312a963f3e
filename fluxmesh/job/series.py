"""The main job at every instant of a series."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np

from fluxmesh.assess.series import series_verdict
from fluxmesh.assess.verdict import Verdict
from fluxmesh.balance.balance import balance_table
from fluxmesh.balance.series import Instant, Series
from fluxmesh.balance.storage import (
    Storage,
    momentum_from_surface,
    rate_order,
    storage_from_contents,
    storage_from_momentum,
    unknown_storage,
)
from fluxmesh.balance.weight import Enclosed
from fluxmesh.balance.wrench import Vector
from fluxmesh.case.model import Case
from fluxmesh.case.motion import StorageSection
from fluxmesh.errors import CaseError, InputError, SurfaceError
from fluxmesh.field.contents import Contents
from fluxmesh.field.domain import require_same_domain
from fluxmesh.job.fluid import named_fluid
from fluxmesh.job.laid import frame_of
from fluxmesh.job.outcome import Outcome
from fluxmesh.job.run import run_case
from fluxmesh.job.storage import contents_over_time, frame_at, has_one_density, is_mechanical
from fluxmesh.report.series import series_data

__all__ = ["SeriesOutcome", "instant_case", "run_series"]

# of the volume, and of its cube root for the centroid: far above the rounding of a single-precision export
_SAME_SURFACE: Final = 1e-4


@dataclass(frozen=True, eq=False)
class SeriesOutcome:
    """A series done.

    Attributes
    ----------
    title : str
        Title of the case.
    series : Series
        Every law at every instant.
    verdict : Verdict
        Whether the numbers close.
    tolerance : float
        Largest residual that closes, as a share of the largest entries of the series.
    assumptions : tuple of str
        What the figures assume.
    notes : tuple of str
        What was mended, sampled or solved on the way, and how storage was found.
    source : dict
        Names and hashes of the files that it came from.
    """

    title: str
    series: Series
    verdict: Verdict
    tolerance: float
    assumptions: tuple[str, ...]
    notes: tuple[str, ...]
    source: dict[str, Any]

    def data(self) -> dict[str, Any]:
        """Return everything as plain data, the content of ``series.json``."""
        return series_data(
            self.series,
            self.verdict,
            title=self.title,
            assumptions=self.assumptions,
            notes=self.notes,
            inputs=self.source,
        )

    def verdict_words(self) -> str:
        """Return the judgement in a few words, for a picture."""
        word = {True: "closes", False: "DOES NOT CLOSE", None: "cannot be judged in full"}[self.verdict.closes]
        return f"Verdict: the series {word}"


def run_series(
    case: Case, *, threads: int | None = None, progress: Callable[[int, int], None] | None = None
) -> SeriesOutcome:
    """Do the main job at every instant of a case whose snapshots bring a surface each.

    Parameters
    ----------
    case : Case
        A case that was read; ``case.storage.is_series()`` holds.
    threads : int, optional
        Threads; all cores by default. The result does not depend on it.
    progress : callable, optional
        Told how many instants of how many are done.

    Returns
    -------
    SeriesOutcome
        The rates of storage come from the volumes, or for a fluid of one
        density from the surfaces; otherwise they are not known, and no load is demanded.

    Raises
    ------
    InputError
        The input is at fault; the message says where.
    """
    asked = case.storage
    if asked is None or not asked.is_series():
        raise CaseError("no series is given", where="storage.snapshots", remedy="Give every snapshot a surface")
    _require_followed(case)
    case, said = named_fluid(case)
    times = [float(snapshot.time) for snapshot in asked.snapshots]
    held: tuple[Contents, ...] | None = None
    if all(snapshot.volume is not None for snapshot in asked.snapshots):
        held = contents_over_time(case, asked, times[0], None)
    one_density = has_one_density(case)
    rates, how = _rates_ahead(case, times, held, one_density)
    assumed: list[tuple[str, ...]] = []
    notes: list[tuple[str, ...]] = []
    instants: list[Instant] = []
    for number, snapshot in enumerate(asked.snapshots):
        assert snapshot.surface is not None
        name = snapshot.surface.name
        done = _at_instant(case, asked, number, rates[number], None if held is None else held[number], threads)
        _require_same_surface(instants, done, name)
        if held is not None:
            _require_filled(held[number], done.balance.enclosed, asked, number)
        # the first says that the flow is unsteady at one instant, or steady by chance
        assumed.append(done.assumptions[1:])
        notes.append(done.notes)
        # the surface and its fields go: a series may not fit into memory
        instants.append(Instant(times[number], name, done.balance))
        if progress is not None:
            progress(number + 1, len(times))
    if held is None and one_density:
        rates = _rates_from_surfaces(times, instants)
    instants = [
        replace(one, balance=_with_storage(one, rate, None if held is None else held[k]))
        for k, (one, rate) in enumerate(zip(instants, rates))
    ]
    series = Series(tuple(instants))
    verdict = series_verdict(series, tolerance=case.closure.tolerance, encloses_hardware=case.closure.encloses_hardware)
    return SeriesOutcome(
        title=case.title or case.name,
        series=series,
        verdict=verdict,
        tolerance=case.closure.tolerance,
        assumptions=(_motion(case, times), *_shared(series, assumed)),
        notes=(how, *_orders(times), *said, *_shared(series, notes)),
        source={
            "case": case.path.name,
            "case_sha256": case.sha256,
            "files": [one.source for one in instants],
            "volumes": [s.volume.file.name for s in asked.snapshots if s.volume is not None],
            "length_unit": case.surface.length_unit.unit,
            "storage": instants[0].balance.storage.basis if rates else None,
            "anchor": case.anchor.at,
            "gravity": case.fluid.gravity,
        },
    )


def _require_followed(case: Case) -> None:
    """Raise for a motion that cannot be followed over a series."""
    frame = frame_of(case)
    if frame is None or case.frame is None:
        return
    if case.frame.volume is not None:
        raise CaseError(
            "a series takes the flow inside from its snapshots",
            where="frame.volume",
            remedy="Give every snapshot its volume, and leave this one out",
        )
    if frame.turns and (any(frame.velocity) or any(frame.acceleration)):
        raise CaseError(
            "a surface that turns about a moving axis cannot be followed over a series",
            where="frame",
            remedy="Give the instants as cases of their own, each with its velocity and acceleration",
        )


def _shared(series: Series, said: Sequence[tuple[str, ...]]) -> list[str]:
    """Sentences that hold at every instant, and those that hold at the instant of the largest load only."""
    common = [text for text in said[0] if all(text in others for others in said)]
    sizes = np.linalg.norm(series.load(), axis=1)
    worst = int(np.nanargmax(sizes)) if np.isfinite(sizes).any() else 0
    time = series.instants[worst].time
    return [*common, *(f"At {time:g} s: {text}" for text in said[worst] if text not in common)]


def _rates_ahead(
    case: Case, times: Sequence[float], held: tuple[Contents, ...] | None, one_density: bool
) -> tuple[list[Storage], str]:
    """What is known of the rates before the surfaces are read, and how they are found."""
    if held is not None:
        mechanical = is_mechanical(case)
        found = [storage_from_contents(times, held, t, case.anchor.at, mechanical=mechanical) for t in times]
        return found, (
            "Storage at each instant is the slope there of the parabola through what the volumes of the three nearest "
            "instants hold"
        )
    if one_density:
        # a stand-in until the surfaces are read: momentum will be known, angular momentum not
        stand_in = Storage(angular_momentum=np.full(3, np.nan), basis="surface")
        return [stand_in] * len(times), (
            "Without volumes, the momentum inside comes from the surfaces (one density, no divergence), and its rate "
            "from the parabola through the three nearest instants; rates of angular momentum and energy are not known, "
            "nor is the moment of the load from the balance"
        )
    why = (
        "The density varies and no volumes are given, so the rates of what the volume holds are not known: "
        "give every snapshot a volume"
    )
    return [unknown_storage(why)] * len(times), why


def _orders(times: Sequence[float]) -> list[str]:
    if all(rate_order(times, t) == 2 for t in times):
        return []
    return ["With two instants the rates are of first order in the time step only: give a third"]


def _motion(case: Case, times: Sequence[float]) -> str:
    said = f"Unsteady flow at {len(times)} instants from {times[0]:g} s to {times[-1]:g} s through a control surface "
    frame = frame_of(case)
    if frame is None:
        return said + "at rest"
    if any(frame.acceleration):
        return said + f"that moves as the case says at {times[0]:g} s, and is accelerated evenly from then on"
    return said + ("that turns" if frame.turns else "that moves")


def instant_case(case: Case, number: int) -> Case:
    """Return one instant of a series as a case of its own, without its storage.

    Parameters
    ----------
    case : Case
        A series.
    number : int
        Which snapshot.

    Returns
    -------
    Case
        With the surface of that snapshot, and the velocity that the control surface has by then.

    Raises
    ------
    CaseError
        A surface that turns about a moving axis.
    """
    asked = case.storage
    assert asked is not None
    snapshot = asked.snapshots[number]
    changed: dict[str, Any] = {
        "surface": case.surface.model_copy(update={"file": snapshot.surface}),
        "storage": None,
        "reported": None,
    }
    frame, section = frame_of(case), case.frame
    if frame is not None and section is not None:
        if frame.turns and (any(frame.velocity) or any(frame.acceleration)):
            raise CaseError(
                "a surface that turns about a moving axis cannot be followed over a series",
                where="frame",
                remedy="Give the instants as cases of their own, each with its velocity and acceleration",
            )
        lapse = float(snapshot.time) - float(asked.snapshots[0].time)
        velocity = frame_at(frame, lapse).velocity
        changed["frame"] = section.model_copy(update={"velocity": velocity})
    return case.model_copy(update=changed)


def _at_instant(
    case: Case, asked: StorageSection, number: int, rate: Storage, held: Contents | None, threads: int | None
) -> Outcome:
    try:
        return run_case(instant_case(case, number), threads=threads, storage=rate, contents=held)
    except InputError as error:
        said = f"at {float(asked.snapshots[number].time):g} s"
        where = f"{error.where}, {said}" if error.where else said
        raise type(error)(error.found, where, error.remedy) from error


def _require_same_surface(instants: Sequence[Instant], done: Outcome, name: str) -> None:
    now = done.balance.enclosed
    if now is None or not instants:
        return
    first = instants[0].balance.enclosed
    assert first is not None
    volume = abs(first.volume)
    apart = float(np.linalg.norm(now.centroid - first.centroid))
    if abs(now.volume - first.volume) > _SAME_SURFACE * volume or apart > _SAME_SURFACE * volume ** (1 / 3):
        raise SurfaceError(
            f"it encloses {now.volume:.9g} m³ about {_place(now.centroid)} m, and {instants[0].source} "
            f"{first.volume:.9g} m³ about {_place(first.centroid)} m",
            where=name,
            remedy="All instants need one and the same control surface, in the axes that move with it",
        )


def _place(point: Vector) -> str:
    return "(" + ", ".join(f"{x:.6g}" for x in point) + ")"


def _require_filled(held: Contents, enclosed: Enclosed | None, asked: StorageSection, number: int) -> None:
    volume = asked.snapshots[number].volume
    if enclosed is not None and volume is not None:
        require_same_domain([held], enclosed.volume, enclosed.centroid, [volume.file.name])


def _rates_from_surfaces(times: Sequence[float], instants: Sequence[Instant]) -> list[Storage]:
    """Rates of a fluid of one density; not known where the surface is open or lacks a flow."""
    momenta = []
    for one in instants:
        setting, enclosed = one.balance.setting, one.balance.enclosed
        if enclosed is None or not setting.data.flux[setting.ports()].all():
            why = f"The flow of {one.source} is not known at all ports of a closed surface, nor is the momentum inside"
            return [unknown_storage(why, basis="surface")] * len(times)
        momenta.append(momentum_from_surface(one.balance.table, enclosed.centroid))
    return [storage_from_momentum(times, momenta, t) for t in times]


def _with_storage(one: Instant, rate: Storage, held: Contents | None) -> Any:
    return balance_table(one.balance.table, one.balance.setting, storage=rate, contents=held)
