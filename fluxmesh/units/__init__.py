"""Quantities with units, taken to SI at the edge and nowhere else."""

from fluxmesh.units.quantity import LARGEST, Measured, parse_quantity, parse_vector, unit_factor

__all__ = ["LARGEST", "Measured", "parse_quantity", "parse_vector", "unit_factor"]
