"""What a load was computed under, and what it leaves out: printed wherever a load is."""

from __future__ import annotations

from typing import Final

import numpy as np

from fluxmesh.balance.balance import Balance

__all__ = ["CAUTIONS", "assumptions_of"]

CAUTIONS: Final = (
    "This is the load of the flow given, and of no other. It leaves out surge and water hammer, start-up and shut-down "
    "beyond what the data hold, vibration, thermal growth, bolt-up, seismic and wind loads, two-phase flow, "
    "and pressure tests or blocked outlets, which often govern.",
    "Local codes and a licensed engineer decide what an anchor, support or thrust restraint must carry.",
)
"""What every load leaves out, and who decides."""


def _motion(balance: Balance) -> str:
    frame, rates = balance.setting.frame, balance.storage
    steady = rates.mass == 0.0 and not np.any(rates.momentum) and not np.any(rates.angular_momentum)
    if frame is None:
        return "Steady flow through a control surface at rest" if steady else "Unsteady flow at one instant"
    moves = "turns" if frame.turns else "moves"
    if steady:
        return f"Flow that is steady as seen from the control surface, which {moves}"
    return f"Unsteady flow at one instant through a control surface that {moves}"


def assumptions_of(
    balance: Balance, *, ambient: float | None, estimated_density: bool, head_restored: bool, mirrored: bool = False
) -> tuple[str, ...]:
    """Return what the figures of a balance assume, one sentence each.

    Parameters
    ----------
    balance : Balance
        The balance.
    ambient : float or None
        Ambient absolute pressure, Pa.
    estimated_density : bool
        Whether the density of the fluid held is a mean over the surface.
    head_restored : bool
        Whether the hydrostatic head was put back into the pressure.
    mirrored : bool, optional
        Whether a part model is reported whole.
    """
    setting = balance.setting
    said = [_motion(balance)]
    surroundings = "the ambient pressure" if ambient is None else f"ambient pressure {ambient:g} Pa"
    said.append(f"Pressure counts from {surroundings}, which acts on the outside of the hardware everywhere")
    weightless = not np.any(setting.gravity)
    if weightless:
        said.append("No gravity is given: the weights of fluid and hardware are not in the load or the reaction")
    elif balance.fluid is None:
        said.append("The weight of the fluid is not in the load: no closed volume or no density")
    elif balance.contents is not None and balance.contents.mass is not None:
        said.append(
            f"The volume file says what the volume holds ({balance.fluid.mass:.5g} kg); its weight is in the load"
        )
    else:
        held = "filled with the fluid" + (", at its mean density on the surface" if estimated_density else "")
        pull = ", ".join(f"{g:g}" for g in setting.gravity)
        said.append(
            f"The enclosed volume is {held} ({setting.fluid_density:.5g} kg/m³, gravity ({pull}) m/s²); "
            "its weight is in the load from the balance"
        )
    if head_restored:
        said.append("The pressure came without its hydrostatic head, which was put back")
    if mirrored:
        said.append("The part model was mirrored at its symmetry planes: all figures are those of the whole")
    frame = setting.frame
    if frame is not None and frame.turns and setting.hardware is not None:
        said.append("The hardware counts as a mass at its centre: its products of inertia are not in the reaction")
    if setting.hardware is None:
        inert = frame is not None and (frame.turns or any(frame.acceleration))
        said.append(f"No hardware mass is given: its weight {'and inertia are' if inert else 'is'} not in the reaction")
    elif not weightless:
        said.append(f"The hardware weighs {setting.hardware.mass:g} kg without the fluid")
    ports = setting.ports()
    if ports.any() and not setting.data.traction[ports].all():
        names = [g.name for g, port, known in zip(setting.groups, ports, setting.data.traction) if port and not known]
        said.append(f"Viscous traction at {', '.join(names)} is not given, and counts as zero")
    walls = setting.walls()
    if not walls.any():
        said.append("No wall group: the load is that on whatever the surface encloses")
    elif not setting.data.flux[walls].any():
        said.append("Nothing flows through the walls")
    if setting.supplied:
        said.append(f"What is supplied at {', '.join(setting.supplied)} is spread evenly, or by its profile")
    if balance.reaction is not None and balance.reaction.basis == "walls":
        said.append("The reaction rests on the load integrated over the walls")
        if not weightless:
            said.append("Pressure on the walls bears the weight of the fluid only as far as its head is in it")
    return tuple(said)
