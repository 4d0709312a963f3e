"""What `check` prints."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fluxmesh.assess.review import Review

if TYPE_CHECKING:
    from rich.console import Console

__all__ = ["print_review"]


def print_review(console: Console, review: Review) -> None:
    """Print facts and doubts.

    Parameters
    ----------
    console : rich.console.Console
        Where to.
    review : Review
        What was found.
    """
    from rich.text import Text

    for fact in review.facts:
        console.print(Text(fact))
    console.print()
    if not review.doubts:
        console.print(Text("Nothing doubtful was found.", style="bold green"))
        return
    count = len(review.doubts)
    console.print(Text(f"{count} doubt{'s' if count != 1 else ''}:", style="bold yellow"))
    for number, doubt in enumerate(review.doubts, 1):
        console.print(Text(f"{number}. {doubt.seen}"))
        console.print(Text(f"   Why it matters: {doubt.matters}."))
        # not wrapped: a line of a case is copied as a whole
        console.print(Text(f"   To settle it: {doubt.remedy()}"), soft_wrap=True)
