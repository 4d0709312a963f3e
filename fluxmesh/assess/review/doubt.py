"""A doubt, and the line of a case that would settle it."""

from __future__ import annotations

from dataclasses import dataclass

from fluxmesh.assess.review.toml import TomlValue, toml_key, toml_value

__all__ = ["Doubt", "Review", "Setting"]


@dataclass(frozen=True)
class Setting:
    """One line of a case.

    Attributes
    ----------
    path : tuple of str
        Its key, from the outermost table inwards.
    value : TomlValue
        Its value.
    """

    path: tuple[str, ...]
    value: TomlValue

    def line(self) -> str:
        """Return the line as TOML."""
        return f"{toml_key(*self.path)} = {toml_value(self.value)}"


@dataclass(frozen=True)
class Doubt:
    """Something that may be wrong.

    Attributes
    ----------
    kind : str
        Which kind of doubt it is, a short name that stays the same.
    seen : str
        What was seen, one clause without a final full stop.
    matters : str
        Why it matters, likewise.
    settle : tuple of Setting
        The lines of the case that would settle it; mostly one. Empty where no
        line of the case can.
    advice : str
        What else would settle it, or what to do where no line can.
    """

    kind: str
    seen: str
    matters: str
    settle: tuple[Setting, ...] = ()
    advice: str = ""

    def remedy(self) -> str:
        """Return what would settle it, as text."""
        lines = " and ".join(setting.line() for setting in self.settle)
        return "; ".join(part for part in (lines, self.advice) if part)


@dataclass(frozen=True)
class Review:
    """What `check` found.

    Attributes
    ----------
    facts : tuple of str
        What the case is, one sentence each.
    doubts : tuple of Doubt
        What may be wrong.
    """

    facts: tuple[str, ...]
    doubts: tuple[Doubt, ...]
