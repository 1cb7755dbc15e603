"""The parent's side of the gmsh child: start, ask with a time limit, kill, start again.

gmsh is never imported in the parent: a missing system library ends the process that loads it
without a word, and its 3D mesher or its optimiser can run for ever on thin skins.
"""

from __future__ import annotations

import os
import queue
import subprocess
import sys
import threading
import time
from pathlib import Path
from typing import Any

from coldseam.errors import CaseError, GeometryError
from coldseam.geometry import wire

DEBIAN = "libgl1 libgl1-mesa-dri libegl1 libglu1-mesa libxcursor1 libxft2 libxinerama1 libgomp1"
"""System packages that gmsh's wheel needs on Debian (tried on Debian 12)."""

START_LIMIT = 120.0
"""Seconds that the child may take to load gmsh (a cold disk, a busy machine)."""

POLL = 0.25
"""Seconds between looks at the clock."""


class Lost(Exception):
    """The child had to be killed or ended by itself; ``why`` says which."""

    def __init__(self, why: str):
        super().__init__(why)
        self.why = why


class Ended(Lost):
    """The child ended by itself."""


class Refused(Exception):
    """gmsh raised an error; the child is alive."""


class Worker:
    """One gmsh child process.

    Raises
    ------
    GeometryError
        gmsh can't be loaded.
    """

    def __init__(self, command: list[str] | None = None):
        self._command = command or [sys.executable, "-m", "coldseam.geometry.worker"]
        self._process: subprocess.Popen | None = None
        self._answers: queue.SimpleQueue = queue.SimpleQueue()
        self._start()

    @property
    def pid(self) -> int | None:
        """Process number of the child, None when there is none."""
        return self._process.pid if self._process is not None else None

    def _start(self) -> None:
        environment = dict(os.environ)
        root = str(Path(__file__).resolve().parents[2])
        environment["PYTHONPATH"] = os.pathsep.join([root, *filter(None, [environment.get("PYTHONPATH")])])
        environment.setdefault("OMP_NUM_THREADS", "1")
        self._answers = queue.SimpleQueue()
        self._process = subprocess.Popen(
            self._command,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            env=environment,
        )
        threading.Thread(target=_read, args=(self._process.stdout, self._answers), daemon=True).start()
        try:
            state, text = self._wait(START_LIMIT)
        except Lost as lost:
            raise GeometryError(_no_gmsh(f"the process that loads it {lost.why}")) from lost
        except BaseException:
            self.close()
            raise
        if state != "ready":
            self.close()
            raise GeometryError(_no_gmsh(text))

    def ask(self, operation: str, limit: float | None = None, **keywords: Any) -> Any:
        """Return the answer to one request.

        Parameters
        ----------
        operation
            Name of the operation in :mod:`coldseam.geometry.worker`.
        limit
            Seconds of processor time after which the child is killed; None waits.
        keywords
            Handed to the operation.

        Raises
        ------
        CaseError, GeometryError
            As the child found them.
        Refused
            gmsh raised an error.
        Lost
            Time is up or the child ended; the next request starts a new, empty one.
        """
        if self._process is None:
            self._start()
        try:
            try:
                wire.send(self._process.stdin, (operation, keywords))
            except OSError as error:
                raise self._lost() from error
            state, value = self._wait(limit)
        except BaseException as error:
            if not isinstance(error, Lost):
                self.close()  # Ctrl-C in the middle: an answer that comes later belongs to nothing
            raise
        if state == "case error":
            raise CaseError(value)
        if state == "geometry error":
            raise GeometryError(value)
        if state == "failed":
            raise Refused(value)
        return value

    def _wait(self, limit: float | None) -> tuple[str, Any]:
        clock = _Clock(self._process.pid, limit)
        while True:
            try:
                answer = self._answers.get(timeout=POLL)
                break
            except queue.Empty:
                if clock.run_out():
                    self.close()
                    raise Lost(f"took more than {limit:.0f} s") from None
        if answer is None:
            raise self._lost()
        return answer

    def _lost(self) -> Ended:
        code = self._process.wait() if self._process is not None else None
        self.close()
        return Ended(f"ended by itself (exit code {code})")

    def close(self) -> None:
        """Kill the child if there is one; safe to call again."""
        process, self._process = self._process, None
        if process is None:
            return
        process.kill()
        process.wait()
        for stream in (process.stdin, process.stdout):
            try:
                stream.close()
            except OSError:  # the rest of a request that nobody reads
                pass

    def __enter__(self) -> Worker:
        return self

    def __exit__(self, *_) -> None:
        self.close()


class _Clock:
    """Measures a child's processor time where the system tells it, so that a busy machine changes nothing."""

    def __init__(self, pid: int, limit: float | None):
        self._pid = pid
        self._limit = limit
        self._begin = time.monotonic()
        self._begin_cpu = _cpu_seconds(pid)

    def run_out(self) -> bool:
        """Whether the limit is passed (ten times over by the clock on the wall in any case)."""
        if self._limit is None:
            return False
        wall = time.monotonic() - self._begin
        cpu = _cpu_seconds(self._pid)
        if cpu is None or self._begin_cpu is None:
            return wall > 3.0 * self._limit
        return cpu - self._begin_cpu > self._limit or wall > 10.0 * self._limit


def _cpu_seconds(pid: int) -> float | None:
    """Return the processor time a process has used, None where the system does not tell."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
        return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")
    except (OSError, ValueError, IndexError):
        return None


def _read(stream, answers: queue.SimpleQueue) -> None:
    """Put every answer into the queue, then None."""
    try:
        while True:
            answers.put(wire.receive(stream))
    except (EOFError, OSError, ValueError):
        answers.put(None)


def _no_gmsh(why: str) -> str:
    return (
        f"The geometry and mesh library gmsh can't be loaded: {why}. It needs system libraries for graphics; on "
        f"Debian: apt-get install {DEBIAN}"
    )
