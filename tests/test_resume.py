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
from coldseam.physics.melting import heat_content
from coldseam.solution import checkpoint, stage
from coldseam.solution.refresh import refresher
from coldseam.solution.transient import Transient

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


def melting_text() -> str:
    """Return a case whose body freezes, with a film and a conductivity that follow the temperature."""
    text = slab_text(
        k="{ table = [[-30, 2.2], [0, 1.9], [30, 0.6]] }", rho=1000, c=2000, start=0.5, air=-20, length=10, width=10, duration=3600, record=300, tolerance=0.1,
    )  # fmt: skip
    text = text.replace("film = 1\n", 'convection = { kind = "free", surface = "vertical", length = 200 }\n')
    return text.replace(
        "specific_heat = 2000", "specific_heat = 2000\nmelting = { between = [-2, 0], latent_heat = 6e4 }"
    )


def run_of(mesh, text):
    """Return a run of a case text as ``timed.py`` makes it, with melting and laws."""
    plain = stepping(mesh, text)
    system = plain.system
    return Transient(system, plain.initial, phase=heat_content(system.case, system.mesh), refresh=refresher(system))


@pytest.mark.parametrize("kind", ["machine", "melting and laws", "multigrid"])
def test_every_moment_can_be_resumed(tmp_path, monkeypatch, kind):
    """After each tenth step the run is thrown away and read back: the history does not change by a bit."""
    mesh = grid(np.linspace(0, 0.1, 13), np.array([0.0, 0.05, 0.1]))
    text = melting_text() if kind == "melting and laws" else machine_text()
    if kind == "melting and laws":
        mesh = grid(np.linspace(0, 0.01, 5), np.array([0.0, 0.01]))
    if kind == "multigrid":
        monkeypatch.setattr(stage, "DIRECT_LIMIT", {2: 5, 3: 5})
    whole = run_of(mesh, text)
    while whole.status == "running":
        whole.step()
    broken, count = run_of(mesh, text), 0
    while broken.status == "running":
        broken.step()
        count += 1
        if count % 10 == 0 and broken.status == "running":
            checkpoint.save(tmp_path, broken, {"fields": []})
            broken = run_of(mesh, text)
            checkpoint.restore(tmp_path, broken)
    one, other = whole.result(), broken.result()
    assert np.array_equal(other.rows, one.rows, equal_nan=True)
    assert np.array_equal(other.totals.heat, one.totals.heat) and np.array_equal(other.totals.peak, one.totals.peak)
    assert other.work == one.work and other.events == one.events
    assert one.work.steps > 40
    if kind == "melting and laws":
        assert 0.05 < one.column("melted", "slab")[-1] < 0.95 and whole.refresh.count > 5
    else:
        assert one.work.switched >= 5 and one.events[0].time is not None
        assert ("multigrid" in one.solver["method"]) == (kind == "multigrid")


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
    begun = time.monotonic()
    assert command(tmp_path, "whole").wait() == 0
    taken = time.monotonic() - begun
    seed = random.randrange(10**6)
    print("seed", seed)
    chance, kills = random.Random(seed), 0
    while True:
        run = command(tmp_path, "killed", "--resume")
        stop = time.monotonic() + taken * chance.uniform(0.2, 0.6)
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
    print("kills", kills, "difference", np.abs(one - other).max())
    assert kills >= 1
    assert one.shape == other.shape
    # Relative to each column's largest value; the file has nine digits.
    assert (np.abs(one - other) / np.maximum(np.abs(one).max(axis=0), 1e-300)).max() <= 1e-9


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
