"""The cases that travel with the program, and the geometry files they need.

``cases`` and ``meshes`` beside this file are links to the folders of the same names at the top of the
repository; a wheel holds their content. A case names its files relative to itself (``../meshes/part.step``),
so copies keep the two folders side by side.
"""

from __future__ import annotations

import filecmp
import shutil
from pathlib import Path

from coldseam.errors import OutputError

HERE = Path(__file__).parent
FOLDERS = ("cases", "meshes")


def shipped_files() -> tuple[Path, ...]:
    """Return every shipped file, relative to the folder of this module, sorted.

    >>> any(path.suffix == ".toml" for path in shipped_files())
    True
    """
    found = (path for name in FOLDERS for path in (HERE / name).rglob("*") if path.is_file())
    return tuple(sorted(path.relative_to(HERE) for path in found if "__pycache__" not in path.parts))


def copy_cases(folder: Path) -> tuple[Path, ...]:
    """Copy the shipped cases with their files into a folder, and return the paths of the copies.

    Raises
    ------
    OutputError
        When a file is there already with other content; then nothing at all is copied.
    """
    files = shipped_files()
    if not files:
        raise OutputError("this installation holds no cases: the folders 'cases' and 'meshes' are missing from it")
    taken = [folder / path for path in files if _differs(HERE / path, folder / path)]
    if taken:
        names = "\n".join(f"  {path}" for path in taken[:10])
        more = f"\n  and {len(taken) - 10} more" if len(taken) > 10 else ""
        raise OutputError(f"nothing was copied, because these files exist with other content:\n{names}{more}")
    try:
        for path in files:
            (folder / path).parent.mkdir(parents=True, exist_ok=True)
            shutil.copyfile(HERE / path, folder / path)
    except OSError as error:
        raise OutputError(f"{error.filename or folder}: {error.strerror}") from error
    return tuple(folder / path for path in files)


def _differs(ours: Path, theirs: Path) -> bool:
    """Return whether something else than a copy of our file is at the target."""
    if not theirs.exists() and not theirs.is_symlink():
        return False
    return not theirs.is_file() or not filecmp.cmp(ours, theirs, shallow=False)
