"""Read a mesh file with meshio into plain blocks of cells and named groups.

Groups are what the file's format calls physical names, cell sets or integer tags; a tag without a
name is known by its number as text. Second-order cells are reduced to their corners.
"""

from __future__ import annotations

import contextlib
import io
import re
import struct
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from xml.etree.ElementTree import ParseError

import numpy as np

from coldseam.errors import CaseError, Fault
from coldseam.mesh.split import CORNERS, DIMENSION

MESH_KEY = ("model", "mesh")
# What meshio's readers raise on files that aren't what their names say.
READ_ERRORS = (
    OSError,
    EOFError,
    ValueError,
    LookupError,
    TypeError,
    AttributeError,
    AssertionError,
    ArithmeticError,
    NotImplementedError,
    MemoryError,
    ImportError,
    ParseError,
    struct.error,
)


@dataclass(frozen=True, kw_only=True, eq=False)
class Block:
    """Cells of one kind: corner nodes, shape (n, corners)."""

    kind: str
    cells: np.ndarray

    @property
    def dim(self) -> int:
        """Dimension of the cells: 1 for lines, 2 for faces, 3 for solids."""
        return DIMENSION[self.kind]


@dataclass(frozen=True, kw_only=True, eq=False)
class RawMesh:
    """A mesh file's content.

    Parameters
    ----------
    points
        In the file's unit, shape (n, 3).
    blocks
        Cells by kind.
    groups
        For every name a list with, for each block, the numbers of its cells in the group.
    remarks
        What was left out or changed in reading, in sentences.
    """

    points: np.ndarray
    blocks: tuple[Block, ...]
    groups: dict[str, list[np.ndarray]]
    remarks: tuple[str, ...]


def mesh_fault(what: str) -> CaseError:
    """Return the error of a mesh file that can't be used."""
    return CaseError([Fault(path=MESH_KEY, what=what)])


def read_file(path: Path) -> RawMesh:
    """Read a mesh file.

    Raises
    ------
    CaseError
        The file is missing, empty, a script, of unknown kind, damaged, or holds no usable cells.
    """
    path = Path(path)
    name = path.name
    if path.suffix.lower() in (".geo", ".geo_unrolled"):
        what = f'"{name}" is a script, which could run commands on this machine; give the mesh that was made from it'
        raise mesh_fault(f"{what} (.msh, .vtu, .inp ...)")
    if not path.is_file():
        raise mesh_fault(f'there is no file "{name}"' + (" (it is a folder)" if path.is_dir() else ""))
    if path.stat().st_size == 0:
        raise mesh_fault(f'"{name}" is empty')
    content = _meshio_read(path)
    points = np.asarray(content.points, dtype=float)
    if points.ndim != 2 or not len(points) or points.shape[1] not in (2, 3):
        raise mesh_fault(f'"{name}" holds no points in two or three dimensions')
    if not np.all(np.isfinite(points)):
        bad = int(np.count_nonzero(~np.isfinite(points).all(axis=1)))
        raise mesh_fault(f'"{name}" has {bad} points whose coordinates are not numbers')
    if points.shape[1] == 2:
        points = np.column_stack([points, np.zeros(len(points))])
    kept, blocks, remarks = _blocks(content, name, len(points))
    return RawMesh(points=points, blocks=blocks, groups=_groups(content, kept, blocks), remarks=remarks)


def _meshio_read(path: Path) -> Any:
    import meshio

    suffixes = {"".join(path.suffixes[i:]).lower() for i in range(len(path.suffixes))}
    if not suffixes & set(meshio.extension_to_filetypes):
        known = " ".join(sorted(meshio.extension_to_filetypes))
        raise mesh_fault(f'"{path.name}" is of a kind that is not known; known: {known}')
    told = io.StringIO()
    # meshio prints what it thinks and leaves the process when no reader fits.
    with contextlib.redirect_stdout(told), contextlib.redirect_stderr(told):
        try:
            return meshio.read(path)
        except SystemExit:
            why = " ".join(told.getvalue().split())
        except meshio.ReadError as error:
            why = str(error)
        except READ_ERRORS as error:
            why = f"{type(error).__name__}: {error}"
    why = why.replace(str(path), path.name).replace(str(path.parent), "")
    what = f'"{path.name}" can\'t be read as a {path.suffix} mesh; it is damaged or of another kind'
    raise mesh_fault(f"{what} ({why[:300]})")


def _blocks(content: Any, name: str, n_points: int) -> tuple[list[int], tuple[Block, ...], tuple[str, ...]]:
    """Return which of the file's blocks are kept, the blocks reduced to corners, and remarks."""
    kept: list[int] = []
    blocks: list[Block] = []
    strange: dict[str, int] = {}
    reduced: dict[str, int] = {}
    for i, block in enumerate(content.cells):
        kind = re.sub(r"\d+$", "", block.type)
        if kind == "vertex" or not len(block.data):
            continue
        if kind not in CORNERS:
            strange[block.type] = strange.get(block.type, 0) + len(block.data)
            continue
        data = np.asarray(block.data, dtype=np.int64)
        if data.min() < 0 or data.max() >= n_points:
            raise mesh_fault(f'"{name}" has {block.type} cells that refer to points it does not hold')
        if data.shape[1] > CORNERS[kind]:
            reduced[block.type] = reduced.get(block.type, 0) + len(data)
        kept.append(i)
        blocks.append(Block(kind=kind, cells=data[:, : CORNERS[kind]]))
    if strange:
        found = ", ".join(f"{count} {kind}" for kind, count in strange.items())
        raise mesh_fault(f'"{name}" has cells of a kind that is not known: {found}; known: {", ".join(CORNERS)}')
    if not blocks:
        raise mesh_fault(f'"{name}" holds no cells')
    remarks: tuple[str, ...] = ()
    if reduced:
        found = ", ".join(f"{count} {kind}" for kind, count in reduced.items())
        remarks = (f"second-order cells reduced to their corners, curved sides become straight: {found}",)
    return kept, tuple(blocks), remarks


def _groups(content: Any, kept: list[int], blocks: tuple[Block, ...]) -> dict[str, list[np.ndarray]]:
    """Collect named groups from cell sets, physical names and integer tags."""
    groups: dict[str, list[np.ndarray]] = {}

    def add(name: str, position: int, rows: np.ndarray) -> None:
        lists = groups.setdefault(name, [np.zeros(0, dtype=np.int64) for _ in blocks])
        lists[position] = np.union1d(lists[position], rows)

    for name, members in content.cell_sets.items():
        if name.startswith("gmsh:"):
            continue
        for position, i in enumerate(kept):
            rows = members[i] if i < len(members) else None
            if rows is not None and len(rows):
                add(name, position, np.asarray(rows, dtype=np.int64))
    named = {
        (int(value[0]), int(value[1])): str(name)
        for name, value in content.field_data.items()
        if np.shape(value) == (2,)
    }
    for key in _tag_arrays(content):
        for position, i in enumerate(kept):
            tags = np.asarray(content.cell_data[key][i])
            for tag in np.unique(tags[tags != 0]):
                # A tag of physical groups names one group per dimension; elsewhere it is just a number.
                name = named.get((int(tag), blocks[position].dim), str(int(tag)))
                add(name, position, np.flatnonzero(tags == tag))
    return groups


def _tag_arrays(content: Any) -> list[str]:
    """Return the cell data that hold group numbers: physical tags, else the one integer field there is."""
    whole = [
        key
        for key, arrays in content.cell_data.items()
        if key != "gmsh:geometrical"
        and all(np.ndim(array) == 1 and np.issubdtype(np.asarray(array).dtype, np.integer) for array in arrays)
    ]
    if "gmsh:physical" in whole:
        return ["gmsh:physical"]
    return whole if len(whole) == 1 else [key for key in whole if key in ("medit:ref", "cell_tags", "avsucd:material")]
