"""Print how often `fluxmesh causes` names a planted slip first, id by id, as Markdown.

Usage: python scripts/causes_table.py     (a minute or two)
"""

from __future__ import annotations

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))
from tests.cause_plants import plants_table


def main() -> None:
    print(plants_table())


if __name__ == "__main__":
    main()
