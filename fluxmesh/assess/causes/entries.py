"""The table of integrals as entries of the laws, cut so that each suspected slip is a factor or an addition.

An entry is what a group adds to the residual of linear momentum and, about two points, of angular
momentum: ``flux - pressure - viscous - weight``, left side minus right side. The hydrostatic head
that was put back stands apart from the exported pressure, for units, kind and gravity change one and
not the other.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.facts import Facts
from fluxmesh.balance.balance import Balance, balance_table
from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.wrench import Vector
from fluxmesh.field.pressure import Head
from fluxmesh.integral.table import symmetric_index
from fluxmesh.surface.surface import Role

__all__ = ["DYNAMIC", "HEAD", "OWN", "UNIT", "Entries", "Laws", "entries_of"]

# rows of `Entries.pressure`
OWN: Final = 0
"""The pressure as exported or supplied."""
UNIT: Final = 1
"""One pascal everywhere."""
HEAD: Final = 2
"""One pascal a metre along x, y, z from the origin of the table: three rows."""
DYNAMIC: Final = 5
"""The dynamic pressure."""

_CLOSED: Final = 1e-6  # length of the sum of area vectors over the area, that single precision may leave


@dataclass(frozen=True)
class Laws:
    """Which laws are judged.

    Attributes
    ----------
    mass, linear, angular : bool
        Conservation of mass, linear and angular momentum.
    axial : bool
        Whether angular momentum counts along the axis of a turning surface only.
    """

    mass: bool
    linear: bool
    angular: bool
    axial: bool = False

    def count(self) -> int:
        """Return the number of scalar residuals that are judged."""
        return int(self.mass) + 3 * int(self.linear) + (1 if self.axial else 3) * int(self.angular)


@dataclass(frozen=True, eq=False)
class Entries:
    """Entries of every law, group by group.

    Nine columns are linear momentum, and angular momentum about the anchor and about the table's origin.

    Attributes
    ----------
    balance : Balance
        What they were cut from.
    facts : Facts
        How its data were read.
    laws : Laws
        Which are judged.
    density : ndarray, shape (n_groups,), float64
        Mean density of each group, kg/m³; that of the fluid held where a group has none.
    held : float
        Density of the fluid held, kg/m³; zero where none is known.
    mass, mass_size : ndarray, shape (n_groups,), float64
        Net mass flow out, and the sum of what enters and leaves, kg/s.
    flux, drift, swept : ndarray, shape (n_groups, 9), float64
        Momentum flux of the relative velocity; what the steady velocity and the rotation of the
        surface add to it. N and N m.
    pressure : ndarray, shape (n_groups, 6, 10), float64
        Entries of a pressure: the group's own, one pascal, one pascal a metre (three), and
        the dynamic pressure. The last column is its integral over the area, N.
    viscous : ndarray, shape (n_groups, 9), float64
        Minus the viscous force and its moments.
    weight : ndarray, shape (n_groups, 3, 9), float64
        Minus the weight of what each group adds to the volume, for one N/m³ along x, y, z.
    volume : ndarray, shape (n_groups,), float64
        What each group adds to the volume, m³.
    area : ndarray, shape (n_groups,), float64
        m².
    area_vector : ndarray, shape (n_groups, 3), float64
        m².
    stored_mass : float
        Rate of the mass inside, kg/s.
    stored : ndarray, shape (9,), float64
        Rates of momentum and moments inside as seen from the surface.
    carried_along, drift_stored : ndarray, shape (9,), float64
        What the motion of the surface adds to these rates, and its part that a steady velocity makes.
    open : bool
        Whether the area vectors do not add up to nothing.
    """

    balance: Balance
    facts: Facts
    laws: Laws
    density: NDArray[np.float64]
    held: float
    mass: NDArray[np.float64]
    mass_size: NDArray[np.float64]
    flux: NDArray[np.float64]
    drift: NDArray[np.float64]
    swept: NDArray[np.float64]
    pressure: NDArray[np.float64]
    viscous: NDArray[np.float64]
    weight: NDArray[np.float64]
    volume: NDArray[np.float64]
    area: NDArray[np.float64]
    area_vector: NDArray[np.float64]
    stored_mass: float
    stored: NDArray[np.float64]
    carried_along: NDArray[np.float64]
    drift_stored: NDArray[np.float64]
    open: bool

    @property
    def count(self) -> int:
        """Number of groups."""
        return int(self.mass.size)

    def names(self) -> tuple[str, ...]:
        """Return the names of the groups."""
        return tuple(group.name for group in self.balance.setting.groups)

    def flat(self) -> NDArray[np.bool_]:
        """Return which groups are plane, shape (n_groups,)."""
        return np.asarray(np.linalg.norm(self.area_vector, axis=1) > (1 - 1e-6) * self.area)

    def gravity(self) -> Vector:
        """Return the acceleration of gravity, m/s²."""
        return np.asarray(self.balance.setting.gravity, dtype=np.float64)


def _laws(balance: Balance, encloses_hardware: bool) -> Laws:
    """The laws that the verdict judges (see `fluxmesh.assess.verdict`); of an open surface all that have data."""
    setting = balance.setting
    ports = setting.ports()
    flows = bool(setting.data.flux[ports].all()) and bool(np.any(balance.table.column("mass_flow")))
    walls = setting.walls()
    complete = balance.complete or (not setting.closed and bool(setting.data.pressure.all()) and balance.momentum.known)
    linear = complete and (bool(walls.any()) or not encloses_hardware)
    axial = not balance.angular.known and balance.axial is not None and balance.axial.known
    return Laws(flows, linear, linear and (balance.angular.known or axial), axial)


def entries_of(balance: Balance, facts: Facts, *, encloses_hardware: bool = True) -> Entries:
    """Cut a balance into the entries of its laws.

    Parameters
    ----------
    balance : Balance
        A balance.
    facts : Facts
        How its data were read.
    encloses_hardware : bool, optional
        For a surface without walls: whether a body may be inside, so that the
        momentum residual is a load and is not judged.
    """
    laws = _laws(balance, encloses_hardware)
    if not balance.setting.closed:
        # as if it were closed: what a missing piece leaves out shows in the laws
        balance = balance_table(balance.table, replace(balance.setting, closed=True), storage=balance.storage)
    return _cut(balance, facts, laws)


@dataclass(frozen=True, eq=False)
class _Points:
    """The points that moments are about, and the axis along which they count."""

    origin: Vector
    points: tuple[Vector, Vector]
    axis: Vector | None

    def nine(self, force: Vector, moment: Vector) -> Vector:
        """Force, and its moments about both points; `moment` is about the origin of the table."""
        turning = [moment + np.cross(self.origin - point, force) for point in self.points]
        if self.axis is not None:
            turning = [(part @ self.axis)[..., None] * self.axis for part in turning]
        return np.concatenate([force, *turning], axis=-1)


def _points(balance: Balance, laws: Laws) -> _Points:
    table, frame = balance.table, balance.setting.frame
    anchor = np.asarray(balance.setting.anchor, dtype=np.float64)
    if frame is None:
        return _Points(table.origin, (anchor, table.origin), None)
    # what is inside a moving surface is known about one point only
    if not laws.axial:
        return _Points(table.origin, (anchor, anchor), None)
    through = np.asarray(frame.through, dtype=np.float64)
    return _Points(table.origin, (through, through), np.asarray(frame.axis, dtype=np.float64))


def _cut(balance: Balance, facts: Facts, laws: Laws) -> Entries:
    table, setting = balance.table, balance.setting
    at = _points(balance, laws)

    def nine(force: str, moment: str) -> Vector:
        return at.nine(table.column(force), table.column(moment))

    area, vectors = table.column("area"), table.column("area_vector")
    held = _held(balance)
    density = np.divide(table.column("density_area"), area, out=np.zeros_like(area), where=area > 0)
    density = np.where(density > 0, density, held)
    flux = nine("momentum_flux", "moment_of_momentum_flux")
    turning = balance.axial if laws.axial and balance.axial is not None else balance.angular
    drift, swept = np.zeros_like(flux), np.zeros_like(flux)
    if setting.frame is not None:
        both = (balance.momentum, turning, turning)
        drift = np.concatenate([_or_zero(ledger.drift_flux, area.size) for ledger in both], axis=1)
        swept = np.concatenate([ledger.group_flux for ledger in both], axis=1) - flux - drift
    stored, whole, drift_stored = _stored(balance, at, turning)
    flows, back = table.column("mass_flow"), table.column("reversed_mass_flow")
    two_way = np.array([group.role is Role.OPEN for group in setting.groups])
    return Entries(
        balance=balance,
        facts=facts,
        laws=laws,
        density=density,
        held=held,
        mass=flows,
        mass_size=np.where(two_way, flows + 2 * back, np.abs(flows)),
        flux=flux,
        drift=drift,
        swept=swept,
        pressure=_pressures(balance, facts, at, held),
        viscous=-nine("viscous_force", "moment_of_viscous"),
        weight=_weights(balance, at),
        volume=np.trace(table.column("position_normal").reshape(-1, 3, 3), axis1=1, axis2=2) / 3,
        area=area,
        area_vector=vectors,
        stored_mass=balance.storage.mass,
        stored=stored,
        carried_along=whole - stored,
        drift_stored=drift_stored,
        open=float(np.linalg.norm(vectors.sum(axis=0))) > _CLOSED * float(area.sum()),
    )


def _or_zero(rows: Vector | None, count: int) -> Vector:
    return np.zeros((count, 3)) if rows is None else rows


def _held(balance: Balance) -> float:
    if balance.fluid is not None and balance.enclosed is not None and balance.enclosed.volume != 0.0:
        return balance.fluid.mass / balance.enclosed.volume
    return balance.setting.fluid_density or 0.0


def _stored(balance: Balance, at: _Points, turning: Ledger) -> tuple[Vector, Vector, Vector]:
    """Rates inside: as seen from the surface, with all that its motion adds, and its steady velocity's part."""
    rates, anchor = balance.storage, np.asarray(balance.setting.anchor, dtype=np.float64)
    here = rates.angular_momentum + np.cross(anchor - at.origin, rates.momentum)
    stored = np.nan_to_num(at.nine(rates.momentum, here))
    if balance.setting.frame is None:
        return stored, stored, np.zeros(9)
    whole = np.concatenate([balance.momentum.storage, turning.storage, turning.storage])
    drifts = [np.zeros(3) if each is None else each for each in (balance.momentum.drift_storage, turning.drift_storage)]
    return stored, np.nan_to_num(whole), np.nan_to_num(np.concatenate([drifts[0], drifts[1], drifts[1]]))


def _weights(balance: Balance, at: _Points) -> Vector:
    """Minus the weight of a N/m³ along x, y, z, shared out over the groups as the divergence theorem does."""
    table = balance.table
    volume = np.trace(table.column("position_normal").reshape(-1, 3, 3), axis1=1, axis2=2) / 3
    squares = table.column("square_normal").reshape(-1, 6, 3)
    first = np.stack([squares[:, k, k] for k in range(3)], axis=1) / 2
    total = float(volume.sum())
    if balance.contents is not None and balance.fluid is not None and total != 0.0:
        first = np.outer(volume, balance.fluid.centre - table.origin)
    rows = [at.nine(np.outer(volume, axis), np.cross(first, axis)) for axis in np.eye(3)]
    return -np.stack(rows, axis=1)


def _pressures(balance: Balance, facts: Facts, at: _Points, held: float) -> Vector:
    """Entries of the pressures that a group may have, shape (n_groups, 6, 10)."""
    table = balance.table
    made = np.zeros((table.values.shape[0], 6, 10))

    def put(row: int, force: Vector, moment: Vector, spread: Vector) -> None:
        made[:, row] = np.concatenate([at.nine(force, moment), spread[:, None]], axis=1)

    normal = table.column("position_normal").reshape(-1, 3, 3)
    square = table.column("square_normal").reshape(-1, 6, 3)
    put(UNIT, table.column("area_vector"), _turned(normal), table.column("area"))
    for k in range(3):
        along = np.stack([square[:, symmetric_index(k, m)] for m in range(3)], axis=1)
        put(HEAD + k, normal[:, k], _turned(along), table.column("position")[:, k])
    put(
        DYNAMIC,
        -table.column("dynamic_pressure_force"),
        -table.column("moment_of_dynamic_pressure"),
        table.column("dynamic_pressure_area"),
    )
    put(OWN, -table.column("pressure_force"), -table.column("moment_of_pressure"), table.column("pressure_area"))
    if facts.head is Head.REMOVED and held:
        slope = held * np.asarray(balance.setting.gravity, dtype=np.float64)
        restored = np.einsum("k,gkc->gc", slope, made[:, HEAD : HEAD + 3])
        restored += float(slope @ (table.origin - np.asarray(facts.datum))) * made[:, UNIT]
        made[:, OWN] -= np.where(facts.pressure_array[:, None], restored, 0.0)
    return made


def _turned(tensor: Vector) -> Vector:
    """``∫ x × n`` out of ``∫ x_i n_j``, shape (n_groups, 3)."""
    return np.stack([tensor[:, i, j] - tensor[:, j, i] for i, j in ((1, 2), (2, 0), (0, 1))], axis=1)
