"""A million tetrahedra from case file to answers, against gmsh's time to mesh them; and the memory."""

from __future__ import annotations

import multiprocessing
import resource

from benchmarks.common import Table, peak, verdict

from coldseam.solution.memory import BYTES_PER_CELL

CASE = """
title = "A panel with a bolt, about a million tetrahedra"
[model]
dimensions = 3
accuracy = "45 %"
size = {size}
max_nodes = 1000
[materials.foam]
conductivity = 0.025
[materials.steel]
conductivity = 17
[spaces.cold]
temperature = -20
film = 8
[spaces.warm]
temperature = 25
film = 8
[[body]]
name = "panel"
material = "foam"
box = {{ from = [0, 0, 0], to = [300, 300, 100] }}
[[body]]
name = "bolt"
material = "steel"
box = {{ from = [140, 140, 0], to = [160, 160, 100] }}
[[boundary]]
name = "inside"
on = {{ plane = {{ z = 0 }} }}
space = "cold"
[[boundary]]
name = "outside"
on = {{ plane = {{ z = 100 }} }}
space = "warm"
[[boundary]]
name = "cut planes"
on = "rest"
adiabatic = true
"""
SIZES = (5.2, 3.2)  # mm: some 0.2 and 1 million tetrahedra


def run_once(size: float, pipe) -> None:
    """Run the case in a process of its own, so that the peaks are its and its gmsh child's alone."""
    import tempfile
    from pathlib import Path

    from coldseam.case.read import load
    from coldseam.geometry import client
    from coldseam.study import run

    meshing = [0.0]
    ask = client.Worker.ask

    def timed(worker, operation, *arguments, **keywords):
        before = client._cpu_seconds(worker.pid) if worker.pid else 0.0
        answer = ask(worker, operation, *arguments, **keywords)
        if operation in ("boundary", "interior"):
            meshing[0] += client._cpu_seconds(worker.pid) - before
        return answer

    client.Worker.ask = timed
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "case.toml"
        path.write_text(CASE.format(size=size), encoding="utf-8")
        start = processor_seconds()
        result = run(load(path))
        whole = processor_seconds() - start
        start = processor_seconds()
        result.write(Path(folder) / "out", pictures=False)
        files = processor_seconds() - start
    counts = result.mesh.n_nodes, result.mesh.n_cells, len(result.solution.rounds)
    pipe.send((*counts, meshing[0], whole, files, *peak()))


def processor_seconds() -> float:
    """Return the processor seconds of this process and of its children that have ended."""
    times = [resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
    return sum(t.ru_utime + t.ru_stime for t in times)


def measure() -> list[Table]:
    """Return the table."""
    rows, per_cell = [], []
    for size in SIZES:
        ours, theirs = multiprocessing.get_context("spawn").Pipe(duplex=False)
        process = multiprocessing.get_context("spawn").Process(target=run_once, args=(size, theirs))
        process.start()
        nodes, cells, rounds, meshing, whole, files, own, child = ours.recv()
        process.join()
        ratio = whole / meshing
        per_cell.append((cells, (own + child) * 2**30))
        rows.append(
            (
                f"{cells:,}",
                f"{nodes:,}",
                str(rounds),
                f"{meshing:.1f}",
                f"{whole:.1f}",
                f"{files:.1f}",
                f"{ratio:.1f}",
                verdict(ratio, 6.0, at_least=False),
                f"{own:.2f}",
                f"{child:.2f}",
                verdict(max(own, child), 3.0, at_least=False),
            )
        )
    (few, low), (many, high) = per_cell
    slope = (high - low) / (many - few)
    ten = (high + slope * (1e7 - many)) / 2**30
    head = (
        "tetrahedra",
        "nodes",
        "rounds",
        "meshing, s",
        "to answers, s",
        "files, s",
        "ratio",
        "goal",
        "peak, GiB",
        "peak of gmsh, GiB",
        "goal",
    )
    return [
        Table(
            name="million",
            title="From case file to answers, pictures aside, against gmsh's meshing",
            head=head,
            rows=rows,
            remarks=(
                "Processor seconds, the gmsh child's included; meshing is what that child used for faces and volumes. "
                f"Both peaks together grow by {slope:,.0f} bytes a tetrahedron "
                f"(`BYTES_PER_CELL[3]` is {BYTES_PER_CELL[3]:,}): 10 million "
                f"would need {ten:.1f} GiB; goal {verdict(ten, 16.0, at_least=False)}.",
            ),
        )
    ]
