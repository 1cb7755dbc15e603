"""Writing answers so that a reader never meets half a file.

Every file is written under a temporary name in the folder it belongs to, flushed to the disk, and
renamed (``os.replace`` is atomic within a file system). A set of files is renamed only when all
of them could be written. On any fault the temporary files are removed and what was there before
stays as it was.
"""

from __future__ import annotations

import csv
import errno
import io
import json
import math
import os
import tempfile
from collections.abc import Iterable, Mapping
from contextlib import suppress
from pathlib import Path

import numpy as np

from coldseam.errors import OutputError

_CONTRACT_ORDER = (
    "title dimensions coldseam case_sha256 units mesh balance boundaries spaces coupling probes bodies "
    "bridges surfaces limits history warnings"
).split()


def prepare_folder(path: str | Path) -> Path:
    """Return an output folder that exists and can be written to, making it if needed.

    Raises
    ------
    OutputError
        The path is a file, or the folder can't be made or written to.
    """
    folder = Path(path)
    if folder.exists() and not folder.is_dir():
        raise OutputError(f"{folder} is a file, not a folder: choose another output folder")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(prefix=".", suffix=".part", dir=folder)
        os.close(handle)
        os.unlink(name)
    except OSError as fault:
        raise _plain(fault, folder) from fault
    return folder


def write_files(folder: str | Path, contents: Mapping[str, bytes | Iterable[bytes]]) -> list[Path]:
    """Write several files into a folder, all or none.

    Parameters
    ----------
    folder
        An existing folder.
    contents
        File name -> content, whole or in blocks that are written as they come.

    Raises
    ------
    OutputError
        Any of them could not be written; none was replaced unless renaming itself failed midway.
    """
    folder = Path(folder)
    waiting: list[tuple[str, Path]] = []
    target = folder
    try:
        for name, content in contents.items():
            target = folder / name
            handle, part = tempfile.mkstemp(prefix=".", suffix=".part", dir=folder)
            waiting.append((part, target))
            _fill(handle, content)
        for part, target in waiting:
            os.replace(part, target)
    except OSError as fault:
        raise _plain(fault, target) from fault
    finally:  # also on Ctrl-C
        for part, _ in waiting:
            with suppress(OSError):
                os.unlink(part)
    return [target for _, target in waiting]


def write_text(path: str | Path, text: str) -> Path:
    """Write one text file (UTF-8) atomically."""
    path = Path(path)
    return write_files(path.parent, {path.name: text.encode()})[0]


def _fill(handle: int, content: bytes | Iterable[bytes]) -> None:
    try:
        for block in (content,) if isinstance(content, bytes) else content:
            left = memoryview(block)
            while len(left):
                left = left[os.write(handle, left) :]
        os.fsync(handle)
        mask = os.umask(0)
        os.umask(mask)
        os.fchmod(handle, 0o666 & ~mask)  # mkstemp makes files that only their owner can read
    finally:
        os.close(handle)


def _plain(fault: OSError, path: Path) -> OutputError:
    reasons = {
        errno.ENOSPC: "the disk is full",
        errno.EDQUOT: "the disk quota is used up",
        errno.EACCES: "no permission to write there",
        errno.EPERM: "no permission to write there",
        errno.EROFS: "the file system is read-only",
        errno.ENAMETOOLONG: "the name is too long",
        errno.ENOTDIR: "part of the path is a file, not a folder",
        errno.EISDIR: "a folder of that name is in the way",
        errno.EIO: "the disk reports an input/output error",
    }
    reason = reasons.get(fault.errno or 0, fault.strerror or str(fault))
    return OutputError(f"{path} could not be written: {reason}")


# ---------------------------------------------------------------------------------------- JSON


def answers_text(answers: dict) -> str:
    """Return answers as JSON text in the contract's order, ending with a newline.

    JSON has no NaN or infinity: such numbers become null, and ``warnings`` says which and why.
    Names keep the order of the case file.
    """
    refused: list[str] = []
    plain = _plain_value(answers, "", refused)
    ordered = {key: plain[key] for key in _CONTRACT_ORDER if key in plain}
    ordered.update({key: plain[key] for key in sorted(plain) if key not in ordered})
    if refused:
        ordered["warnings"] = list(ordered.get("warnings") or []) + refused
    return json.dumps(ordered, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _plain_value(value, where: str, refused: list[str]):
    if isinstance(value, dict):
        return {str(key): _plain_value(item, f"{where}.{key}".lstrip("."), refused) for key, item in value.items()}
    if isinstance(value, np.ndarray):
        value = value.tolist()
    if isinstance(value, (list, tuple)):
        return [_plain_value(item, f"{where}[{k + 1}]", refused) for k, item in enumerate(value)]
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        kind = "not a number" if math.isnan(value) else "infinite"
        refused.append(f"{where} is {kind} and is written as null")
        return None
    if value is None or isinstance(value, (str, int, float)):
        return value
    if isinstance(value, Path):
        return str(value)
    raise TypeError(f"{where}: {type(value).__name__} has no place in answers.json")


# ----------------------------------------------------------------------------------------- CSV


def csv_text(columns: list[str], rows: list[list]) -> str:
    """Return a table as CSV (comma, point, UTF-8, line feed); None, NaN and infinities are empty."""
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows([[_cell(value) for value in row] for row in rows])
    return stream.getvalue()


def _cell(value):
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or (isinstance(value, float) and not math.isfinite(value)):
        return ""
    return f"{value:.9g}" if isinstance(value, float) else value
