"""``python -m fluxmesh``."""

from __future__ import annotations

from fluxmesh.cli import main

if __name__ == "__main__":
    main()
