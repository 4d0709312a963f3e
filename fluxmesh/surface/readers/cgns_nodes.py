"""The node tree of a CGNS file: named, labelled nodes with one array each, stored as HDF5 groups.

The layout is the open one of "SIDS-to-HDF5" in the CGNS documentation: a node is a
group with the attributes ``label`` and ``type``, its array the data set " data",
whose dimensions stand in reverse order; a link has the type "LK" and the data sets
" file" and " path" (seen in files that the CGNS library wrote).
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import FileError
from fluxmesh.surface.readers.xml_index import file_beside

__all__ = ["Node", "opened_tree"]

_DEEPEST_LINK = 8
# An array may be packed, but not as much as this: more is damage, or meant to fill the memory.
_MOST_PACKED = 1000
_ADF = b"ADF Database"
_HDF5 = b"\x89HDF\r\n\x1a\n"


@dataclass(frozen=True)
class _Tree:
    """What the nodes of one file share."""

    path: Path
    files: ExitStack
    depth: int = 0


@dataclass(frozen=True)
class Node:
    """A node of the tree.

    Attributes
    ----------
    name, label : str
        Name, and the SIDS type such as "Zone_t".
    """

    name: str
    label: str
    _group: Any
    _tree: _Tree

    @property
    def where(self) -> str:
        """File and path of the node, for messages."""
        return f"{self._tree.path}: {self._group.name.lstrip('/')}"

    def children(self, label: str = "") -> list[Node]:
        """Return the nodes below this one.

        Parameters
        ----------
        label : str, optional
            Only nodes of this SIDS type.

        Returns
        -------
        list of Node
            In the order they were made where the file keeps that, else by name.
        """
        found = (_node(self._group, key, self._tree) for key in self._group if not key.startswith(" "))
        return [node for node in found if node is not None and label in ("", node.label)]

    def child(self, name: str) -> Node | None:
        """Return the node of that name below this one.

        Parameters
        ----------
        name : str
            Name.

        Returns
        -------
        Node or None
            None if there is none.
        """
        return _node(self._group, name, self._tree) if name in self._group else None

    def values(self) -> NDArray[Any]:
        """Return the array of the node.

        Returns
        -------
        ndarray
            As stored: the first index of the SIDS is the last.

        Raises
        ------
        FileError
            The node has no array, or one that lies in another file.
        """
        import h5py

        data = self._group.get(" data")
        if not isinstance(data, h5py.Dataset):
            raise FileError("has no data", self.where, "The file is damaged or incomplete; export it again")
        if data.is_virtual or data.external is not None:
            raise FileError("keeps its data in another file", self.where, "Write all data into one file")
        if data.nbytes > _MOST_PACKED * (int(data.id.get_storage_size()) + 4096):
            raise FileError(
                f"announces {data.nbytes} bytes, but {data.id.get_storage_size()} are stored",
                self.where,
                "The file is damaged; export it again",
            )
        array: NDArray[Any] = data[()]
        return array.astype(array.dtype.newbyteorder("="), copy=False)

    def integers(self) -> NDArray[np.int64]:
        """Return the array of the node, whole numbers in one row.

        Returns
        -------
        ndarray, shape (n,), int64
            As stored, flattened.

        Raises
        ------
        FileError
            It is no array of whole numbers.
        """
        values = self.values()
        if values.dtype.kind not in "iu":
            raise FileError(f"holds values of type {values.dtype}", self.where, "Whole numbers are needed")
        return values.astype(np.int64, copy=False).ravel()

    def text(self) -> str:
        """Return the array of the node as text.

        Returns
        -------
        str
            Without blanks around it.

        Raises
        ------
        FileError
            It is no text.
        """
        values = self.values()
        if values.dtype.itemsize != 1:
            raise FileError(f"holds values of type {values.dtype}", self.where, "Text is needed")
        return values.tobytes().decode("utf-8", "replace").strip("\0 \t\r\n")


@contextmanager
def opened_tree(path: Path) -> Iterator[Node]:
    """Open a CGNS file.

    Parameters
    ----------
    path : Path
        An existing file, not empty.

    Yields
    ------
    Node
        The root. Nodes can be used until the block ends.

    Raises
    ------
    FileError
        The file is no CGNS file in HDF5 form, or a package is missing.
    """
    with path.open("rb") as stream:
        head = stream.read(32)
    if _ADF in head:
        raise FileError(
            "is a CGNS file in the older ADF form, which cannot be read",
            str(path),
            "Convert it to the HDF5 form; the tools of the CGNS library do that",
        )
    if not head.startswith(_HDF5):
        raise FileError("is no CGNS file", str(path), "Check that the suffix tells what the file is")
    try:
        import h5py
    except ImportError as error:
        raise FileError("needs the package h5py to be read", str(path), "Install it: pip install h5py") from error
    with ExitStack() as files:
        file = files.enter_context(h5py.File(path, "r"))
        yield Node("", "", file, _Tree(path, files))


def _node(group: Any, key: str, tree: _Tree) -> Node | None:
    """Return a node, links followed; None for what is no node."""
    import h5py

    link = group.get(key, getlink=True)
    if isinstance(link, h5py.ExternalLink):
        return _from_file(link.filename, link.path, key, tree)
    found = group[key]
    if not isinstance(found, h5py.Group):
        return None
    label, kind = (_attribute(found, name) for name in ("label", "type"))
    if kind != "LK":
        return Node(key, label, found, tree)
    here = Node(key, label, found, tree)
    path, file = (_linked(found, part) for part in (" path", " file"))
    if file:
        return _from_file(file, path, key, tree)
    if tree.depth >= _DEEPEST_LINK:
        raise FileError(f"is a link to a link, more than {_DEEPEST_LINK} deep", here.where, "Export it again")
    deeper = _Tree(tree.path, tree.files, tree.depth + 1)
    return _renamed(_at(found.file, path, here.where, deeper), key)


def _from_file(reference: str, path: str, key: str, tree: _Tree) -> Node:
    """Return a node of a file beside this one."""
    import h5py

    where = f"{tree.path}: link {key!r}"
    if tree.depth >= _DEEPEST_LINK:
        raise FileError(f"links to files that link to files, more than {_DEEPEST_LINK} deep", where, "Export it again")
    other = file_beside(tree.path, reference, where)
    file = tree.files.enter_context(h5py.File(other, "r"))
    return _renamed(_at(file, path, where, _Tree(other, tree.files, tree.depth + 1)), key)


def _at(file: Any, path: str, where: str, tree: _Tree) -> Node:
    group, node = file, None
    for part in path.strip("/").split("/"):
        node = _node(group, part, tree) if part in group else None
        if node is None:
            raise FileError(f"links to {path!r}, which is not there", where, "Export it again")
        group = node._group
    assert node is not None
    return node


def _renamed(node: Node, name: str) -> Node:
    return Node(name, node.label, node._group, node._tree)


def _attribute(group: Any, name: str) -> str:
    value = group.attrs.get(name, b"")
    return value.decode("ascii", "replace").strip("\0 ") if isinstance(value, bytes) else str(value)


def _linked(group: Any, name: str) -> str:
    data = group.get(name)
    return "" if data is None else np.asarray(data[()]).tobytes().decode("utf-8").strip("\0 ")
