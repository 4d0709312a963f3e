"""Draws of figures that are sums of what the draws move, and their summaries.

Many figures move along one and the same direction (all components of a port's momentum flux, say): its
draws are made and sorted once.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

from fluxmesh.assess.doubt.draws import Drawn, summarise
from fluxmesh.assess.doubt.figures import Figures, Path
from fluxmesh.integral.table import column_slice

__all__ = ["Summary", "Sums"]

Array = NDArray[np.float64]
Places = NDArray[np.integer]

_BLOCK: Final = 64  # directions that are drawn at a time
_SAME: Final = 12  # digits that directions share


class Sums:
    """Figures, and entries of the table behind them, as sums of what the draws move."""

    def __init__(
        self,
        moved: Array,
        rows: Array,
        base: Array,
        middle: Figures | None = None,
        shape: tuple[int, ...] = (),
    ) -> None:
        self.moved, self.base, self._rows, self._middle = moved, base, rows, middle
        self._shape = shape

    def of(self, places: Places | slice) -> Array:
        """How figures answer to each thing moved, shape (n_figures, n_moved)."""
        return np.asarray(self._rows[:, places].T)

    def samples(self, places: Places | slice) -> Array:
        """Draws of figures, shape (n_figures, count)."""
        answer, base = self.of(places), self.base[places][:, None]
        some = np.flatnonzero(answer.any(axis=0))
        if not some.size:
            return np.broadcast_to(base, (base.size, self.moved.shape[1]))
        if some.size == answer.shape[1]:
            return np.asarray(answer @ self.moved + base)
        return np.asarray(answer[:, some] @ self.moved[some] + base)

    def rows(self, path: Path) -> Array:
        """Draws of one figure, shape (n_components, count)."""
        assert self._middle is not None
        return self.samples(self._middle.spot(path).slice)

    def columns(self, name: str, component: int = 0) -> Array:
        """Draws of one column of the table, shape (n_groups, count)."""
        groups, width = self._shape
        first = self.base.size - groups * width + column_slice(name).start + component
        # a group moves with few things: each by itself
        found = np.empty((groups, self.moved.shape[1]))
        for k in range(groups):
            found[k] = self.samples(slice(first + width * k, first + width * k + 1))
        return found


class Summary:
    """Summaries of figures, put together block by block."""

    def __init__(self, count: int, size: int) -> None:
        nan = np.full(size, np.nan)
        pair = np.full((size, 2), np.nan)
        self.drawn = Drawn(count, nan, nan.copy(), pair, pair.copy())

    def samples(self, places: slice, samples: Array) -> None:
        """Enter draws of figures."""
        one = summarise(np.array(samples))
        self.drawn.mean[places], self.drawn.standard[places] = one.mean, one.standard
        self.drawn.shortest[places], self.drawn.symmetric[places] = one.shortest, one.symmetric

    def sums(self, places: Places, sums: Sums) -> None:
        """Enter figures that are sums; those that move along one direction are drawn once."""
        found, answer = self.drawn, sums.of(places)
        known = np.isfinite(answer).all(axis=1) & np.isfinite(sums.base[places])
        places, answer = places[known], answer[known]
        base = sums.base[places]
        top = (
            np.take_along_axis(answer, np.abs(answer).argmax(axis=1, keepdims=True), axis=1)[:, 0]
            if (answer.size)
            else np.zeros(len(places))
        )
        fixed = top == 0.0
        still = places[fixed]
        found.mean[still], found.standard[still] = base[fixed], 0.0
        found.shortest[still] = found.symmetric[still] = base[fixed][:, None]
        places, top, base = places[~fixed], top[~fixed], base[~fixed]
        if not places.size:
            return
        unit = answer[~fixed] / top[:, None]
        directions, which = np.unique(np.round(unit, _SAME) + 0.0, axis=0, return_inverse=True)
        for first in range(0, len(directions), _BLOCK):
            block = directions[first : first + _BLOCK]
            one = summarise(np.ascontiguousarray(block @ sums.moved))
            mine = (which >= first) & (which < first + _BLOCK)
            at, from_ = places[mine], which[mine] - first
            scale, middle = top[mine], base[mine]
            found.mean[at] = middle + scale * one.mean[from_]
            found.standard[at] = np.abs(scale) * one.standard[from_]
            for ends, own in ((found.shortest, one.shortest), (found.symmetric, one.symmetric)):
                ends[at] = np.sort(middle[:, None] + scale[:, None] * own[from_], axis=1)
