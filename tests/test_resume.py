"""A run killed at any moment goes on with ``--resume`` and ends with the same history."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from solution.grids import grid, slab_text, stepping

from coldseam.errors import CaseError
from coldseam.solution import checkpoint

ROOT = Path(__file__).parents[1]


def machine_text() -> str:
    text = slab_text(
        k=0.03, rho=40, c=1400, film=8, start=20, length=100, width=100, duration=7200, record=60, tolerance=0.01
    )
    text = text.replace(
        '[[boundary]]\nname = "rest"',
        '[[boundary]]\nname = "in"\non = { plane = { x = 0 } }\nspace = "room"\n[[boundary]]\nname = "rest"',
    )
    room = "[spaces.room]\nfilm = 8\n[spaces.room.floating]\nheat_capacity = 500\ncooling = { setpoint = 0, band = 2, capacity = 8 }\n"
    event = '[[event]]\nname = "cold"\nwhen = { space = "room", falls_below = 1 }\n'
    return text.replace("[materials.stuff]", room + "[materials.stuff]") + event


def test_every_moment_can_be_resumed(tmp_path):
    """After each tenth step the run is thrown away and read back: the history must not change by a bit."""
    mesh = grid(np.linspace(0, 0.1, 13), np.array([0.0, 0.05, 0.1]))
    whole = stepping(mesh, machine_text())
    while whole.status == "running":
        whole.step()
    broken, count = stepping(mesh, machine_text()), 0
    while broken.status == "running":
        broken.step()
        count += 1
        if count % 10 == 0 and broken.status == "running":
            checkpoint.save(tmp_path, broken, {"fields": []})
            broken = stepping(mesh, machine_text())
            checkpoint.restore(tmp_path, broken)
    one, other = whole.result(), broken.result()
    assert other.rows.shape == one.rows.shape
    assert np.abs(other.rows - one.rows).max() < 1e-9
    assert other.events[0].time == pytest.approx(one.events[0].time, abs=1e-9)
    assert other.totals.heat == pytest.approx(one.totals.heat, rel=1e-9, abs=1e-9)
    assert one.work.switched >= 5 and other.work == one.work


def test_a_run_killed_while_its_answers_are_written_only_writes_them(tmp_path):
    mesh = grid(np.linspace(0, 0.1, 5), np.array([0.0, 0.1]))
    run = stepping(mesh, machine_text())
    while run.status == "running":
        run.step()
    checkpoint.save(tmp_path, run, {})
    again = stepping(mesh, machine_text())
    checkpoint.restore(tmp_path, again)
    assert again.status == "finished"
    assert np.array_equal(again.result().rows, run.result().rows)


def test_a_changed_case_is_refused(tmp_path):
    mesh = grid(np.linspace(0, 0.1, 5), np.array([0.0, 0.1]))
    run = stepping(mesh, machine_text())
    run.step()
    checkpoint.save(tmp_path, run, {})
    changed = stepping(mesh, machine_text().replace("capacity = 8 }", "capacity = 9 }"))
    with pytest.raises(CaseError, match="the case file has changed"):
        checkpoint.restore(tmp_path, changed)


def test_the_mesh_comes_back(tmp_path):
    mesh = grid(np.linspace(0, 0.1, 5), np.array([0.0, 0.1]))
    checkpoint.save_mesh(tmp_path, mesh, {"remarks": ["as said"]})
    again, facts = checkpoint.load_mesh(tmp_path)
    assert facts == {"remarks": ["as said"]}
    assert np.array_equal(again.points, mesh.points) and again.bodies == mesh.bodies


@pytest.mark.slow
def test_sigkill_at_random_moments(tmp_path):
    case = ROOT / "cases" / "hold-after-power-cut.toml"
    text = case.read_text(encoding="utf-8").replace(
        'record_every = "10 min"', 'record_every = "10 min"\ntolerance = 0.0005'
    )
    (tmp_path / "case.toml").write_text(text, encoding="utf-8")
    whole = command(tmp_path, "whole")
    assert whole.wait() == 0
    seed = random.randrange(10**6)
    print("seed", seed)
    chance, kills = random.Random(seed), 0
    while True:
        run = command(tmp_path, "killed", "--resume")
        stop = time.monotonic() + chance.uniform(5.0, 12.0)
        while run.poll() is None and time.monotonic() < stop:
            time.sleep(0.05)
        if run.poll() is not None:
            assert run.returncode == 0
            break
        os.kill(run.pid, signal.SIGKILL)
        run.wait()
        kills += 1
        assert kills < 40
    one, other = (
        np.genfromtxt(tmp_path / name / "history.csv", delimiter=",", skip_header=1) for name in ("whole", "killed")
    )
    assert kills >= 1
    assert (
        np.abs(one[:, :8] - other[:, :8]).max() < 1e-6
    )  # the mesh may be made anew when killed before the first checkpoint


def command(folder: Path, out: str, *more: str) -> subprocess.Popen:
    return subprocess.Popen(
        [
            sys.executable,
            "-m",
            "coldseam",
            "run",
            str(folder / "case.toml"),
            "--out",
            str(folder / out),
            "--no-pictures",
            *more,
        ],
        env=os.environ | {"PYTHONPATH": str(ROOT / "solver")},
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
