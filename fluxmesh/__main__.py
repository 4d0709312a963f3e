"""``python -m fluxmesh``, and the command itself: under a guard that is there before anything else is loaded."""

from __future__ import annotations

from fluxmesh.guarded import run_guarded

__all__ = ["main"]


def main() -> None:
    """Run the command line in a guarded child process."""
    run_guarded(_work)


def _work() -> None:
    from fluxmesh.cli import main as command

    command()


if __name__ == "__main__":
    main()
