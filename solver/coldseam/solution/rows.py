"""Rows of a history and the extremes of what limits hold, so that neither needs the whole run in memory.

Rows wait in memory until a checkpoint appends them to a file; a run without checkpoints keeps them, and the case's limit
of a million rows bounds it. Extremes are of every step's two ends and every recorded row.
"""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np

from coldseam.errors import OutputError


class Rows:
    """Rows of equal length; :meth:`spill` moves them to a file.

    Parameters
    ----------
    width
        Numbers in a row.
    """

    def __init__(self, width: int):
        self.width = width
        self.path: Path | None = None
        self.spilled = 0
        self.waiting: list[np.ndarray] = []

    def __len__(self) -> int:
        return self.spilled + len(self.waiting)

    def append(self, row: np.ndarray) -> None:
        """Add one row, (width,): its time (s), then temperatures (°C), places (mm) and flows (W)."""
        self.waiting.append(row)

    @property
    def last_time(self) -> float:
        """First number of the last row; -inf where there is none."""
        if self.waiting:
            return float(self.waiting[-1][0])
        return float(self.array()[-1, 0]) if self.spilled else -np.inf

    def spill(self, path: Path) -> int:
        """Append what waits to a file and flush it to the disk; return how many rows the file holds.

        Raises
        ------
        OutputError
            It could not be written.
        """
        try:
            with path.open("r+b" if self.spilled else "wb") as file:
                file.seek(8 * self.width * self.spilled)
                file.truncate()
                for row in self.waiting:
                    file.write(np.ascontiguousarray(row, dtype=float).tobytes())
                file.flush()
                os.fsync(file.fileno())
        except OSError as error:
            raise OutputError(
                f"the rows of the history could not be kept in {path}: {error.strerror or error}"
            ) from error
        self.path, self.spilled, self.waiting = path, len(self), []
        return self.spilled

    def recall(self, path: Path, count: int) -> None:
        """Go on after the first rows of a file; what a killed run wrote beyond them is written over.

        Raises
        ------
        OutputError
            The file does not hold so many.
        """
        if count and (not path.is_file() or path.stat().st_size < 8 * self.width * count):
            raise OutputError(f"{path} does not hold the {count} rows that the checkpoint counts; leave --resume out")
        self.path, self.spilled, self.waiting = path, count, []

    def array(self) -> np.ndarray:
        """Return all rows, (n, width), first the times (s); those of a file are mapped, not read."""
        waiting = np.array(self.waiting).reshape(-1, self.width)
        if not self.spilled or self.path is None:
            return waiting
        kept = np.memmap(self.path, dtype=float, mode="r", shape=(self.spilled, self.width))
        return kept if not self.waiting else np.vstack([kept, waiting])


class Extremes:
    """Least and largest values of some sums of a row's numbers, and when they were reached.

    Parameters
    ----------
    positions
        Of every watched quantity, the positions in a row that add up to it.
    """

    def __init__(self, positions: list[list[int]]):
        self.positions = [np.array(p, dtype=np.int64) for p in positions]
        self.values = np.tile([np.inf, 0.0, -np.inf, 0.0], (len(positions), 1))
        """Least value, its time (s), largest value, its time (s); (n, 4)."""

    def look(self, row: np.ndarray) -> None:
        """Take a row into account, (n_columns,); its first number is the time, s."""
        for known, places in zip(self.values, self.positions, strict=True):
            value = float(row[places].sum())
            if value < known[0]:
                known[:2] = value, row[0]
            if value > known[2]:
                known[2:] = value, row[0]
