"""The house rules that a reader relies on, read from the source itself.

Imports follow the data's one way; slow or fragile libraries are imported only where they are used; the library
never prints and never ends the process. Each check is a function over source text and is shown here to fail.
"""

from __future__ import annotations

import ast
from collections.abc import Iterator
from graphlib import CycleError, TopologicalSorter
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "solver" / "coldseam"

# A module may import from its own layer and from those above it in this list.
LAYERS = (
    ("__init__", "_version", "errors"),
    ("case", "shipped"),
    ("mesh",),  # before geometry, which hands out meshes: those it makes and, of foreign files, those it reads
    ("geometry",),
    ("volumes",),
    ("physics",),
    ("solution",),
    ("answers",),
    ("report",),
    ("timed",),
    ("study",),
    ("variants",),
    ("progress",),
    ("cli",),
    ("__main__",),
)
# Loaded inside functions only: `coldseam --help` must be quick, and gmsh and VTK need libraries a machine may lack.
ONLY_IN_FUNCTIONS = {"gmsh", "vtk", "vtkmodules", "pyvista", "matplotlib", "meshio"}
MAY_PRINT = {"cli", "progress", "__main__"}


def modules() -> dict[str, ast.Module]:
    """Return the syntax tree of every module, by its dotted name inside the package."""
    trees = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        inside = path.relative_to(PACKAGE)
        if "shipped" in inside.parts[:-1] and inside.parts[1:2] != ("__init__.py",):
            continue  # shipped geometry scripts are data
        parts = inside.with_suffix("").parts
        name = ".".join(parts[:-1] if parts[-1] == "__init__" and len(parts) > 1 else parts)
        trees[name] = ast.parse(path.read_text(encoding="utf-8"))
    return trees


TREES = modules()


def layer(name: str) -> int:
    """Return the position of a module's layer."""
    found = [position for position, entries in enumerate(LAYERS) if name.split(".")[0] in entries]
    assert found, f"coldseam.{name} belongs to no layer: give it a place in LAYERS"
    return found[0]


def imported(tree: ast.AST, known: frozenset[str]) -> Iterator[tuple[str, int]]:
    """Yield the package's own modules that a tree imports anywhere, with the line."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"line {node.lineno}: relative import"
            names = [f"{node.module}.{alias.name}" for alias in node.names]
        else:
            continue
        for name in names:
            inside = name.removeprefix("coldseam.")
            if name.startswith("coldseam."):
                yield (inside if inside in known else inside.rpartition(".")[0] or "__init__"), node.lineno


def running(tree: ast.Module) -> ast.Module:
    """Return a module without what only type checkers read."""
    body = [node for node in tree.body if not (isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test))]
    return ast.Module(body=body, type_ignores=[])


def against_the_flow(name: str, tree: ast.AST, known: frozenset[str]) -> list[str]:
    """Return the imports of a module that go to a later layer."""
    if name == "__init__":
        return []  # the front door imports everything, but only on first use
    return [
        f"coldseam.{name}:{line} imports coldseam.{other}, a later layer"
        for other, line in imported(tree, known)
        if layer(other) > layer(name)
    ]


def at_import_time(tree: ast.AST) -> Iterator[ast.stmt]:
    """Yield the statements that run when a module is imported (not in functions, not for type checkers only)."""
    for node in ast.iter_child_nodes(tree):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
            continue
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            continue
        if isinstance(node, ast.stmt):
            yield node
        yield from at_import_time(node)


def heavy_imports(tree: ast.AST) -> set[str]:
    """Return the libraries of ONLY_IN_FUNCTIONS that a module imports when it is imported itself."""
    roots = set()
    for node in at_import_time(tree):
        if isinstance(node, ast.Import):
            roots |= {alias.name.split(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            roots.add(node.module.split(".")[0])
    return roots & ONLY_IN_FUNCTIONS


def prints_or_exits(tree: ast.Module, *, owns_process: bool = False) -> list[str]:
    """Return the lines of a module that print or end the process, its ``if __name__`` part excepted.

    A worker module is a process of its own (``owns_process``) and may end it, but not print.
    """
    forbidden = {"print", "input", "breakpoint"}
    if not owns_process:
        forbidden |= {"exit", "quit", "sys.exit", "os._exit"}
    body = [node for node in tree.body if not (isinstance(node, ast.If) and "__name__" in ast.unparse(node.test))]
    found = []
    for node in (inner for outer in body for inner in ast.walk(outer)):
        if isinstance(node, ast.Call):
            called = ast.unparse(node.func)
            if called in forbidden:
                found.append(f"line {node.lineno}: {called}()")
        elif isinstance(node, ast.Raise) and node.exc is not None and "SystemExit" in ast.unparse(node.exc):
            found.append(f"line {node.lineno}: raise SystemExit")
    return found


def test_imports_follow_the_layers():
    known = frozenset(TREES)
    assert [fault for name, tree in TREES.items() for fault in against_the_flow(name, tree, known)] == []


def test_a_planted_import_against_the_flow_is_found():
    known = frozenset({"case.units", "solution", "mesh.types"})
    planted = ast.parse("def f():\n    from coldseam.solution import solve")
    assert against_the_flow("case.units", planted, known) == [
        "coldseam.case.units:2 imports coldseam.solution, a later layer"
    ]
    assert against_the_flow("geometry.parts", ast.parse("from coldseam.mesh.types import Mesh"), known) == []
    assert against_the_flow("mesh.types", ast.parse("from coldseam.geometry.parts import x"), known) != []


def test_no_module_imports_itself_round_a_corner():
    known = frozenset(TREES)
    graph = {name: {other for other, _ in imported(running(tree), known)} for name, tree in TREES.items()}
    graph = {name: others - {"__init__", name} for name, others in graph.items() if name != "__init__"}
    try:
        tuple(TopologicalSorter(graph).static_order())
    except CycleError as error:
        pytest.fail(f"import cycle: {' -> '.join(error.args[1])}")


@pytest.mark.parametrize("name", sorted(TREES))
def test_heavy_libraries_are_imported_in_functions_only(name):
    assert heavy_imports(TREES[name]) == set()


def test_a_planted_heavy_import_is_found():
    assert heavy_imports(ast.parse("try:\n    import gmsh\nexcept ImportError:\n    gmsh = None")) == {"gmsh"}
    assert heavy_imports(ast.parse("class A:\n    from matplotlib.figure import Figure")) == {"matplotlib"}
    assert heavy_imports(ast.parse("def f():\n    import gmsh")) == set()
    assert heavy_imports(ast.parse("if TYPE_CHECKING:\n    import pyvista")) == set()


@pytest.mark.parametrize("name", sorted(set(TREES) - MAY_PRINT))
def test_the_library_never_prints_and_never_exits(name):
    assert prints_or_exits(TREES[name], owns_process=name.endswith(".worker")) == []


def test_a_planted_print_or_exit_is_found():
    assert prints_or_exits(ast.parse("def f():\n    print(1)")) == ["line 2: print()"]
    assert prints_or_exits(ast.parse("def f():\n    sys.exit(1)")) == ["line 2: sys.exit()"]
    assert prints_or_exits(ast.parse("raise SystemExit(2)")) == ["line 1: raise SystemExit"]
    assert prints_or_exits(ast.parse("if __name__ == '__main__':\n    raise SystemExit(main())")) == []


def test_every_module_was_read():
    assert {"cli", "errors", "case.library", "mesh.types", "shipped"} <= set(TREES)
