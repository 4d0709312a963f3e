"""Slips in the viscous traction: its sign, or none at all on walls."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.causes.change import Change
from fluxmesh.assess.causes.entries import Entries
from fluxmesh.assess.causes.residuals import Residuals
from fluxmesh.assess.causes.suspect import COST, Suspect, lines
from fluxmesh.balance.storage import momentum_from_surface

__all__ = ["traction_missing", "traction_sign"]

# skin friction over dynamic pressure: from turbulent flow in smooth pipes at high Reynolds numbers (Blasius; Prandtl:
# about 0.002; from memory) down to laminar flow, 16/Re in a round pipe, here at a Reynolds number of about 5
_FRICTION: Final = (3e-4, 3.0)
_AGAINST: Final = 0.3  # cosine between the missing force and the way against the flow, at least
_DRIVES: Final = 0.1  # share of force in what is lacking below which it has no way to point
_KNOWN: Final = 8.0  # that the traction is lacking is in the case: nothing has to be assumed


def traction_sign(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect a traction of the opposite sign.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are.

    Yields
    ------
    Suspect
        None where no traction is known.
    """
    if not entries.viscous.any():
        return
    del now
    facts = entries.facts
    other = "fluid" if facts.traction_on == "wall" else "wall"
    fix = lines(("flow.traction.acts_on", other))
    if facts.traction_key not in ("", "traction"):
        fix = f"turn the sign of the array of flow.{facts.traction_key}"
    yield Suspect(
        "traction-sign",
        Change(traction=-1.0),
        f"the exported traction acts on the {other}, and was read as acting on the {facts.traction_on}",
        fix,
        COST["classic"],
    )


def traction_missing(entries: Entries, now: Residuals) -> Iterator[Suspect]:
    """Suspect the friction of walls whose traction is not given.

    It cannot be known from the table, only whether what is left is like friction: against the flow, and of
    its size.

    Parameters
    ----------
    entries : Entries
        The laws.
    now : Residuals
        Residuals as they are; not used.

    Yields
    ------
    Suspect
        None where all walls have a traction, nothing flows, or momentum is not judged.
    """
    del now
    setting, table = entries.balance.setting, entries.balance.table
    bare = setting.walls() & ~setting.data.traction
    swift = table.column("dynamic_pressure_area")
    if not bare.any() or not entries.laws.linear or not swift.any():
        return
    moving = swift > 0
    share = float(entries.area[bare].sum() / entries.area[moving].sum())
    area = float(entries.area[bare].sum())
    radius = (float(entries.area.sum()) / (4 * np.pi)) ** 0.5
    drift = momentum_from_surface(table, table.origin)
    size = float(np.linalg.norm(drift))
    through = size > 1e-3 * float(np.abs(table.column("mass_flow")).sum()) * area**0.5
    names = ", ".join(group.name for group, without in zip(setting.groups, bare) if without)
    directions = np.zeros((6, 10))
    directions[:, 1:7] = np.eye(6)
    anchored = entries.balance.setting.anchor
    away = np.asarray(anchored, dtype=np.float64) - table.origin
    for k in range(6):
        force, couple = directions[k, 1:4], directions[k, 4:7]
        directions[k, 7:10] = couple + (np.cross(away, force) if setting.frame is None else 0.0)

    def words(added: NDArray[np.float64], left: Residuals) -> tuple[str, str] | None:
        # what is added to the residual is minus the viscous force on the fluid: it points with the flow
        force = added[:3]
        strength = float(np.linalg.norm(force))
        # friction that turns the fluid, and does not drive it, is a couple
        couple = added[7:10] + np.cross(away, force)
        amount = max(strength, float(np.linalg.norm(couple)) / radius)
        coefficient = amount / max(float(left.dynamic[0]) * share, 1e-300)
        along = float(force @ drift) / (strength * size) if through and strength > _DRIVES * amount else 1.0
        if not _FRICTION[0] <= coefficient <= _FRICTION[1] or along < _AGAINST:
            return None
        said = (
            f"the walls {names} have no traction: friction of {amount:.4g} N is lacking, "
            f"a skin friction of {coefficient:.2g} of the dynamic pressure at the ports"
        )
        return said, 'flow.traction = { array = "...", unit = "Pa", acts_on = "wall" }'

    yield Suspect(
        "traction-missing",
        Change(),
        f"the walls {names} have no traction",
        "",
        COST["common"],
        directions=directions,
        expected=_KNOWN,
        words=words,
    )
