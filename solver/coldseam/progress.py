"""Progress for people: one live line on a terminal, plain log lines everywhere else.

The library reports what it does through a callable ``log(stage, message)`` and never prints;
:class:`Log` is the one that the command line hands in. It writes to standard error only, so that
standard output holds nothing but the answer.
"""

from __future__ import annotations

import shutil
import threading
import time
from typing import TextIO

TICK = 0.5
"""Seconds between two redraws of the live line."""


def printable(text: str) -> str:
    r"""Return text with control characters spelled out, so that a name in a file can't steer a terminal.

    >>> printable("a\x1b[2Jb\tc")
    'a\\x1b[2Jb c'
    """
    return "".join(_shown(letter) for letter in text.replace("\t", " "))


def _shown(letter: str) -> str:
    # Besides control characters, the marks that turn the writing direction can disguise a line.
    turns = "\u202a" <= letter <= "\u202e" or "\u2066" <= letter <= "\u2069"
    if letter != "\n" and (turns or ord(letter) < 32 or 127 <= ord(letter) < 160):
        return letter.encode("unicode_escape").decode("ascii")
    return letter


def clock(seconds: float) -> str:
    """Return an elapsed time (s) as a person reads it.

    >>> clock(3.21), clock(75), clock(3700)
    ('3.2 s', '1 min 15 s', '1 h 01 min')
    """
    if seconds < 60:
        return f"{seconds:.1f} s"
    minutes, rest = divmod(int(seconds), 60)
    if minutes < 60:
        return f"{minutes} min {rest:02d} s"
    hours, minutes = divmod(minutes, 60)
    return f"{hours} h {minutes:02d} min"


class Log:
    """Callable ``(stage, message)`` that shows where a run is; use it in a ``with`` block.

    Parameters
    ----------
    stream
        Where to write, as a rule standard error.
    live
        True for one live line that is redrawn (a terminal); False for one line a message.
    verbose
        Keep every message as a line of its own, on a terminal too.
    """

    def __init__(self, stream: TextIO, *, live: bool, verbose: bool = False):
        self._stream = stream
        self._live = live
        self._verbose = verbose
        self._began = time.monotonic()
        self._current: tuple[str, str] | None = None
        self._stage_began = self._began
        self._lock = threading.Lock()
        self._stop = threading.Event()
        self._ticker: threading.Thread | None = None

    def __enter__(self) -> Log:
        if self._live:
            self._ticker = threading.Thread(target=self._tick, name="progress", daemon=True)
            self._ticker.start()
        return self

    def __exit__(self, *error: object) -> None:
        self._stop.set()
        if self._ticker is not None:
            self._ticker.join()
        with self._lock:
            self._current = None
            self._wipe()

    def __call__(self, stage: str, message: str = "") -> None:
        """Report that ``stage`` (meshing, assembly, solving, drawing, ...) has come to ``message``."""
        stage, message = (printable(part).replace("\n", " ") for part in (stage, message))
        with self._lock:
            now = time.monotonic()
            if self._current is None or self._current[0] != stage:
                self._stage_began = now
            self._current = (stage, message)
            if self._verbose or not self._live:
                self._wipe()
                self._write(f"[{clock(now - self._began):>8}] {stage}: {message}".rstrip(": ") + "\n")
            self._draw()

    def _tick(self) -> None:
        while not self._stop.wait(TICK):
            with self._lock:
                self._draw()

    def _draw(self) -> None:
        """Redraw the live line, cut to the width of the terminal."""
        if not self._live or self._current is None or self._stop.is_set():
            return
        stage, message = self._current
        line = f"{stage} {clock(time.monotonic() - self._stage_began)}  {message}".rstrip()
        width = shutil.get_terminal_size().columns - 1
        self._write("\r\x1b[K" + (line if len(line) <= width else line[: width - 1] + "…"))

    def _wipe(self) -> None:
        if self._live:
            self._write("\r\x1b[K")

    def _write(self, text: str) -> None:
        # Progress is a courtesy: a reader of standard error who has gone away must not end the run.
        try:
            self._stream.write(text)
            self._stream.flush()
        except (BrokenPipeError, ValueError):
            self._live = False
            self._verbose = False
            self._stop.set()
