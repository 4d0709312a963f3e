"""Bad inputs, all of them made by code: see `inputs`."""

from __future__ import annotations

from tests.corpus.every import inputs

__all__ = ["inputs"]
