"""How the faces get their groups: which ways fit together.

A file that names its groups (an array, or named sets) is read by tags, several
files give a group each, and on a mesh that names nothing the groups are picked.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from fluxmesh.case.groups import GroupSection
from fluxmesh.case.problems import Problem, dotted, meant
from fluxmesh.case.sections import SurfaceSection
from fluxmesh.units.wording import either, quoted

__all__ = ["naming_problems"]

Groups = Mapping[str, GroupSection]


def naming_problems(surface: SurfaceSection, groups: Groups, *, series: bool = False) -> Iterator[Problem]:
    """Find faults in how the faces of the surface get their groups.

    Parameters
    ----------
    surface : SurfaceSection
        The mesh.
    groups : mapping of str to GroupSection
        The groups by name.
    series : bool, optional
        Whether every snapshot brings a surface of its own.

    Yields
    ------
    Problem
        One for each fault.
    """
    if series:
        if surface.file is not None or surface.files is not None:
            yield Problem(
                "surface", "a file is given here, and every snapshot brings one too", "Keep those of the snapshots"
            )
            return
    elif surface.file is None and surface.files is None:
        yield Problem(
            "surface",
            "neither file nor files is given",
            'Write file = "mesh.vtp", or files = { feed = "feed.stl" }',
        )
        return
    if surface.file is not None and surface.files is not None:
        yield Problem(
            "surface", "both file and files are given", "Keep one: all faces in one file, or one file a group"
        )
        return
    if surface.files is not None:
        yield from _one_file_a_group(surface, surface.files, groups)
        return
    names = surface.groups
    if names is not None and (names.array is None) == (not names.sets):
        found = "both array and sets are given" if names.sets else "neither array nor sets is given"
        yield Problem("surface.groups", found, 'Write groups = { array = "region" } or groups = { sets = true }')
        return
    for name, group in groups.items():
        yield from _ways_of(name, group, named_in_file=names is not None)
    yield from _overlaps(groups)


def _one_file_a_group(surface: SurfaceSection, files: Mapping[str, object], groups: Groups) -> Iterator[Problem]:
    if surface.groups is not None:
        yield Problem("surface.groups", "files already gives each group a file of its own", "Leave out one of the two")
    for name in files:
        if name not in groups:
            yield Problem(
                dotted("surface", "files", name),
                f"there is no table [{dotted('groups', name)}]",
                meant(name, groups),
            )
    for name, group in groups.items():
        if name not in files:
            yield Problem(dotted("groups", name), "surface.files has no file for this group", meant(name, files))
        for key in _given_ways(group):
            yield Problem(
                dotted("groups", name, key),
                "surface.files already says which faces the group has",
                f"Leave out {key}",
            )


def _given_ways(group: GroupSection) -> list[str]:
    given = {"tag": group.tag is not None, "pick": group.pick is not None, "rest": group.rest}
    return [key for key, here in given.items() if here]


def _ways_of(name: str, group: GroupSection, named_in_file: bool) -> Iterator[Problem]:
    ways = _given_ways(group)
    if len(ways) > 1:
        yield Problem(dotted("groups", name), f"{either(ways, 'and')} are given together", "Keep one of them")
    elif named_in_file and group.pick is not None:
        yield Problem(
            dotted("groups", name, "pick"),
            "surface.groups already says which faces the group has",
            "Leave out pick, or surface.groups",
        )
    elif not named_in_file and group.tag is not None:
        yield Problem(
            dotted("groups", name, "tag"),
            "nothing says which array holds the tag",
            'Add groups = { array = "..." } or { sets = true } to [surface]',
        )
    elif not named_in_file and not ways:
        yield Problem(
            dotted("groups", name),
            "nothing says which faces the group has",
            'Add groups = { array = "..." } to [surface], or pick = { normal, near } or rest = true here',
        )


def _overlaps(groups: Groups) -> Iterator[Problem]:
    takers = [name for name, group in groups.items() if group.rest]
    if len(takers) > 1:
        yield Problem(
            dotted("groups", takers[1], "rest"),
            f"the rest of the faces goes to {quoted(takers[0])} already",
            "Only one group can take the rest",
        )
    owner: dict[str, str] = {}
    for name, group in groups.items():
        if group.rest:
            continue
        for tag in group.tag if group.tag is not None else (name,):
            first = owner.setdefault(str(tag), name)
            if first != name:
                key = dotted("groups", name) if group.tag is None else dotted("groups", name, "tag")
                yield Problem(key, f"{quoted(str(tag))} is a tag of group {quoted(first)} too", "A face has one group")
