"""Every public name says what it does, in which units and shapes, and its examples run."""

from __future__ import annotations

import ast
import doctest
import importlib
import inspect
import pkgutil
import re
from dataclasses import is_dataclass
from pathlib import Path

import pytest

import coldseam

TOP = Path(__file__).parents[1]

# Words by which a docstring names a unit or says that there is none.
UNIT = re.compile(
    r"(?<![\w/])(m|mm|m²|m2|m³|m3|s|kg|K|W|J|Pa|rad|1|%)(?![\w])"
    r"|°C|W/|J/|kg/|m²|m³|[Uu]nit|[Ff]raction|[Ff]actor|[Ii]nd(ex|ices)|[Nn]umber|[Nn]odes|[Pp]osition|[Mm]ask|[Tt]rue"
)
WITHOUT_UNIT = {"cells", "facets", "edges", "links", "cell_body", "facet_cell", "facet_patch", "facet_boundary", "mask"}
SHAPE = re.compile(r"\([\w .*+-]+,[\w .,*+-]*\)")


def module_names() -> list[str]:
    """Return every module of the package, those that start a process when imported left out."""
    found = pkgutil.walk_packages(coldseam.__path__, "coldseam.")
    return sorted(module.name for module in found if not module.name.endswith("__main__"))


MODULES = module_names()


def public_objects(module) -> list[tuple[str, object]]:
    """Return the public functions and classes that a module defines, methods included."""
    found = []
    for name, thing in vars(module).items():
        if name.startswith("_") or getattr(thing, "__module__", None) != module.__name__:
            continue
        if inspect.isclass(thing):
            found.append((name, thing))
            found += [(f"{name}.{key}", value) for key, value in public_methods(thing)]
        elif inspect.isfunction(thing):
            found.append((name, thing))
    return found


def public_methods(owner: type) -> list[tuple[str, object]]:
    """Return the public methods and properties that a class defines itself."""
    methods = []
    for key, value in vars(owner).items():
        value = getattr(value, "__func__", value)
        if not key.startswith("_") and (inspect.isfunction(value) or isinstance(value, property)):
            methods.append((key, value))
    return methods


def arrays(thing: object) -> set[str]:
    """Return the parameters of a function, or the fields of a dataclass, that are annotated as arrays."""
    if not inspect.isfunction(thing) and not is_dataclass(thing):
        return set()
    notes = vars(thing).get("__annotations__", {}) if is_dataclass(thing) else thing.__annotations__
    return {key for key, note in notes.items() if key != "return" and "ndarray" in str(note)}


def docstring_fault(thing: object) -> str | None:
    """Return what a docstring lacks, or None."""
    text = thing.__doc__ or ""
    if not text.strip() or text.startswith(f"{getattr(thing, '__name__', '')}("):
        return "has no docstring"  # dataclasses without one get their signature as docstring
    if arrays(thing) and not SHAPE.search(text.replace(" [+ 1]", "")):
        return "takes arrays and names no shape, such as (n_nodes, dim)"
    if arrays(thing) - WITHOUT_UNIT and not UNIT.search(text):
        return "takes arrays and names no unit"
    return None


@pytest.mark.parametrize("name", MODULES)
def test_every_public_name_says_what_it_does(name):
    module = importlib.import_module(name)
    faults = [f"{name}.{key} {fault}" for key, thing in public_objects(module) if (fault := docstring_fault(thing))]
    assert faults == []


def test_a_name_without_docstring_is_found():
    def silent(points):
        pass

    def shapeless(points):
        """Return the points, m."""

    def unitless(points):
        """Return the squares, shape (n, dim)."""

    def good(points):
        """Return the points, m, shape (n, dim)."""

    for function in (silent, shapeless, unitless, good):
        function.__annotations__ = {"points": "np.ndarray"}
    assert docstring_fault(silent) == "has no docstring"
    assert docstring_fault(shapeless).startswith("takes arrays and names no shape")
    assert docstring_fault(unitless) == "takes arrays and names no unit"
    assert docstring_fault(good) is None


@pytest.mark.parametrize("name", MODULES)
def test_docstring_examples_run(name):
    module = importlib.import_module(name)
    assert doctest.testmod(module, optionflags=doctest.NORMALIZE_WHITESPACE).failed == 0


def test_there_are_examples_to_run():
    finder = doctest.DocTestFinder()
    examples = sum(len(test.examples) for name in MODULES for test in finder.find(importlib.import_module(name)))
    assert examples > 20


def test_every_name_of_the_front_door_is_there():
    for name in coldseam.__all__:
        assert getattr(coldseam, name) is not None
    with pytest.raises(AttributeError, match="no attribute 'nonsense'"):
        coldseam.nonsense  # noqa: B018


def test_the_front_door_is_told_to_type_checkers_as_it_is():
    tree = ast.parse(inspect.getsource(coldseam))
    (guarded,) = [node for node in tree.body if isinstance(node, ast.If)]
    told = {alias.name: node.module for node in guarded.body for alias in node.names}
    assert told == coldseam._HOME


def test_the_python_example_of_the_readme_runs(monkeypatch):
    readme = (TOP / "README.md").read_text(encoding="utf-8")
    (example,) = re.findall(r"^```python\n(.*?)^```", readme, re.DOTALL | re.MULTILINE)
    monkeypatch.chdir(TOP)
    names: dict = {}
    exec(compile(example, "README.md", "exec"), names)
    hall = names["hall"]
    assert hall.heat_flow_low <= hall.heat_flow <= hall.heat_flow_high
    assert names["grid"].n_points == len(names["result"].temperature)
    # Heat flows in from the warm hall, and steady conduction is linear: 52 K drive 52/42 of what 42 K do.
    as_shipped = coldseam.run(coldseam.load("cases/panel-corner.toml")).answers.spaces["hall"].heat_flow
    assert hall.heat_flow == pytest.approx(as_shipped * 52 / 42, rel=0.01)  # each within the case's 0.5 %
    assert as_shipped > 0


def test_the_short_case_of_the_readme_is_valid():
    readme = (TOP / "README.md").read_text(encoding="utf-8")
    (text,) = re.findall(r"^```toml\n(.*?)^```", readme, re.DOTALL | re.MULTILINE)
    case = coldseam.loads(text)
    assert [body.name for body in case.body] == ["panel", "bolt"]
