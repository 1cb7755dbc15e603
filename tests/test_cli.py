"""The command line: quick to answer, plain in its errors, exact in its exit codes."""

from __future__ import annotations

import io
import json
import os
import resource
import signal
import subprocess
import sys
import time
import tomllib
import zipfile
from pathlib import Path

import pytest

from coldseam import __version__, cli, errors, progress, shipped

TOP = Path(__file__).parents[1]
HEAVY = {"numpy", "scipy", "gmsh", "vtk", "vtkmodules", "pyvista", "pydantic", "matplotlib", "meshio", "pyamg"}


def command(*arguments: str, source: Path = TOP / "solver", **options) -> subprocess.CompletedProcess:
    """Run the command line in a process of its own."""
    environment = {**os.environ, "PYTHONPATH": str(source)}
    return subprocess.run(
        [sys.executable, "-m", "coldseam", *arguments],
        env=environment,
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
        **options,
    )


def test_help_imports_nothing_heavy():
    script = (
        "import sys\nfrom coldseam.cli import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit:\n    pass\n"
        "print(*sorted({name.split('.')[0] for name in sys.modules}), file=sys.stderr)"
    )
    done = subprocess.run(
        [sys.executable, "-c", script],
        env={**os.environ, "PYTHONPATH": str(TOP / "solver")},
        capture_output=True,
        text=True,
        check=True,
        timeout=60,
    )
    loaded = set(done.stderr.split())
    assert "argparse" in loaded  # the list is a real one
    assert loaded & HEAVY == set()
    assert "exit codes" in done.stdout


def test_help_answers_within_0_3_s():
    # Processor time of the best of five runs: what the program needs, whatever else the machine is doing.
    taken = []
    for _ in range(5):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        command("--help")
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        taken.append(after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime)
    assert 0 < min(taken) < 0.3


def test_the_help_and_the_readme_name_the_same_exit_codes():
    documented = [line.split()[0] for line in cli.EXIT_CODES.splitlines()[1:]]
    assert documented == ["0", "1", "2", "3", "4", "5", "6", "130"]
    readme = (TOP / "README.md").read_text(encoding="utf-8")
    section = readme.split("## Exit codes")[1].split("\n## ")[0]
    rows = [line.split("|")[1].strip() for line in section.splitlines() if line.startswith("|")]
    assert rows[2:] == documented


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (errors.ColdseamError("something foreseen"), 1),
        (errors.CaseError([errors.Fault(path=("model", "accuracy"), what="must be above 0")]), 2),
        (errors.GeometryError("the part has an open surface"), 3),
        (errors.SolveError("the balance does not close"), 4),
        (errors.OutputError("the disk is full"), 5),
    ],
)
def test_each_error_has_its_code_and_one_clear_text(monkeypatch, capsys, error, code):
    def fail(options):
        raise error

    monkeypatch.setattr(cli, "_schema", fail)
    assert cli.main(["schema"]) == code
    shown = capsys.readouterr()
    assert shown.out == ""
    assert shown.err == f"coldseam: {error}\n"


def test_ctrl_c_ends_with_130_and_one_word(monkeypatch, capsys):
    def interrupt(options):
        raise KeyboardInterrupt

    monkeypatch.setattr(cli, "_schema", interrupt)
    assert cli.main(["schema"]) == 130
    assert capsys.readouterr().err == "coldseam: interrupted\n"


def test_an_unforeseen_error_is_called_ours_and_debug_shows_where(monkeypatch, capsys):
    def fail(options):
        raise ZeroDivisionError("division by zero")

    monkeypatch.setattr(cli, "_schema", fail)
    assert cli.main(["schema"]) == 1
    shown = capsys.readouterr().err
    assert "internal error: ZeroDivisionError: division by zero" in shown
    assert "fault of coldseam" in shown
    assert "Traceback" not in shown
    assert cli.main(["--debug", "schema"]) == 1
    assert "Traceback" in capsys.readouterr().err


def test_a_name_in_an_error_cannot_steer_the_terminal(monkeypatch, capsys):
    def fail(options):
        raise errors.GeometryError("body '\x1b[2J\u202egnp' is empty")

    monkeypatch.setattr(cli, "_schema", fail)
    cli.main(["schema"])
    assert capsys.readouterr().err == "coldseam: body '\\x1b[2J\\u202egnp' is empty\n"


def test_no_command_and_an_unknown_option_are_faults_of_the_command_line():
    assert command().returncode == 2
    refused = command("run", "case.toml", "--out", "out", "--mesh-size", "1")
    assert refused.returncode == 2
    assert "unrecognized arguments: --mesh-size" in refused.stderr


def test_version():
    assert command("--version").stdout == f"coldseam {__version__}\n"


def test_a_case_file_that_is_not_there_is_named(tmp_path):
    done = command("check", str(tmp_path / "none.toml"))
    assert done.returncode == 2
    assert "none.toml" in done.stderr
    assert "Traceback" not in done.stderr


def test_a_fault_of_the_case_is_placed_by_file_and_line(tmp_path):
    case = tmp_path / "bad.toml"
    case.write_text('title = "bad"\n\n[model]\ndimensions = 3\nacuracy = "1 %"\n', encoding="utf-8")
    done = command("check", str(case))
    assert done.returncode == 2
    assert "bad.toml:5: model.acuracy: " in done.stderr
    assert "accuracy" in done.stderr.replace("acuracy", "")
    assert done.stdout == ""


def test_schema_is_a_json_schema():
    from jsonschema import Draft202012Validator

    schema = json.loads(command("schema").stdout)
    Draft202012Validator.check_schema(schema)
    assert {"title", "model", "spaces", "materials", "body", "boundary"} <= set(schema["properties"])


def test_materials_are_found_and_shown_with_units_and_source():
    listed = command("materials", "PIR", "aged").stdout
    assert "PIR foam, aged" in listed
    shown = command("materials", "--show", "PIR foam, aged").stdout
    assert "conductivity:  0.027 W/(m·K)" in shown  # ASHRAE Refrigeration 2014 ch. 24: PIR .027
    assert "source:" in shown


def test_an_unknown_material_is_told_with_near_names():
    done = command("materials", "--show", "PIR foam, agd")
    assert done.returncode == 2
    assert "'PIR foam, aged'" in done.stderr
    assert command("materials", "no such stuff").returncode == 1


def test_a_reader_that_leaves_early_is_no_error():
    with subprocess.Popen(
        [sys.executable, "-m", "coldseam", "materials"],
        env={**os.environ, "PYTHONPATH": str(TOP / "solver")},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    ) as process:
        process.stdout.close()
        complaints = process.stderr.read()
        assert process.wait(timeout=60) == 0
    assert complaints == b""


# -------------------------------------------------------------------------- examples


@pytest.fixture
def small_shipment(tmp_path, monkeypatch):
    """A shipment of one case with one part, in place of the real one."""
    home = tmp_path / "shipped"
    (home / "cases").mkdir(parents=True)
    (home / "meshes").mkdir()
    (home / "cases" / "one.toml").write_text("one", encoding="utf-8")
    (home / "meshes" / "part.step").write_text("part", encoding="utf-8")
    monkeypatch.setattr(shipped, "HERE", home)
    return home


def test_examples_never_overwrite_what_differs(small_shipment, tmp_path, capsys):
    out = tmp_path / "mine"
    assert cli.main(["examples", str(out)]) == 0
    assert cli.main(["examples", str(out)]) == 0  # equal files are left as they are
    (out / "cases" / "one.toml").write_text("my own work", encoding="utf-8")
    (out / "meshes" / "part.step").unlink()
    capsys.readouterr()
    assert cli.main(["examples", str(out)]) == 5
    assert "one.toml" in capsys.readouterr().err
    assert (out / "cases" / "one.toml").read_text(encoding="utf-8") == "my own work"
    assert not (out / "meshes" / "part.step").exists()  # nothing at all was copied


def test_examples_into_a_file_is_a_fault_of_the_output(small_shipment, tmp_path, capsys):
    (tmp_path / "file").write_text("", encoding="utf-8")
    assert cli.main(["examples", str(tmp_path / "file")]) == 5
    assert "file" in capsys.readouterr().err


def missing_parts(folder: Path) -> list[str]:
    """Return the files that the case files of a folder name and that are not there."""
    missing = []
    for case in sorted((folder / "cases").glob("*.toml")):
        document = tomllib.loads(case.read_text(encoding="utf-8"))
        named = [document.get("model", {}).get("mesh"), *(body.get("file") for body in document.get("body", []))]
        missing += [f"{case.name}: {name}" for name in named if name and not (case.parent / name).is_file()]
    return missing


def test_copied_examples_bring_every_file_that_they_name(tmp_path):
    done = command("examples", str(tmp_path / "mine"))
    assert done.returncode == 0, done.stderr
    copied = sorted((tmp_path / "mine" / "cases").glob("*.toml"))
    assert [path.name for path in copied] == sorted(path.name for path in (TOP / "cases").glob("*.toml"))
    assert missing_parts(tmp_path / "mine") == []


def test_a_missing_part_would_be_seen(tmp_path):
    (tmp_path / "cases").mkdir()
    (tmp_path / "cases" / "a.toml").write_text('[[body]]\nfile = "../meshes/gone.step"\n', encoding="utf-8")
    assert missing_parts(tmp_path) == ["a.toml: ../meshes/gone.step"]


def test_cases_and_library_travel_in_the_wheel(tmp_path):
    build = [sys.executable, "-m", "pip", "wheel", "-q", "--no-deps", "--no-build-isolation", "-w", str(tmp_path), "."]
    source = tmp_path / "source"  # setuptools writes beside the source it builds
    copy = "cp -a pyproject.toml README.md solver cases meshes"
    source.mkdir()
    subprocess.run([*copy.split(), str(source)], cwd=TOP, check=True)
    subprocess.run(build, cwd=source, check=True, capture_output=True, timeout=300)
    (wheel,) = tmp_path.glob("*.whl")
    with zipfile.ZipFile(wheel) as archive:
        inside = set(archive.namelist())
        archive.extractall(tmp_path / "installed")
    assert "coldseam/shipped/__init__.py" in inside
    assert {f"coldseam/shipped/{path.as_posix()}" for path in shipped.shipped_files()} <= inside
    library = (TOP / "solver" / "coldseam" / "case" / "library").glob("*.toml")
    assert {f"coldseam/case/library/{path.name}" for path in library} <= inside
    code = {path.relative_to(source / "solver").as_posix() for path in (source / "solver" / "coldseam").rglob("*.py")}
    assert code <= inside
    done = command("examples", str(tmp_path / "mine"), source=tmp_path / "installed")
    assert done.returncode == 0, done.stderr
    assert missing_parts(tmp_path / "mine") == []


# -------------------------------------------------------------------------- progress


def test_elsewhere_than_on_a_terminal_progress_is_plain_lines():
    stream = io.StringIO()
    with progress.Log(stream, live=False) as log:
        log("meshing", "12 000 nodes")
        log("solving", "round 1\x1b[2J")
    first, second = stream.getvalue().splitlines()
    assert first.endswith("] meshing: 12 000 nodes")
    assert second.endswith("] solving: round 1\\x1b[2J")
    assert "\r" not in stream.getvalue()


def test_on_a_terminal_progress_is_one_line_that_vanishes(monkeypatch):
    monkeypatch.setenv("COLUMNS", "40")
    monkeypatch.setattr(progress, "TICK", 0.01)
    stream = io.StringIO()
    with progress.Log(stream, live=True) as log:
        log("solving", "x" * 200)
        time.sleep(0.1)
    written = stream.getvalue()
    assert "\n" not in written
    drawn = written.split("\r\x1b[K")
    assert len(drawn) > 3  # it ticked
    assert max(map(len, drawn)) <= 39
    assert written.endswith("\r\x1b[K")


def test_verbose_keeps_every_message_on_a_terminal_too():
    stream = io.StringIO()
    with progress.Log(stream, live=True, verbose=True) as log:
        log("solving", "round 1")
        log("solving", "round 2")
    assert stream.getvalue().count("\n") == 2


def test_progress_outlives_its_reader():
    class Gone(io.StringIO):
        def write(self, text):
            raise BrokenPipeError

    with progress.Log(Gone(), live=False) as log:
        log("solving", "round 1")
        log("solving", "round 2")


# -------------------------------------------------------------------------- a whole run

WALL = """
title = "Plain wall"
[model]
dimensions = 2
[spaces.hall]
temperature = 20
surface_resistance = 0.13
[spaces.store]
temperature = -20
surface_resistance = 0.13
[materials.foam]
conductivity = 0.025
[[body]]
name = "wall"
material = "foam"
box = { from = [0, 0], to = [100, 100] }
[[boundary]]
name = "warm"
on = { plane = { y = 0 } }
space = "hall"
[[boundary]]
name = "cold"
on = { plane = { y = 100 } }
space = "store"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true
"""
# 40 K over 0.1 m of width: 40 * 0.1 / (0.13 + 0.1/0.025 + 0.13) = 0.93897 W/m.
LIMIT = '[[limit]]\nname = "leak"\nquantity = {{ space = "hall", heat_flow = true }}\nat_most = {}\n'


@pytest.fixture
def wall(tmp_path):
    """A function that writes the plain wall with something added, and returns the file."""

    def write(more: str = "") -> str:
        path = tmp_path / "wall.toml"
        path.write_text(WALL + more, encoding="utf-8")
        return str(path)

    return write


def test_a_run_prints_the_answer_alone_and_writes_it(wall, tmp_path, capsys):
    out = tmp_path / "a" / "b"
    assert cli.main(["run", wall(), "--out", str(out), "--no-pictures"]) == 0
    shown = capsys.readouterr()
    assert shown.out.startswith("Plain wall\n\nHeat flow")
    assert "from space hall" in shown.out
    assert "solve" not in shown.out
    assert "] solve: " in shown.err
    answers = json.loads((out / "answers.json").read_text(encoding="utf-8"))
    assert answers["spaces"]["hall"]["heat_flow"] == pytest.approx(4 / 4.26, rel=1e-9)
    assert not list(out.glob("*.png"))
    named = [Path(line.strip()) for line in shown.out.split("\nFiles\n")[1].splitlines()]
    assert sorted(named) == sorted(out.iterdir())


@pytest.mark.parametrize(("bound", "code", "word"), [(0.95, 0, "met"), (0.93, 6, "NOT MET")])
def test_a_limit_decides_the_exit_code(wall, tmp_path, capsys, bound, code, word):
    case = wall(LIMIT.format(bound))
    assert cli.main(["run", case, "--out", str(tmp_path / "out"), "--no-pictures"]) == code
    assert f"  {word} " in capsys.readouterr().out
    assert (tmp_path / "out" / "answers.json").exists()


def test_a_check_names_the_parts_and_solves_nothing(wall, capsys):
    assert cli.main(["check", wall()]) == 0
    shown = capsys.readouterr().out
    assert "Nothing was solved" in shown
    assert "0.1000 m²/m   space hall" in shown


def test_an_output_folder_that_is_a_file_is_refused_before_the_work(wall, tmp_path, capsys):
    (tmp_path / "out").write_text("", encoding="utf-8")
    assert cli.main(["run", wall(), "--out", str(tmp_path / "out")]) == 5
    assert "] " not in capsys.readouterr().err  # no line of progress: nothing had begun


def test_a_fault_that_only_the_geometry_shows_is_placed_too(wall, tmp_path):
    more = '[[probe]]\nname = "astray"\nat = [500, 500]\n'
    done = command("run", wall(more), "--out", str(tmp_path / "out"))
    assert done.returncode == 2
    line = (WALL + more).splitlines().index("at = [500, 500]") + 1
    assert f"wall.toml:{line}: " in done.stderr


def test_ctrl_c_in_the_middle_of_a_run_leaves_old_answers_whole(wall, tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    (out / "answers.json").write_text("old", encoding="utf-8")
    fine = wall().replace("wall.toml", "fine.toml")
    Path(fine).write_text(WALL.replace("dimensions = 2", 'dimensions = 2\nsize = "0.1 mm"'), encoding="utf-8")
    with subprocess.Popen(
        [sys.executable, "-m", "coldseam", "run", fine, "--out", str(out)],
        env={**os.environ, "PYTHONPATH": str(TOP / "solver")},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    ) as process:
        for line in process.stderr:  # a terminal sends the signal to every process of the foreground group
            if "geometry" in line or "mesh" in line:
                os.killpg(process.pid, signal.SIGINT)
                break
        rest = process.stderr.read()
        assert process.wait(timeout=60) == 130
    assert rest.splitlines()[-1] == "coldseam: interrupted"
    assert "Traceback" not in rest
    assert [path.name for path in out.iterdir()] == ["answers.json"]
    assert (out / "answers.json").read_text(encoding="utf-8") == "old"
