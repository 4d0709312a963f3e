"""Words that the formats know, for `tests.fuzzing.mutate`."""

from __future__ import annotations

__all__ = ["LEGACY_WORDS", "TEXT_WORDS", "VTK_WORDS"]


def _words(text: str) -> tuple[str, ...]:
    """Return words, which may hold blanks that are written as "~"."""
    return tuple(word.replace("~", " ") for word in text.split())


VTK_WORDS = _words(
    """
    PolyData UnstructuredGrid ImageData RectilinearGrid StructuredGrid Piece PointData CellData Points Polys
    Cells Verts Lines Strips DataArray Array Int8 UInt8 Int32 UInt32 Int64 UInt64 Float32 Float64 String ascii
    binary appended raw base64 LittleEndian BigEndian connectivity offsets types faces faceoffsets vtkGhostType
    region U p vtkZLibDataCompressor vtkLZ4DataCompressor vtkLZMADataCompressor 3 10 12 13 14 22 24 25 42 68 69
    72 feed.vtp drain.vtp cube.vtm cube.pvtu part.vtu
    """
)
LEGACY_WORDS = _words(
    """
    ASCII BINARY DATASET POLYDATA UNSTRUCTURED_GRID STRUCTURED_POINTS POINTS POLYGONS VERTICES LINES
    TRIANGLE_STRIPS CELLS CELL_TYPES OFFSETS CONNECTIVITY vtktypeint64 CELL_DATA POINT_DATA SCALARS VECTORS
    NORMALS TENSORS LOOKUP_TABLE default FIELD FieldData METADATA INFORMATION NAME DATA COMPONENT_NAMES double
    float int char unsigned_char bit long vtkIdType string GLOBAL_IDS COLOR_SCALARS
    """
)
TEXT_WORDS = {
    "stl": _words(
        """
        solid facet normal outer loop vertex endloop endfacet endsolid
        """
    ),
    "obj": _words(
        """
        v vn vt f g o s usemtl mtllib l p f~1~2~3 f~-1~-2~-3 f~1/1/1~2//2~3/3 \\
        """
    ),
    "ply": _words(
        """
        element property list vertex face uchar int float double uint64 end_header comment format ascii
        binary_little_endian binary_big_endian 1.0 x vertex_indices
        """
    ),
    "off": _words(
        """
        OFF COFF NOFF 4OFF
        """
    ),
    "msh": _words(
        """
        $MeshFormat $EndMeshFormat $Nodes $EndNodes $Elements $EndElements $PhysicalNames $Periodic $NodeData
        $EndNodeData $ElementData $Entities $Comments 4.1~0~8 2.2~1~8 2 4 9 15
        """
    ),
    "mesh": _words(
        """
        Dimension Vertices Triangles Tetrahedra End MeshVersionFormatted Quadrilaterals
        """
    ),
    "su2": _words(
        """
        NDIME= NPOIN= NELEM= NMARK= MARKER_TAG= MARKER_ELEMS= 5 10
        """
    ),
    "inp": _words(
        """
        *NODE *ELEMENT TYPE=C3D4 TYPE=S3 *ELSET *NSET GENERATE *INCLUDE INPUT= ELSET=
        """
    ),
}
"""By suffix."""
