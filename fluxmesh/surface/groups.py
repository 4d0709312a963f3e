"""Which group every face belongs to: by a tag array, by named sets, or picked by rule."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fluxmesh.errors import GroupError
from fluxmesh.surface.picks import Pick, by_pick
from fluxmesh.surface.wording import counted

__all__ = ["Pick", "by_array", "by_pick", "by_sets"]

_LISTED = 12  # values or sets named in one message
_BLOCK = 1 << 16
_TABLE = 1 << 22  # widest range of tags that is looked up in a table
_REST = "or give one group rest = true"


def by_array(
    values: ArrayLike, wanted: Mapping[str, Iterable[int | str]], *, rest: bool = False, array: str = ""
) -> NDArray[np.int32]:
    """Sort faces into groups by a tag on each face.

    Parameters
    ----------
    values : array_like, shape (n_faces,)
        Tags: integers, text, or floats that are whole numbers.
    wanted : mapping of str to iterable of int or str
        Group name -> its tags. Text that spells a whole number is that number
        where the array holds numbers.
    rest : bool, optional
        Whether faces may be left over.
    array : str, optional
        Name of the array, for messages.

    Returns
    -------
    ndarray, shape (n_faces,), int32
        Position of each face's group in `wanted`; -1 for faces left over.

    Raises
    ------
    GroupError
        A tag that two groups claim, a group without faces, faces in no group
        while `rest` is false, or an array that holds no tags.
    """
    wanted = {name: _tuple(group_tags) for name, group_tags in wanted.items()}
    tags = np.asarray(values)
    called = f"array '{array}'" if array else "the array"
    if tags.ndim == 2 and tags.shape[1] == 1:
        tags = tags[:, 0]
    if tags.ndim != 1 or tags.dtype.kind not in "biufSU":
        raise GroupError(
            f"{called} has shape {tags.shape} and type {tags.dtype}, which are no tags",
            remedy="Tags are one whole number or one word a face",
        )
    if tags.dtype.kind == "S":
        tags = np.char.decode(tags, "utf-8", "replace")
    if tags.dtype.kind == "U":
        owner = _by_text(tags, _claims(wanted, str))
    else:
        owner = _by_number(tags, _claims(wanted, lambda tag: _whole(tag, tags, called)), called)
    for index, (name, group_tags) in enumerate(wanted.items()):
        if not (owner == index).any():
            listed = ", ".join(repr(tag) for tag in group_tags) or "nothing"
            raise GroupError(
                f"group '{name}' has no faces: no face has the tag {listed} in {called}, which holds {_tally(tags)}",
                remedy=f"Name one of these with tag = ...{_near_text(tags, group_tags)}",
            )
    if not rest and owner.min(initial=0) < 0:
        left = tags[owner < 0]
        raise GroupError(
            f"{counted(left.size, 'face')} in no group: {called} has {_tally(left)} there",
            remedy=f"Add a group for each value, add the value to a group's tag, {_REST}",
        )
    return owner


def by_sets(
    face_sets: Mapping[str, NDArray[np.int64]],
    wanted: Mapping[str, Iterable[str]],
    face_count: int,
    *,
    rest: bool = False,
) -> NDArray[np.int32]:
    """Sort faces into groups by named sets of faces.

    Parameters
    ----------
    face_sets : mapping of str to ndarray of int64
        Set name -> indices of its faces.
    wanted : mapping of str to iterable of str
        Group name -> names of its sets.
    face_count : int
        Number of faces.
    rest : bool, optional
        Whether faces may be left over.

    Returns
    -------
    ndarray, shape (face_count,), int32
        Position of each face's group in `wanted`; -1 for faces left over.

    Raises
    ------
    GroupError
        A set that is not there, a group without faces, a face in two groups,
        or faces in no group while `rest` is false.
    """
    owner = np.full(face_count, -1, dtype=np.int32)
    wanted = {name: _tuple(sets) for name, sets in wanted.items()}
    names = list(wanted)
    sizes = {name: faces.size for name, faces in face_sets.items()}
    for index, (name, sets) in enumerate(wanted.items()):
        for set_name in sets:
            if set_name not in face_sets:
                raise GroupError(
                    f"group '{name}' asks for the set '{set_name}', and the file has {_listed(sizes)}",
                    remedy=f"Name one of these with tag = ...{_near_name(set_name, face_sets)}",
                )
            faces = face_sets[set_name]
            taken = (owner[faces] >= 0) & (owner[faces] != index)
            if taken.any():
                face = int(faces[taken][0])
                raise GroupError(
                    f"face {face} is in group '{names[owner[face]]}' and in group '{name}' (set '{set_name}'), "
                    f"with {counted(int(taken.sum()) - 1, 'more face', 'more faces')} like it",
                    remedy="Choose sets that have no face in common",
                )
            owner[faces] = index
        if not (owner == index).any():
            raise GroupError(f"group '{name}' has no faces", remedy="Name a set that has some")
    left = owner < 0
    if left.any() and not rest:
        used = {set_name for sets in wanted.values() for set_name in sets}
        unused = {name: int(left[faces].sum()) for name, faces in face_sets.items() if name not in used}
        there = _listed({name: count for name, count in unused.items() if count})
        raise GroupError(
            f"{counted(int(left.sum()), 'face')} in no group; sets that have them: {there}",
            remedy=f"Add a group for each set, add the set to a group's tag, {_REST}",
        )
    return owner


def _tuple(tags: Iterable[Any]) -> tuple[Any, ...]:
    """Return tags that can be gone through twice; a single word is one tag, not its letters."""
    return (tags,) if isinstance(tags, str) else tuple(tags)


def _claims(wanted: Mapping[str, Iterable[int | str]], as_tag: Any) -> dict[Any, int]:
    """Return tag -> position of the group that claims it."""
    claims: dict[Any, int] = {}
    names = list(wanted)
    for index, (name, tags) in enumerate(wanted.items()):
        for tag in map(as_tag, tags):
            if claims.setdefault(tag, index) != index:
                raise GroupError(
                    f"groups '{names[claims[tag]]}' and '{name}' both claim the tag {tag!r}",
                    remedy="Give each value to one group",
                )
    return claims


def _whole(tag: int | str, tags: NDArray[Any], called: str) -> int:
    try:
        return int(tag)
    except ValueError as error:
        raise GroupError(
            f"the tag {tag!r} is no whole number, but {called} holds {_tally(tags)}",
            remedy="Name the value with tag = ...",
        ) from error


def _by_text(tags: NDArray[np.str_], claims: dict[str, int]) -> NDArray[np.int32]:
    owner = np.full(tags.size, -1, dtype=np.int32)
    for tag, index in claims.items():
        owner[tags == tag] = index
    return owner


def _by_number(tags: NDArray[Any], claims: dict[int, int], called: str) -> NDArray[np.int32]:
    """Look tags up block by block, so that no temporary is as long as the mesh."""
    owner = np.empty(tags.size, dtype=np.int32)
    known = np.array(sorted(tag for tag in claims if abs(tag) < 1 << 62), dtype=np.int64)
    if known.size == 0:
        owner.fill(-1)
        return owner
    low, high = int(known[0]) - 1, int(known[-1]) + 1
    # one place below and one above stand for all tags outside
    table = np.full(min(high - low + 1, _TABLE + 1), -1, dtype=np.int32)
    in_table = high - low < _TABLE
    groups = np.array([claims[int(tag)] for tag in known], dtype=np.int32)
    if in_table:
        table[known - low] = groups
    for start in range(0, tags.size, _BLOCK):
        block = _whole_block(tags, start, called)
        if in_table:
            owner[start : start + _BLOCK] = table.take(block - low, mode="clip")
        else:
            at = np.minimum(np.searchsorted(known, block), known.size - 1)
            owner[start : start + _BLOCK] = np.where(known[at] == block, groups[at], -1)
    return owner


def _whole_block(tags: NDArray[Any], start: int, called: str) -> NDArray[np.int64]:
    block = tags[start : start + _BLOCK]
    if block.dtype.kind == "f":
        if not ((block == np.rint(block)) & (np.abs(block) < 2.0**62)).all():
            broken = np.flatnonzero(~((tags == np.rint(tags)) & (np.abs(tags) < 2.0**62)))
            raise GroupError(
                f"{called} holds values that are no whole numbers on {counted(broken.size, 'face')}, "
                f"the first is {tags[broken[0]]:g} on face {broken[0]}",
                remedy="Tags are whole numbers or words: name another array",
            )
    elif block.dtype == np.uint64:
        block = np.minimum(block, np.uint64(1 << 62))
    return block.astype(np.int64)


def _tally(tags: NDArray[Any]) -> str:
    """Return the values that occur, the most frequent first, with their numbers of faces."""
    values, counts = np.unique(tags, return_counts=True)
    order = np.argsort(-counts, kind="stable")
    names = [str(values[at]) if tags.dtype.kind == "U" else f"{values[at]:.15g}" for at in order[:_LISTED]]
    text = ", ".join(f"{name} ({counted(int(counts[at]), 'face')})" for name, at in zip(names, order))
    return text + (f" and {order.size - _LISTED} more values" if order.size > _LISTED else "")


def _listed(sizes: Mapping[str, int]) -> str:
    shown = [f"'{name}' ({counted(count, 'face')})" for name, count in list(sizes.items())[:_LISTED]]
    more = f" and {len(sizes) - _LISTED} more" if len(sizes) > _LISTED else ""
    return (", ".join(shown) or "none") + more


def _near_text(tags: NDArray[Any], asked: Iterable[int | str]) -> str:
    if tags.dtype.kind != "U":
        return ""
    words = [str(word) for word in np.unique(tags)]
    return next((hint for hint in (_near_name(str(tag), words) for tag in asked) if hint), "")


def _near_name(name: str, names: Iterable[str]) -> str:
    near = difflib.get_close_matches(name, list(names), n=1)
    return f"; did you mean '{near[0]}'?" if near else ""
