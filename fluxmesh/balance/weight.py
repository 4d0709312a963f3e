"""Enclosed volume, its centroid, and the weight of the fluid in it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fluxmesh.balance.wrench import Vector, Wrench
from fluxmesh.integral.table import IntegralTable

__all__ = ["Enclosed", "Fluid", "enclosed_volume", "fluid_held", "weight_wrench"]


@dataclass(frozen=True, eq=False)
class Enclosed:
    """The volume inside a closed surface.

    Attributes
    ----------
    volume : float
        m^3.
    centroid : ndarray, shape (3,), float64
        m.
    """

    volume: float
    centroid: Vector


@dataclass(frozen=True, eq=False)
class Fluid:
    """The fluid held.

    Attributes
    ----------
    mass : float
        kg.
    weight : ndarray, shape (3,), float64
        Mass times gravity, N.
    centre : ndarray, shape (3,), float64
        Centre of mass, m.
    """

    mass: float
    weight: Vector
    centre: Vector


def enclosed_volume(table: IntegralTable) -> Enclosed:
    """Return volume and centroid by the divergence theorem, about the near origin.

    Parameters
    ----------
    table : IntegralTable
        Table of a closed surface with normals out of the volume.

    Returns
    -------
    Enclosed
        ``V = ∮ x·n dA / 3`` and ``V x_c = ∮ x_k² n_k dA / 2`` for each k (Gauss'
        theorem; Mirtich 1996, J. Graphics Tools 1(2), from memory).
    """
    volume = float(np.trace(table.total("position_normal").reshape(3, 3))) / 3
    squares = table.total("square_normal").reshape(6, 3)
    first = np.array([squares[k, k] for k in range(3)]) / 2
    shift = first / volume if volume != 0.0 else np.zeros(3)
    return Enclosed(volume, table.origin + shift)


def fluid_held(enclosed: Enclosed, density: float, gravity: tuple[float, float, float]) -> Fluid:
    """Return mass, weight and centre of a fluid of one density.

    Parameters
    ----------
    enclosed : Enclosed
        The volume.
    density : float
        kg/m^3.
    gravity : tuple of 3 floats
        m/s².
    """
    mass = density * enclosed.volume
    return Fluid(mass, mass * np.asarray(gravity), enclosed.centroid)


def weight_wrench(mass: float, centre: Vector, gravity: tuple[float, float, float], about: Vector) -> Wrench:
    """Return the weight of a body and its moment.

    Parameters
    ----------
    mass : float
        kg.
    centre : ndarray, shape (3,), float64
        Centre of mass, m.
    gravity : tuple of 3 floats
        m/s².
    about : ndarray, shape (3,), float64
        Point that the moment is about, m.
    """
    weight = mass * np.asarray(gravity)
    return Wrench(weight, np.cross(centre - about, weight), about)
