"""Velocity profiles for ports whose flow is supplied."""
