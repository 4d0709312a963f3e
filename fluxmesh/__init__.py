"""fluxmesh: mass and momentum balances over closed, tagged surfaces."""

from __future__ import annotations

__version__ = "0.1.0"
