"""Cases for the geometry tests, in the words of the case file."""

from __future__ import annotations

from coldseam.case.read import loads
from coldseam.geometry.mesher import open_geometry

HEAD = """
title = "geometry test"
[model]
dimensions = {dim}
{model}
[spaces.in]
temperature = 0
film = 10
{materials}
[[boundary]]
name = "all"
on = "rest"
space = "in"
"""


def make_case(bodies: str, dim: int = 3, model: str = "", materials: str = "a b c", folder=None):
    """Return a case of the bodies, with materials of the given names."""
    table = "\n".join(f"[materials.{name}]\nconductivity = 1\nsource = 'none'" for name in materials.split())
    text = HEAD.format(dim=dim, model=model, materials=table) + bodies
    return loads(text) if folder is None else loads(text, folder)


def body(name: str, material: str | None, shape: str, more: str = "") -> str:
    """Return one ``[[body]]``; a void when there is no material."""
    what = "void = true" if material is None else f'material = "{material}"'
    return f'[[body]]\nname = "{name}"\n{what}\n{shape}\n{more}\n'


def mesh_of(bodies: str, dim: int = 3, model: str = "", **options):
    """Return the first mesh of a case of these bodies."""
    with open_geometry(make_case(bodies, dim, model)) as mesher:
        return mesher.mesh(**options)
