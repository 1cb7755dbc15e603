"""Fields over time: one VTU file a moment, and the PVD file by which ParaView plays them.

Each field is written when it is computed and not kept, so that memory stays bounded; the PVD file (VTK's collection
of files with their time) is written anew after each, so that what a killed run leaves can be opened.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from xml.sax.saxutils import quoteattr

import numpy as np

from coldseam.report.files import write_files
from coldseam.report.view import View
from coldseam.report.vtu import field_bytes

PVD = "fields.pvd"


class FieldSeries:
    """Writes fields into ``DIR/fields`` and ``DIR/fields.pvd``.

    Parameters
    ----------
    folder
        The output folder; exists.
    view
        The model, without fields.
    """

    def __init__(self, folder: Path, view: View):
        self.folder, self.view = folder, view
        self.entries: list[tuple[float, str]] = []

    def __call__(self, time: float, temperature: np.ndarray) -> None:
        """Write one field: time s, node temperatures °C (n_nodes,).

        Raises
        ------
        OutputError
            It could not be written.
        """
        inside = self.folder / "fields"
        inside.mkdir(exist_ok=True)
        name = f"field_{len(self.entries):05d}.vtu"
        write_files(inside, {name: field_bytes(replace(self.view, temperature=temperature))})
        self.entries.append((time, f"fields/{name}"))
        write_files(self.folder, {PVD: pvd_bytes(self.entries)})

    @property
    def paths(self) -> list[Path]:
        """What was written."""
        return [self.folder / PVD, *(self.folder / name for _, name in self.entries)] if self.entries else []


def pvd_bytes(entries: list[tuple[float, str]]) -> bytes:
    """Return a PVD file for times (s) and file names."""
    lines = [f'<DataSet timestep="{time:.9g}" group="" part="0" file={quoteattr(name)}/>' for time, name in entries]
    head = '<?xml version="1.0"?>\n<VTKFile type="Collection" version="0.1" byte_order="LittleEndian">\n<Collection>\n'
    return (head + "\n".join(lines) + "\n</Collection>\n</VTKFile>\n").encode()
