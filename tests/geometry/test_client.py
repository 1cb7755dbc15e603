"""The gmsh child: crashes, time-outs, what is left behind."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from geometry_cases import body, make_case

from coldseam.errors import GeometryError
from coldseam.geometry import client
from coldseam.geometry.mesher import open_geometry

BOX = body("it", "a", "box = { from = [0, 0, 0], to = [10, 10, 10] }")


def alive(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    return True


def test_killed_child_is_replaced():
    with open_geometry(make_case(BOX)) as mesher:
        first = mesher.mesh()
        os.kill(mesher._worker.pid, signal.SIGKILL)
        second = mesher.mesh()
    assert second.quality["failed"] and "ended by itself" in second.quality["failed"][0]
    assert (first.points == second.points).all() and (first.cells == second.cells).all()


def test_closed_child_is_gone():
    with open_geometry(make_case(BOX)) as mesher:
        pid = mesher._worker.pid
        assert alive(pid)
    assert not alive(pid)


def test_time_out_falls_back(monkeypatch):
    """HXT gets no time at all: Delaunay has to do it."""
    from coldseam.geometry import mesher as module

    normal = module._solid_limit
    monkeypatch.setattr(module, "_solid_limit", lambda n, a: 0.0 if a == 10 else normal(n, a))
    monkeypatch.setattr(client, "POLL", 0.001)
    many = body("it", "a", "sphere = { center = [0, 0, 0], diameter = 20 }")
    with open_geometry(make_case(many, model="size = 1.5")) as mesher:
        mesh = mesher.mesh()
    assert mesh.quality["algorithm"] == "Delaunay"
    assert "took more than" in mesh.quality["failed"][0]


def test_child_that_dies_at_once_names_the_packages():
    with pytest.raises(GeometryError, match="libglu1-mesa"):
        client.Worker([sys.executable, "-c", "import os; os.kill(os.getpid(), 11)"])


def test_orphan_ends():
    """The parent is killed while gmsh is at work (a million triangles, some 20 s): the child notices."""
    code = (
        "from coldseam.geometry.client import Worker\n"
        "from coldseam.geometry.parts import Part, Solid\n"
        "ball = Solid(kind='sphere', start=(0.0, 0.0, 0.0), radii=(10.0,))\n"
        "w = Worker()\n"
        "w.ask('build', parts=[Part(name='it', material='a', source=0, solids=(ball,))], dim=3)\n"
        "print(w.pid, flush=True)\n"
        "w.ask('boundary', algorithm=6, segments=24, cap=0.05, view=None, scale=1.0)\n"
    )
    root = str(Path(client.__file__).resolve().parents[2])
    parent = subprocess.Popen(
        [sys.executable, "-c", code], stdout=subprocess.PIPE, text=True, env={**os.environ, "PYTHONPATH": root}
    )
    pid = int(parent.stdout.readline())
    time.sleep(0.5)
    assert alive(pid)
    parent.kill()
    parent.wait()
    parent.stdout.close()
    end = time.monotonic() + 6
    while alive(pid) and time.monotonic() < end:
        if Path(f"/proc/{pid}/stat").exists() and ") Z " in Path(f"/proc/{pid}/stat").read_text():
            break  # ended; its new parent has not collected it
        time.sleep(0.2)
    else:
        assert not alive(pid)


def test_interrupt_leaves_no_child():
    code = (
        "import sys\n"
        "from coldseam.geometry.client import Worker\n"
        "with Worker() as w:\n"
        "    print(w.pid, flush=True)\n"
        "    w._answers.get()\n"
    )
    root = str(Path(client.__file__).resolve().parents[2])
    parent = subprocess.Popen(
        [sys.executable, "-c", code],
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL,
        text=True,
        env={**os.environ, "PYTHONPATH": root},
    )
    pid = int(parent.stdout.readline())
    parent.send_signal(signal.SIGINT)
    parent.wait(20)
    parent.stdout.close()
    assert not alive(pid)
