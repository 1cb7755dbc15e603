"""The child process that holds gmsh: ``python -m coldseam.geometry.worker``.

It reads requests (see :mod:`coldseam.geometry.wire`) from its standard input and answers on what
was its standard output; descriptor 1 itself is turned to the null device, so that nothing a C
library prints can land in the stream. It ends when the input ends, and a watching thread ends it
when its parent is gone while gmsh is at work. Ctrl-C is the parent's to handle.
"""

from __future__ import annotations

import os
import signal
import sys
import threading
import time
from typing import Any, BinaryIO

from coldseam.errors import CaseError, GeometryError
from coldseam.geometry import wire


def main() -> None:
    """Answer requests until the input ends."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    answers = os.fdopen(os.dup(1), "wb")
    null = os.open(os.devnull, os.O_WRONLY)
    os.dup2(null, 1)
    threading.Thread(target=_end_with_parent, args=(os.getppid(),), daemon=True).start()
    try:
        import gmsh
    except (ImportError, OSError) as error:
        wire.send(answers, ("no gmsh", str(error)))
        return
    gmsh.initialize([], readConfigFiles=False, run=False, interruptible=False)
    gmsh.option.setNumber("General.Terminal", 0)
    gmsh.option.setNumber("General.NumThreads", 1)  # several threads would give another mesh each time
    wire.send(answers, ("ready", gmsh.__version__))
    _serve(gmsh, sys.stdin.buffer, answers)


def _serve(gmsh, requests: BinaryIO, answers: BinaryIO) -> None:
    """Answer each request ``(operation, keywords)`` with ``(state, value)``."""
    from coldseam.geometry import meshing, occ

    operations = {
        "build": occ.build,
        "boundary": meshing.mesh_boundary,
        "interior": meshing.mesh_interior,
        "write": _write,
    }
    model: Any = None
    while True:
        try:
            operation, keywords = wire.receive(requests)
        except EOFError:
            return
        gmsh.logger.start()
        try:
            value = operations[operation](gmsh, model, **keywords)
            if operation == "build":
                model, value = value
            answer = ("done", value)
        except CaseError as error:
            answer = ("case error", error.faults)
        except GeometryError as error:
            answer = ("geometry error", str(error))
        except Exception as error:
            answer = ("failed", _reason(gmsh, error))
        gmsh.logger.stop()
        wire.send(answers, answer)


def _write(gmsh, model, *, path: str) -> None:
    """Write the geometry or mesh to a file; the ending says how."""
    gmsh.write(path)


def _reason(gmsh, error: Exception) -> str:
    """Return gmsh's last errors, or the exception's own text."""
    lines = [line for line in gmsh.logger.get() if line.startswith("Error")]
    return "; ".join(dict.fromkeys(line.partition(":")[2].strip() for line in lines[-3:])) or (
        f"{type(error).__name__}: {error}"
    )


def _end_with_parent(parent: int) -> None:
    """End the process once its parent is gone (gmsh's calls let this thread run)."""
    while os.getppid() == parent:
        time.sleep(0.5)
    os._exit(1)


if __name__ == "__main__":
    main()
