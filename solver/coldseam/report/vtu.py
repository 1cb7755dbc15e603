"""The field as VTK XML unstructured grids: the open format of VTK and ParaView.

Written by hand because the answers must not depend on VTK, which needs graphics libraries that a
server may lack. Arrays are inline base64 blocks of zlib-compressed little-endian data, as the
"VTK File Formats" chapter of the VTK User's Guide describes (header: number of blocks, block
size, size of the last block, compressed size of each block; headers here are UInt64).
"""

from __future__ import annotations

import base64
import zlib
from pathlib import Path
from xml.sax.saxutils import quoteattr

import numpy as np

from coldseam.report.files import write_files
from coldseam.report.view import View

_BLOCK = 1 << 20
_TYPES = {"f8": "Float64", "f4": "Float32", "i8": "Int64", "i4": "Int32", "u1": "UInt8"}
_SHAPES = {2: 3, 3: 5, 4: 10}  # nodes of a simplex -> VTK line, triangle, tetrahedron


def write_field(folder: str | Path, view: View) -> list[Path]:
    """Write field.vtu (the cells) and surface.vtu (the exterior facets) into a folder, both or none.

    Positions are metres (the field data array ``length_unit`` says so), temperatures °C at the
    nodes, heat flux W/m² in the cells, ``body`` and ``boundary`` indices into the names that the
    field data arrays ``body_names`` and ``boundary_names`` hold. In an axisymmetric section x is
    the radius and y the axis. (meshio, up to 5.3 at least, refuses files with text arrays; VTK,
    pyvista and ParaView read them.)

    Raises
    ------
    OutputError
        They could not be written.
    """
    return write_files(folder, {"field.vtu": field_bytes(view), "surface.vtu": surface_bytes(view)})


def field_bytes(view: View) -> bytes:
    """Return field.vtu."""
    mesh = view.mesh
    node_data = {} if view.temperature is None else {"temperature_degC": view.temperature}
    cell_data = {"body": mesh.cell_body.astype(np.int32)}
    if view.cell_flux is not None:
        cell_data["heat_flux_W_m2"] = _three(view.cell_flux)
    return _grid(mesh.points, mesh.cells, node_data, cell_data, _texts(view))


def surface_bytes(view: View) -> bytes:
    """Return surface.vtu: the exterior facets with their boundary and body."""
    mesh = view.mesh
    nodes, facets = np.unique(mesh.facets, return_inverse=True)
    node_data = {} if view.temperature is None else {"temperature_degC": view.temperature[nodes]}
    cell_data = {
        "boundary": view.facet_boundary.astype(np.int32),
        "body": mesh.cell_body[mesh.facet_cell].astype(np.int32),
    }
    return _grid(mesh.points[nodes], facets.reshape(mesh.facets.shape), node_data, cell_data, _texts(view))


def _texts(view: View) -> dict[str, list[str]]:
    return {
        "length_unit": ["m"],
        "coordinates": ["r, z" if view.mesh.axisymmetric else ", ".join("xyz"[: view.mesh.dim])],
        "title": [view.title],
        "body_names": [body.name for body in view.mesh.bodies],
        "body_materials": [body.material for body in view.mesh.bodies],
        "boundary_names": list(view.boundary_names),
    }


def _three(vectors: np.ndarray) -> np.ndarray:
    return np.pad(vectors, ((0, 0), (0, 3 - vectors.shape[1])))


def _grid(points, cells, node_data: dict, cell_data: dict, texts: dict[str, list[str]]) -> bytes:
    n_cells, width = cells.shape
    parts = [
        '<?xml version="1.0"?>\n<VTKFile type="UnstructuredGrid" version="1.0" byte_order="LittleEndian" '
        'header_type="UInt64" compressor="vtkZLibDataCompressor">\n<UnstructuredGrid>\n<FieldData>\n',
        *(_text_array(name, values) for name, values in texts.items()),
        f'</FieldData>\n<Piece NumberOfPoints="{len(points)}" NumberOfCells="{n_cells}">\n<Points>\n',
        _array("points", _three(points)),
        "</Points>\n<Cells>\n",
        _array("connectivity", cells.astype(np.int64).ravel()),
        _array("offsets", np.arange(width, width * n_cells + 1, width, dtype=np.int64)),
        _array("types", np.full(n_cells, _SHAPES[width], dtype=np.uint8)),
        "</Cells>\n<PointData>\n",
        *(_array(name, values) for name, values in node_data.items()),
        "</PointData>\n<CellData>\n",
        *(_array(name, values) for name, values in cell_data.items()),
        "</CellData>\n</Piece>\n</UnstructuredGrid>\n</VTKFile>\n",
    ]
    return "".join(parts).encode()


def _array(name: str, values: np.ndarray) -> str:
    values = np.ascontiguousarray(values)
    values = values.astype(values.dtype.newbyteorder("<"), copy=False)
    kind = _TYPES[values.dtype.kind + str(values.dtype.itemsize)]
    width = f' NumberOfComponents="{values.shape[1]}"' if values.ndim == 2 else ""
    return f'<DataArray type="{kind}" Name={quoteattr(name)}{width} format="binary">{_packed(values)}</DataArray>\n'


def _packed(values: np.ndarray) -> str:
    data = memoryview(values).cast("B") if values.size else memoryview(b"")
    blocks = [zlib.compress(data[start : start + _BLOCK], 1) for start in range(0, len(data), _BLOCK)]
    head = np.array([len(blocks), _BLOCK, len(data) % _BLOCK, *map(len, blocks)], dtype="<u8")
    return base64.b64encode(head.tobytes()).decode() + base64.b64encode(b"".join(blocks)).decode()


def _text_array(name: str, values: list[str]) -> str:
    """Return a VTK string array: UTF-8 codes, each text ended by a zero."""
    codes = " ".join(str(code) for value in values for code in (*value.encode(), 0))
    return (
        f'<Array type="String" Name={quoteattr(name)} NumberOfTuples="{len(values)}" format="ascii">{codes}</Array>\n'
    )
