"""Can this machine draw in space? Found out in a child process, because a missing GL kills the one that asks.

VTK draws through EGL or, in software, OSMesa. Where the libraries are missing, opening a window
ends in a segmentation fault rather than an error, so the question is put to a child: first with
EGL, then with OSMesa. The verdict is kept for the life of the process.
"""

from __future__ import annotations

import os
import subprocess
import sys
from dataclasses import dataclass
from functools import lru_cache

WINDOW_VARIABLE = "VTK_DEFAULT_OPENGL_WINDOW"
WAYS = (("EGL", "vtkEGLRenderWindow"), ("OSMesa", "vtkOSOpenGLRenderWindow"))
TIME_OUT = 60.0
PACKAGES = "libegl1 libgl1 libgl1-mesa-dri (or libosmesa6)"

_QUESTION = """
import pyvista
plotter = pyvista.Plotter(off_screen=True, window_size=(64, 64))
plotter.set_background("white")
plotter.add_mesh(pyvista.Cube(), color="black", lighting=False)
image = plotter.screenshot(None, return_img=True)
print("drawn" if image.min() < 50 and image.max() > 200 else "blank")
"""


@dataclass(frozen=True, kw_only=True)
class Verdict:
    """Whether 3D pictures can be drawn, with what, and if not why in plain words."""

    way: str | None
    window: str | None
    why_not: str = ""

    @property
    def able(self) -> bool:
        """True when 3D pictures can be drawn."""
        return self.way is not None


@lru_cache(maxsize=1)
def rendering() -> Verdict:
    """Return the verdict of this machine, asked once."""
    return ask()


def ask(question: str = _QUESTION, time_out: float = TIME_OUT) -> Verdict:
    """Ask children whether they can draw, one way after the other.

    Parameters
    ----------
    question
        Python source that prints "drawn" when it could.
    time_out
        Seconds for each way.
    """
    reasons = []
    for way, window in WAYS:
        reason = _try(question, window, time_out)
        if reason is None:
            return Verdict(way=way, window=window)
        reasons.append(f"{way}: {reason}")
    return Verdict(way=None, window=None, why_not="; ".join(reasons))


def child_environment(window: str | None) -> dict[str, str]:
    """Return the environment of a drawing child: this process's import path, and VTK's kind of window."""
    environment = dict(os.environ)
    environment["PYTHONPATH"] = os.pathsep.join(path for path in sys.path if path)
    environment["MPLBACKEND"] = "Agg"
    if window is not None:
        environment[WINDOW_VARIABLE] = window
    return environment


def _try(question: str, window: str, time_out: float) -> str | None:
    """Return None if the child drew, else why not."""
    try:
        done = subprocess.run(
            [sys.executable, "-c", question], env=child_environment(window), timeout=time_out, capture_output=True,
            text=True, stdin=subprocess.DEVNULL, check=False,
        )  # fmt: skip
    except subprocess.TimeoutExpired:
        return f"no picture within {time_out:g} s"
    except OSError as fault:
        return f"no child process ({fault.strerror})"
    if done.returncode == 0 and done.stdout.strip().endswith("drawn"):
        return None
    if done.returncode < 0:
        return f"the graphics library crashed (signal {-done.returncode})"
    if done.returncode == 0:
        return "the picture stayed blank"
    last = [line for line in done.stderr.strip().splitlines() if line.strip()]
    return last[-1].strip()[:160] if last else f"ended with code {done.returncode}"
