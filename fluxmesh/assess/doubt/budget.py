"""What the doubt of each figure is made of, its 95 % half width, and what dominates it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.figures import Figures, Path
from fluxmesh.balance.balance import Balance
from fluxmesh.integral.table import IntegralTable

__all__ = [
    "HEADLINES",
    "Budget",
    "Contribution",
    "Share",
    "left_after_sharpening",
    "mesh_contributions",
    "off_the_facets",
    "round_off",
]

Array = NDArray[np.float64]

HEADLINES: Final[tuple[Path, ...]] = (
    ("reaction", "force"),
    ("reaction", "moment"),
    ("hardware_load", "from_balance", "force"),
    ("hardware_load", "from_walls", "force"),
    ("mass", "residual"),
    ("momentum", "residual"),
    ("angular_momentum", "residual"),
)
"""Figures whose budget is told."""

# The constants below were set by scripts/calibrate, so that intervals hold the exact answer as often as they say.
_SAFETY: Final = 1.5  # on an estimated error
_CANCELLING: Final = 0.25  # of interpolation and geometry, where they seem to cancel
_ACROSS: Final = 0.1  # of the error of a vector, for a component that seems to have none
# of the error of a plain value, for the sharpened one: factor of the relative change by sharpening, least, most
_LEFT: Final = (18.0, 0.05, 0.5)
_ROUNDINGS: Final = 8.0


@dataclass(frozen=True, eq=False)
class Contribution:
    """One source of doubt.

    Attributes
    ----------
    name : str
        Key of an input, or what it is.
    kind : {"input", "interpolation", "geometry", "sampling", "round-off"}
        Its kind.
    half_widths : ndarray, shape (n_figures,), float64
        Of the 95 % interval, 0 or more.
    error : ndarray, shape (n_figures,), float64, or None
        Estimated value minus true one, where its sign is known.
    """

    name: str
    kind: str
    half_widths: Array
    error: Array | None = None


@dataclass(frozen=True)
class Share:
    """What one source contributes to the doubt of one figure.

    Attributes
    ----------
    name, kind : str
        As in `Contribution`.
    half_width : float
        Of a vector: length of the half widths of its components.
    share : float
        Of the variance.
    """

    name: str
    kind: str
    half_width: float
    share: float


@dataclass(frozen=True, eq=False)
class Budget:
    """All sources of doubt of all figures.

    Attributes
    ----------
    figures : Figures
        The figures.
    contributions : tuple of Contribution
        Independent of one another but for interpolation and geometry, whose errors add with
        their signs.
    left : float
        Share of the error of the mesh that is left after sharpening, from `left_after_sharpening`.
    """

    figures: Figures
    contributions: tuple[Contribution, ...]
    left: float = 0.5

    @property
    def half_widths(self) -> Array:
        """Half widths of the 95 % intervals of the plain values, shape (n_figures,).

        The root of the sum of squares of all sources (JCGM 100, eq. 10), where the mesh counts as one. A
        residual over its entries, which cannot fall below zero, has that of the residual over the entries.
        """
        return self._over_entries(np.sqrt(self.of_mesh**2 + self._besides))

    @property
    def sharpened(self) -> Array:
        """The same of the sharpened values, of whose mesh error only a share is left."""
        return self._over_entries(np.sqrt((self.left * self.of_mesh) ** 2 + self._besides))

    @property
    def of_mesh(self) -> Array:
        """Half widths that interpolation and geometry make together, shape (n_figures,)."""
        errors = [one.error for one in self.contributions if one.error is not None]
        if not errors:
            return np.zeros(self.figures.values.size)
        together, apart = np.sum(errors, axis=0), np.sum(np.abs(errors), axis=0)
        size = np.maximum(np.abs(together), _CANCELLING * apart)
        return np.asarray(_SAFETY * np.maximum(size, _ACROSS * _lengths(self.figures, size)))

    @property
    def _besides(self) -> Array:
        total = np.zeros(self.figures.values.size)
        for one in self.contributions:
            if one.error is None:
                total += one.half_widths**2
        return total

    def _over_entries(self, widths: Array) -> Array:
        """Put those of the residuals, over the entries, beside the relative residuals."""
        found = widths.copy()
        values, spots = self.figures.values, {spot.path: spot for spot in self.figures.spots}
        for path, spot in spots.items():
            residual = spots.get((*path[:-1], "residual"))
            if residual is None or not path[-1].startswith("relative"):
                continue
            length, share = float(np.linalg.norm(values[residual.slice])), float(values[spot.start])
            if length > 0.0 and share > 0.0:
                found[spot.start] = float(np.linalg.norm(widths[residual.slice])) * share / length
        return found

    def shares(self, path: Path) -> tuple[Share, ...]:
        """Return what the doubt of one figure is made of, the largest first.

        Parameters
        ----------
        path : tuple of str
            The figure.
        """
        place = self.figures.spot(path).slice
        squares = [float((one.half_widths[place] ** 2).sum()) for one in self.contributions]
        mesh = [k for k, one in enumerate(self.contributions) if one.error is not None]
        apart = sum(squares[k] for k in mesh)
        together = float((self.of_mesh[place] ** 2).sum())
        for k in mesh:
            # their errors add with signs: each gets its part of what they make together
            squares[k] *= together / apart if apart > 0.0 else 0.0
        whole = sum(squares)
        found = [
            Share(one.name, one.kind, float(np.sqrt(square)), square / whole if whole > 0.0 else 0.0)
            for one, square in zip(self.contributions, squares, strict=True)
        ]
        return tuple(sorted(found, key=lambda share: -share.share))

    def dominant(self, path: Path) -> Share | None:
        """Return the largest source of doubt of one figure; None where it has no doubt.

        Parameters
        ----------
        path : tuple of str
            The figure.
        """
        first = next(iter(self.shares(path)), None)
        return first if first is not None and first.share > 0.0 else None

    def headlines(self) -> dict[Path, tuple[Share, ...]]:
        """Return the shares of the figures that matter most, by path."""
        known = {spot.path for spot in self.figures.spots}
        return {path: self.shares(path) for path in HEADLINES if path in known}

    def by_path(self, *, sharpened: bool = False) -> dict[Path, float | Array]:
        """Return the half widths by path, in the shape of each figure.

        Parameters
        ----------
        sharpened : bool, optional
            Whether those of the sharpened values.
        """
        return self.figures.at_paths(self.sharpened if sharpened else self.half_widths)


def mesh_contributions(plain: Figures, flat: Figures, curved: Figures | None) -> tuple[Contribution, ...]:
    """Return what the mesh contributes, from the figures of sharpened tables.

    Parameters
    ----------
    plain : Figures
        Of the plain table.
    flat : Figures
        Of the sharpened table that keeps the facets.
    curved : Figures or None
        Of the sharpened table that bends them; None where the facets are the geometry.

    Returns
    -------
    tuple of Contribution
        Interpolation, and geometry where the facets are not the geometry: plain minus sharpened, the
        leading error of the plain value with its sign (recovered gradients: Zienkiewicz and Zhu 1992, Int. J.
        Numer. Meth. Eng. 33, from memory).
    """
    inner = plain.values - plain.like(flat)
    found = [_signed("interpolation", plain, inner)]
    if curved is not None:
        found.append(_signed("geometry", plain, plain.like(flat) - plain.like(curved)))
    return tuple(found)


def off_the_facets(plain: Figures, flat: Figures, mixed: Figures) -> Contribution:
    """Return what the values on a bent surface cannot tell of its facets, where these are the geometry.

    How a field varies across the facets decides what it is between their corners, and values at
    the corners of a bent surface tell only how it varies along it. The most that this can be is taken to be
    what the fields make on the bent surface instead.

    Parameters
    ----------
    plain : Figures
        Of the plain table.
    flat : Figures
        Of the sharpened table that keeps the facets.
    mixed : Figures
        Of the table on the facets with fields as over the bent surface, from `fluxmesh.assess.doubt.off_facets`.
    """
    size = np.abs(plain.like(flat) - plain.like(mixed))
    return Contribution("fields between the corners of a bent surface", "interpolation", _SAFETY * size)


def left_after_sharpening(plain: IntegralTable, flat: IntegralTable, curved: IntegralTable | None) -> float:
    """Return which share of the error of a plain value its sharpened value may still have.

    Parameters
    ----------
    plain, flat : IntegralTable
        The plain table, and the sharpened one that keeps the facets.
    curved : IntegralTable or None
        The sharpened one that bends them; None where the facets are the geometry.

    Returns
    -------
    float
        The more sharpening changes areas, and integrals that cannot cancel, the worse the mesh resolves shape
        and flow, and the less is gained. Found by trial (`scripts/calibrate`); where nothing flows, the most.
    """
    factor, least, most = _LEFT
    changes = [(plain.column("dynamic_pressure_area"), flat.column("dynamic_pressure_area"))]
    if not changes[0][0].any():
        return most
    if curved is not None:
        changes.append((plain.column("area"), curved.column("area")))
    relative = [np.abs(there - here)[here > 0.0] / here[here > 0.0] for here, there in changes]
    return float(np.clip(factor * np.concatenate(relative).max(), least, most))


def _signed(kind: str, figures: Figures, error: Array) -> Contribution:
    size = np.abs(error)
    names = {"interpolation": "interpolation on the mesh", "geometry": "flat facets for a curved surface"}
    return Contribution(names[kind], kind, _SAFETY * np.maximum(size, _ACROSS * _lengths(figures, size)), error)


def _lengths(figures: Figures, sizes: Array) -> Array:
    """Length of each figure's vector, at each of its components; NaN stays with its own component.

    The size of a vector is one of its components, that along the vector.
    """
    found = np.zeros(sizes.size)
    spots = {spot.path: spot for spot in figures.spots}
    for spot in figures.spots:
        whole = spots.get((*spot.path[:-1], spot.path[-1].removesuffix("_size")), spot)
        found[spot.slice] = np.sqrt(np.nansum(sizes[whole.slice] ** 2)) if whole.count > 1 else 0.0
    return np.where(np.isnan(sizes), np.nan, found)


def round_off(figures: Figures, balance: Balance, *, digits: float = 0.0) -> Contribution:
    """Return what rounding contributes: some units in the last place of all that cancels in a figure.

    Parameters
    ----------
    figures : Figures
        The figures.
    balance : Balance
        Their balance.
    digits : float, optional
        Relative rounding of the sums that the data themselves bring: of an export in single precision, say.
    """
    precision = max(_ROUNDINGS * float(np.finfo(np.float64).eps), digits)
    sizes = _sizes(balance)
    widths = np.abs(figures.values)
    for spot in figures.spots:
        if spot.unit in sizes:
            widths[spot.slice] = np.maximum(widths[spot.slice], sizes[spot.unit])
        elif spot.unit == "":
            widths[spot.slice] = np.maximum(widths[spot.slice], 1.0)
    return Contribution("round-off", "round-off", precision * widths)


def _sizes(balance: Balance) -> dict[str, float]:
    table, setting = balance.table, balance.setting

    def whole(name: str) -> float:
        return float(np.abs(table.column(name)).sum())

    area = float(table.total("area"))
    reach = float(np.sqrt(area))
    force = whole("pressure_area") + 2 * whole("dynamic_pressure_area") + whole("viscous_force")
    force += float(np.nansum(np.abs(balance.momentum.weight)) + np.nansum(np.abs(balance.momentum.storage)))
    arm = reach + float(np.linalg.norm(table.origin - np.asarray(setting.anchor)))
    mass = whole("mass_flow") + 2 * whole("reversed_mass_flow")
    return {
        "N": force,
        "N m": force * arm,
        "kg/s": mass,
        "m^3/s": whole("volume_flow"),
        "W": whole("pressure_volume_flow") + whole("kinetic_energy_flux"),
        "m^2": area,
        "m^3": area * reach,
        "m": reach + float(np.linalg.norm(table.origin)),
    }
