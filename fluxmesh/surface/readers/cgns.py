"""CGNS files in HDF5 form: boundary conditions become sets of faces with their roles.

Read node by node with the h5py package. VTK's own reader passes over every
boundary condition that a family does not specify, and ends the process on some
damaged files (both measured with VTK 9.7.2).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FieldError, FileError
from fluxmesh.surface.rawmesh import RawMesh
from fluxmesh.surface.readers.cgns_boundary import family_types
from fluxmesh.surface.readers.cgns_nodes import Node, opened_tree
from fluxmesh.surface.readers.cgns_structured import structured_content
from fluxmesh.surface.readers.cgns_unstructured import unstructured_content
from fluxmesh.surface.readers.content import FileContent, surface_of_parts

__all__ = ["read_cgns"]

# What h5py and NumPy are seen to raise on damaged files.
_DAMAGE = (ArithmeticError, LookupError, MemoryError, OSError, RecursionError, RuntimeError, TypeError, ValueError)


def read_cgns(path: Path, skin: bool | None = None) -> RawMesh:
    """Read a CGNS file.

    Parameters
    ----------
    path : Path
        An existing file, not empty.
    skin : bool, optional
        As `fluxmesh.surface.files.read_mesh`.

    Returns
    -------
    RawMesh
        The faces of the boundary conditions of all zones, each condition a
        set under its name, or under that of its family where the family
        specifies it; conditions of one name in several zones are one set.
        Their SIDS types give `RawMesh.roles`. Zones of surface elements are
        sets too, and a file of volume cells alone gives its skin. Solutions
        at vertices are node arrays, those at cell centres face arrays.

    Raises
    ------
    FileError
        The file is damaged, cut short, in the older ADF form, needs a package
        that is not installed, or has no faces.
    FieldError
        An array has the wrong length.
    """
    try:
        with opened_tree(path) as root:
            parts = _zones(root, path.name)
    except (FileError, FieldError):
        raise
    except _DAMAGE as error:
        said = str(error).strip("'\"").splitlines()
        raise FileError(
            f"cannot be read as CGNS ({type(error).__name__}: {said[0] if said else 'no reason given'})",
            str(path),
            "It is damaged or cut short; export or copy it again",
        ) from error
    return surface_of_parts(parts, str(path), skin, path.name, named=False)


def _zones(root: Node, source: str) -> list[tuple[str, FileContent]]:
    """Return what each zone holds."""
    found = [(base, zone) for base in root.children("CGNSBase_t") for zone in base.children("Zone_t")]
    parts = []
    for base, zone in found:
        _require_dimension(base)
        sizes = zone.integers()
        families = family_types(base)
        kind = zone.child("ZoneType")
        if kind is not None and kind.text() == "Unstructured":
            if sizes.size < 2 or int(sizes[:2].min()) < 0:
                raise _bad_size(zone, sizes)
            part = unstructured_content(zone, sizes, families, source, len(found) == 1)
        else:
            if sizes.size not in (6, 9) or int(sizes.min()) < 0:
                raise _bad_size(zone, sizes)
            part = structured_content(zone, sizes.reshape(3, -1), families, source)
        parts.append((f"zone {zone.name!r}", part))
    if not parts:
        raise FileError("holds no zone", root.where.rstrip(": "), "Export it again, with grid and solution in one file")
    return parts


def _require_dimension(base: Node) -> None:
    head = base.integers()
    if head.size < 2 or head[0] not in (2, 3):
        raise FileError(f"has cells of dimension {head[:1].tolist()}", base.where, "Export a surface or a volume")


def _bad_size(zone: Node, sizes: NDArray[np.int64]) -> FileError:
    return FileError(f"has the sizes {sizes.tolist()}", zone.where, "The file is damaged; export it again")
