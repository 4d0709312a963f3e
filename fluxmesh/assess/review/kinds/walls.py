"""Flow through walls: a leak, or walls that move as seen from the frame of the export."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from fluxmesh.assess.review.doubt import Doubt, Setting
from fluxmesh.assess.review.evidence import Evidence
from fluxmesh.assess.review.faces import Floats
from fluxmesh.units.wording import either

__all__ = ["RigidMotion", "rigid_motion", "wall_doubts"]

# common practice, no source
_LEAK = 1e-3  # net flow through a wall, over that through the ports
_SLANTED = 0.1  # of what the speeds along a group could carry: about 6 degrees (common practice, no source)
_BOTH_WAYS = 0.02  # the same for flow in and out, seen face by face
_ROUND_OFF = 1e-6  # of what the speeds along the wall could carry
_RIGID = 0.05  # root mean square misfit of a rigid motion


@dataclass(frozen=True, eq=False)
class RigidMotion:
    """A rigid motion that fits velocities.

    Attributes
    ----------
    velocity : ndarray, shape (3,), float64
        At the mean of the places, m/s.
    rotation : ndarray, shape (3,), float64
        rad/s.
    misfit : float
        Root mean square of what is left, over that of the velocities.
    """

    velocity: Floats
    rotation: Floats
    misfit: float


def rigid_motion(places: Floats, velocities: Floats, weights: Floats) -> RigidMotion:
    """Fit ``V = velocity + rotation × x`` by weighted least squares.

    Parameters
    ----------
    places : ndarray, shape (n, 3), float64
        m.
    velocities : ndarray, shape (n, 3), float64
        m/s, not all zero.
    weights : ndarray, shape (n,), float64
        Areas, not all zero.

    Returns
    -------
    RigidMotion
        About the weighted mean of the places.
    """
    centre = np.average(places, axis=0, weights=weights)
    x, y, z = (places - centre).T
    size = float(np.sqrt(np.average(x * x + y * y + z * z, weights=weights))) or 1.0
    root = np.sqrt(weights)
    zero, one = np.zeros_like(x), np.ones_like(x)
    # columns: three translations, then rotation × x with the rotation times the size, so that all have one scale
    columns = np.array(
        [
            [one, zero, zero, zero, z, -y],
            [zero, one, zero, -z, zero, x],
            [zero, zero, one, y, -x, zero],
        ]
    )
    columns[:, 3:] /= size
    matrix = (columns * root).transpose(2, 0, 1).reshape(-1, 6)
    right = (velocities * root[:, None]).ravel()
    solution = np.linalg.lstsq(matrix, right, rcond=1e-10)[0]
    left = right - matrix @ solution
    return RigidMotion(solution[:3], solution[3:] / size, float(np.linalg.norm(left) / np.linalg.norm(right)))


def wall_doubts(evidence: Evidence) -> Iterator[Doubt]:
    """Doubt walls and symmetry cuts that flow passes.

    Parameters
    ----------
    evidence : Evidence
        What is looked at.

    Yields
    ------
    Doubt
        One for all walls that move rigidly, and one for each other group that leaks.
    """
    table, flow = evidence.balance.table, evidence.flow
    moving: list[tuple[str, RigidMotion]] = []
    leaks: list[Doubt] = []
    # what the speeds along the surface could carry: a leak far below it is round-off
    area = np.where(table.column("area") > 0, table.column("area"), 1.0)
    sweep = table.column("density_area") * table.column("speed_area") / area
    for k in np.flatnonzero(~evidence.balance.setting.ports() & evidence.balance.setting.data.flux):
        net = abs(float(table.column("mass_flow")[k]))
        gross = max(net, _gross(evidence, int(k)))
        enough = evidence.through if evidence.through > 0 else float(sweep.sum())
        # a velocity along a curved wall crosses its flat facets to and fro, at small angles
        crossing = gross > _BOTH_WAYS * enough and gross > _SLANTED * float(sweep[k])
        leaking = crossing or net > max(_LEAK * enough, _ROUND_OFF * float(sweep.sum()))
        if not leaking:
            continue
        group = evidence.groups[int(k)]
        motion = _motion(evidence, int(k)) if flow.velocity.present()[k] else None
        if motion is not None and gross > _BOTH_WAYS * float(sweep[k]) and motion.misfit < _RIGID:
            moving.append((group.name, motion))
            continue
        share = f"{gross / evidence.through:.2%} of the flow through the ports" if evidence.through > 0 else ""
        leaks.append(
            Doubt(
                "flow through wall",
                f"Flow passes the {group.role.value} '{group.name}': {share or f'{gross:.4g} kg/s'}",
                "A wall lets nothing through; the group may be a port, or the velocity be that in another frame",
                (Setting(("groups", group.name, "role"), "open"),),
                "if it is a port; else another velocity array",
            )
        )
    if moving:
        yield _wrong_frame(evidence, moving)
    yield from leaks


def _gross(evidence: Evidence, k: int) -> float:
    """Mass that passes a group in either direction, by the mean velocity of each face, kg/s."""
    faces, flow = evidence.faces(k), evidence.flow
    if not flow.velocity.present()[k] or flow.mass_flux.present()[k]:
        return 0.0
    geometry = evidence.geometry(faces)
    normal = np.einsum("ij,ij->i", evidence.values(flow.velocity, faces), geometry.normals)
    carried = np.abs(normal) * geometry.areas * evidence.values(flow.density, faces)
    whole = float(evidence.balance.table.column("area")[k])
    sampled = float(geometry.areas.sum())
    return float(carried.sum()) * (whole / sampled if sampled > 0 else 0.0)


def _motion(evidence: Evidence, k: int) -> RigidMotion | None:
    faces = evidence.faces(k)
    geometry = evidence.geometry(faces)
    velocities = evidence.values(evidence.flow.velocity, faces)
    if not velocities.any() or not geometry.areas.any():
        return None
    return rigid_motion(geometry.centroids, velocities, geometry.areas)


def _wrong_frame(evidence: Evidence, moving: list[tuple[str, RigidMotion]]) -> Doubt:
    motion = moving[0][1]
    rate, speed = float(np.linalg.norm(motion.rotation)), float(np.linalg.norm(motion.velocity))
    parts = []
    if rate > 0 and rate * evidence.size > 1e-2 * speed:
        axis = np.round(motion.rotation / rate, 3) + 0.0
        parts.append(f"turns at {rate:.4g} rad/s about ({', '.join(f'{x:g}' for x in axis)})")
    if speed > 1e-2 * evidence.port_speed or not parts:
        parts.append(f"moves at {speed:.4g} m/s")
    others = [guess for guess in evidence.spare if guess.quantity == "velocity" and guess.score > 0]
    settle: tuple[Setting, ...] = ()
    if others:
        names = others[0].names
        settle = (Setting(("flow", "velocity", "array"), names[0] if len(names) == 1 else names),)
    return Doubt(
        "wrong frame",
        f"Seen from the frame of the velocity, the wall {either([repr(name) for name, _ in moving], 'and')} "
        f"{' and '.join(parts)}, and flow passes it",
        "The balance is taken for a surface at rest; a velocity from another frame gives another momentum flux",
        settle,
        "" if others else "name a velocity array from the frame in which the hardware is at rest",
    )
