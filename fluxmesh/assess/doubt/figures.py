"""All reported figures of a balance as one vector, and their doubts beside them in the result.

A figure stands at the place that it has in the result file, such as ``("momentum", "flux")``: so its
doubt can be written beside it, in the same shape, and any error of it is the difference of
two such vectors.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.assess.verdict import relative_without_mean_pressure
from fluxmesh.balance.balance import Balance
from fluxmesh.balance.carried import CarriedBalance
from fluxmesh.balance.energy import EnergyBalance
from fluxmesh.balance.losses import Loss
from fluxmesh.balance.momentum import Ledger
from fluxmesh.balance.wrench import Wrench

__all__ = ["Figures", "Path", "Spot", "figures", "with_uncertainties"]

Array = NDArray[np.float64]
Path = tuple[str, ...]
"""Keys from the top of the result file to a figure; an entry of a list by its number."""

_UNITS: Final = {
    "volume": "m^3", "centroid": "m", "area": "m^2", "area_vector": "m^2", "mass_flow": "kg/s", "volume_flow": "m^3/s",
    "momentum_flux": "N", "pressure_force": "N", "viscous_force": "N", "moment_of_momentum_flux": "N m",
    "moment_of_pressure": "N m", "moment_of_viscous": "N m", "force": "N", "moment": "N m", "difference": "N",
    "point": "m", "direction": "", "couple": "N m", "inflow": "kg/s", "outflow": "kg/s", "relative": "",
    "relative_without_mean_pressure": "", "mass": "kg", "weight": "N", "centre": "m", "mean_pressure": "Pa",
    "mean_total_pressure": "Pa", "mean_temperature": "K", "mean_total_temperature": "K", "mean_speed": "m/s",
    "speed": "m/s", "inlet_velocity": "m/s", "outlet_velocity": "m/s", "rate": "N", "full_flux": "N",
    "profile_effect": "N", "acceleration": "m/s^2", "turning_moment": "N m", "from_walls": "W", "from_balance": "W",
    "torque_from_walls": "N m", "torque_from_balance": "N m", "total_pressure_drop": "Pa",
}  # fmt: skip


@dataclass(frozen=True)
class Spot:
    """Where one figure stands.

    Attributes
    ----------
    path : tuple of str
        Its keys.
    start, count : int
        Its components are ``values[start : start + count]``.
    vector : bool
        Whether it is a list in the result, not a number.
    unit : str
        SI unit; empty for a share or factor.
    """

    path: Path
    start: int
    count: int
    vector: bool
    unit: str

    @property
    def slice(self) -> slice:
        """Where its components stand."""
        return slice(self.start, self.start + self.count)

    @property
    def name(self) -> str:
        """Its keys with dots between them."""
        return ".".join(self.path)


@dataclass(frozen=True, eq=False)
class Figures:
    """The vector of all figures.

    Attributes
    ----------
    spots : tuple of Spot
        Where each stands, in the order of the result file.
    values : ndarray, shape (n,), float64
        SI units; NaN where a figure is not known.
    """

    spots: tuple[Spot, ...]
    values: Array

    def __getitem__(self, path: Path) -> Array:
        """Return the components of one figure, shape (count,)."""
        return self.values[self.spot(path).slice]

    def spot(self, path: Path) -> Spot:
        """Return where a figure stands; `KeyError` where there is none.

        Parameters
        ----------
        path : tuple of str
            Its keys.
        """
        for spot in self.spots:
            if spot.path == path:
                return spot
        raise KeyError(".".join(path))

    def like(self, other: Figures) -> Array:
        """Return the values of another vector in the places of this one, NaN where it has none.

        Parameters
        ----------
        other : Figures
            Of the same case, where a figure more or less may be known.
        """
        if other.spots == self.spots:
            return other.values
        found = {spot.path: spot for spot in other.spots}
        values = np.full(self.values.size, np.nan)
        for spot in self.spots:
            twin = found.get(spot.path)
            if twin is not None and twin.count == spot.count:
                values[spot.slice] = other.values[twin.slice]
        return values

    def at_paths(self, vector: Array) -> dict[Path, float | Array]:
        """Return a vector laid out as this one by path, in the shape of each figure; without what is NaN.

        Parameters
        ----------
        vector : ndarray, shape (n,), float64
            Doubts, say.
        """
        found: dict[Path, float | Array] = {}
        for spot in self.spots:
            piece = vector[spot.slice]
            if np.isfinite(piece).all():
                found[spot.path] = piece if spot.vector else float(piece[0])
        return found


def figures(
    balance: Balance,
    *,
    energy: EnergyBalance | None = None,
    carried: Sequence[CarriedBalance] = (),
    losses: Sequence[Loss] = (),
) -> Figures:
    """Return all figures of a balance that the result file reports.

    Parameters
    ----------
    balance : Balance
        The balance.
    energy : EnergyBalance, optional
        The energy law.
    carried : sequence of CarriedBalance, optional
        Carried scalars.
    losses : sequence of Loss, optional
        Losses between ports.

    Returns
    -------
    Figures
        Each at its keys in the result file; what is not known is left out.
    """
    spots: list[Spot] = []
    values: list[Array] = []
    start = 0
    for path, value, unit in _listed(balance, energy, carried, losses):
        if value is None:
            continue
        given = np.asarray(value, dtype=np.float64)
        components = np.atleast_1d(given).ravel()
        spots.append(Spot(path, start, components.size, given.ndim > 0, unit))
        values.append(components)
        start += components.size
    return Figures(tuple(spots), np.concatenate(values) if values else np.empty(0))


_Entry = tuple[Path, ArrayLike | None, str]


def _listed(
    balance: Balance, energy: EnergyBalance | None, carried: Sequence[CarriedBalance], losses: Sequence[Loss]
) -> Iterator[_Entry]:
    yield from _geometry(balance)
    yield from _groups(balance)
    if balance.mass is not None:
        for key, value in asdict(balance.mass).items():
            yield ("mass", key), value, _UNITS.get(key, "kg/s")
    if balance.setting.closed:
        yield from _ledger(("momentum",), balance.momentum, balance.complete, "N")
        if balance.complete:
            yield ("momentum", "relative_without_mean_pressure"), relative_without_mean_pressure(balance), ""
        yield from _ledger(("angular_momentum",), balance.angular, balance.complete, "N m")
    yield from _loads(balance)
    if balance.fluid is not None:
        yield from _entries(("fluid",), asdict(balance.fluid))
    for name, port in balance.ports.items():
        yield from _entries(("ports", name), asdict(port))
    if balance.power is not None:
        yield from _entries(("frame", "power_on_hardware"), asdict(balance.power))
    if balance.axial is not None:
        yield from _ledger(("frame", "about_axis"), balance.axial, balance.axial.known, "N m")
    if balance.short_form is not None:
        kept = {key: value for key, value in asdict(balance.short_form).items() if not isinstance(value, str)}
        yield from _entries(("short_form",), kept)
    if balance.release is not None:
        yield from _entries(("release",), asdict(balance.release))
    if energy is not None:
        yield from _energy(energy, balance)
    for scalar in carried:
        yield from _carried(scalar, balance)
    for number, loss in enumerate(losses):
        yield from _entries(
            ("losses", str(number)),
            {"coefficient": loss.coefficient, "total_pressure_drop": loss.total_pressure_drop},
        )


def _entries(path: Path, entries: Mapping[str, Any]) -> Iterator[_Entry]:
    """Numbers of a table and of the tables in it; the unit of these is that of their table."""
    for key, value in entries.items():
        if isinstance(value, Mapping):
            for inner, number in value.items():
                yield (*path, key, inner), number, _UNITS.get(key, "")
        else:
            yield (*path, key), value, _UNITS.get(key, "")


def _geometry(balance: Balance) -> Iterator[_Entry]:
    table, enclosed = balance.table, balance.enclosed
    yield ("geometry", "volume"), None if enclosed is None else enclosed.volume, "m^3"
    yield ("geometry", "centroid"), None if enclosed is None else enclosed.centroid, "m"
    yield ("geometry", "area"), table.total("area"), "m^2"
    yield ("geometry", "area_vector"), table.total("area_vector"), "m^2"


def _groups(balance: Balance) -> Iterator[_Entry]:
    table, linear, angular = balance.table, balance.momentum, balance.angular
    area, position = table.column("area"), table.column("position")
    columns = {
        "area": area,
        "area_vector": table.column("area_vector"),
        "centroid": table.origin + position / np.where(area > 0, area, np.inf)[:, None],
        "mass_flow": table.column("mass_flow"),
        "volume_flow": table.column("volume_flow"),
        "momentum_flux": linear.group_flux,
        "pressure_force": linear.group_pressure,
        "viscous_force": linear.group_viscous,
        "moment_of_momentum_flux": angular.group_flux,
        "moment_of_pressure": angular.group_pressure,
        "moment_of_viscous": angular.group_viscous,
    }
    for k, group in enumerate(balance.setting.groups):
        for key, rows in columns.items():
            yield ("groups", group.name, key), rows[k], _UNITS[key]


def _ledger(path: Path, ledger: Ledger, complete: bool, unit: str) -> Iterator[_Entry]:
    yield (*path, "flux"), ledger.flux(), unit
    yield (*path, "pressure"), ledger.pressure(), unit
    yield (*path, "viscous"), ledger.viscous(), unit
    yield (*path, "weight"), ledger.weight, unit
    yield (*path, "storage"), _known(ledger.storage), unit
    if complete and ledger.known:
        yield (*path, "residual"), ledger.residual(), unit
    if complete:
        yield (*path, "relative"), ledger.relative(), ""


def _loads(balance: Balance) -> Iterator[_Entry]:
    load, reaction = balance.load, balance.reaction
    for key, wrench in (("from_walls", load.from_walls), ("from_balance", load.from_balance)):
        yield from _wrench(("hardware_load", key), wrench)
    if load.from_walls is not None and load.from_balance is not None:
        yield ("hardware_load", "difference"), load.from_walls.force - load.from_balance.force, "N"
    if reaction is not None:
        yield from _wrench(("reaction",), reaction.wrench)
        axis = reaction.line_of_action
        if axis.couple == axis.couple:
            line = {"point": axis.point, "direction": axis.direction, "couple": axis.couple}
            yield from _entries(("reaction", "line_of_action"), line)


def _wrench(path: Path, wrench: Wrench | None) -> Iterator[_Entry]:
    if wrench is not None:
        yield (*path, "force"), wrench.force, "N"
        yield (*path, "moment"), _known(wrench.moment), "N m"
        yield (*path, "force_size"), np.linalg.norm(wrench.force), "N"
        if np.isfinite(wrench.moment).all():
            yield (*path, "moment_size"), np.linalg.norm(wrench.moment), "N m"


def _known(vector: Array) -> Array | None:
    return vector if np.isfinite(vector).all() else None


def _energy(energy: EnergyBalance, balance: Balance) -> Iterator[_Entry]:
    entries = {
        "flux": energy.flux,
        "pressure_work": energy.pressure_work,
        "viscous_power": energy.viscous_power,
        "storage": energy.storage,
        "heat": energy.heat,
        "shaft_power": energy.shaft_power_given,
        "shaft_power_walls": energy.shaft_power_walls,
        "residual": energy.residual,
        "residual_of_mass": energy.mass_share,
        "heat_minus_shaft_power": energy.left if energy.basis != "mechanical" and not energy.judged else None,
        "size": energy.size,
        "loss": energy.loss,
    }
    for key, value in entries.items():
        yield ("energy", key), value, "W"
    yield ("energy", "relative"), energy.relative, ""
    columns = {
        "enthalpy": energy.group_enthalpy,
        "kinetic": energy.group_kinetic,
        "potential": energy.group_potential,
        "pressure_work": energy.group_pressure_work,
        "viscous_power": energy.group_viscous,
    }
    for k, group in enumerate(balance.setting.groups):
        for key, rows in columns.items():
            yield ("energy", "groups", group.name, key), rows[k], "W"


def _carried(scalar: CarriedBalance, balance: Balance) -> Iterator[_Entry]:
    path, unit = ("carried", scalar.name), f"{scalar.unit}/s" if scalar.unit else "1/s"
    for key in ("inflow", "outflow", "storage", "residual"):
        yield (*path, key), getattr(scalar, key), unit
    yield (*path, "relative"), scalar.relative, ""
    for k, group in enumerate(balance.setting.groups):
        if group.role.is_port:
            mean = scalar.group_mean[k]
            yield (*path, "groups", group.name, "flux"), scalar.group_flux[k], unit
            yield (*path, "groups", group.name, "mean"), mean if mean == mean else None, ""


def with_uncertainties(data: dict[str, Any], half_widths: Mapping[Path, float | ArrayLike]) -> dict[str, Any]:
    """Return a result with the doubt of each figure beside it.

    Parameters
    ----------
    data : dict
        Plain data, from `fluxmesh.report.result.result_data`; it is not changed.
    half_widths : mapping of tuple of str to float or array_like
        By path, half width of the 95 % interval in the unit and shape of the figure.

    Returns
    -------
    dict
        With a key ``<key>_uncertainty`` after each key that has a doubt; a figure that is null in
        the result, or that it does not have, gets none.
    """
    return _beside(data, half_widths, ())


def _beside(data: Mapping[str, Any], half_widths: Mapping[Path, float | ArrayLike], above: Path) -> dict[str, Any]:
    found: dict[str, Any] = {}
    for key, value in data.items():
        path = (*above, key)
        if isinstance(value, dict):
            found[key] = _beside(value, half_widths, path)
        elif isinstance(value, list) and value and isinstance(value[0], dict):
            found[key] = [_beside(one, half_widths, (*path, str(k))) for k, one in enumerate(value)]
        else:
            found[key] = value
            if value is not None and path in half_widths:
                width = np.asarray(half_widths[path], dtype=np.float64)
                found[f"{key}_uncertainty"] = width.tolist() if width.ndim else float(width)
    return found
