"""What else is balanced: ``[energy]``, ``[[carried]]`` and ``[[loss]]``."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from fluxmesh.case.values import Power, Table, Text, Texts

__all__ = ["CarriedSection", "EnergySection", "LossSection"]


class EnergySection(Table):
    """``[energy]``: what is known to enter and leave beside the flow; then the law is judged.

    Attributes
    ----------
    heat : Measured or None
        Heat given to the fluid, W.
    shaft_power : Measured or None
        Power that a shaft takes out of the fluid, beside what moving walls take, W.
    """

    heat: Power | None = None
    shaft_power: Power | None = None


class CarriedSection(Table):
    """One entry of ``[[carried]]``: a scalar that the flow carries.

    Attributes
    ----------
    name : str
        What it is called.
    array : str or None
        Array that holds it; None where only groups supply it.
    per : {"mass", "volume"}
        Whether its values are an amount a mass or an amount a volume.
    unit : str
        Of the amount, for print only: values are taken as they are.
    source : float
        Amount a second that arises inside.
    at : {"nodes", "faces"} or None
        Where to look when the name of the array occurs on both.
    """

    name: Text = Field(description='a name, such as "salt"')
    array: Text | None = None
    per: Literal["mass", "volume"] = "mass"
    unit: Text = "kg"
    source: float = Field(default=0.0, strict=False, allow_inf_nan=False)
    at: Literal["nodes", "faces"] | None = None


class LossSection(Table):
    """One entry of ``[[loss]]``: the loss coefficient between two ports.

    Attributes
    ----------
    between : tuple of 2 str
        The upstream and the downstream port.
    speed_of : str or None
        The port whose mean speed the coefficient refers to; default the first.
    """

    between: Texts = Field(description='two ports, such as ["feed", "left"]')
    speed_of: Text | None = None
