"""Every fault of a case file: its line, its key, and words that say what would be accepted."""

import pytest
from case_faults import BOLT_AT, FAULTS, PANEL_AT
from case_samples import PANEL, ROUND

from coldseam.case.read import loads
from coldseam.errors import CaseError


def faults_of(text, folder="."):
    with pytest.raises(CaseError) as error:
        loads(text, folder)
    return str(error.value).split("\n")


@pytest.mark.parametrize(("text", "old", "new", "piece", "key", "words"), FAULTS)
def test_fault(text, old, new, piece, key, words):
    assert text.count(old) >= 1, "the sample has changed"
    bad = text.replace(old, new, 1)
    lines = faults_of(bad)
    matching = [line for line in lines if f": {key}" in line and words in line]
    assert matching, lines
    # One edit, one fault: nothing else may be complained of but what follows from it by necessity.
    assert len(lines) <= 2, lines
    if piece is not None:
        # Where the piece stands several times, the line must hold it.
        number = int(matching[0].split(":")[1])
        assert piece.split("\n")[0] in bad.split("\n")[number - 1]
    for jargon in ("Value error", "validation error", "Input should", "pydantic", "Literal", "tuple", "dict"):
        assert jargon not in "\n".join(lines)


def test_all_faults_at_once_in_order_of_lines():
    bad = PANEL
    for old, new in (
        ("film = 8", "film = -8"),
        ("= 17", "= 0"),
        ('"10 cm"]', "0]"),
        ("at = [150, 150, 100]", "at = 1"),
    ):
        bad = bad.replace(old, new)
    bad = bad.replace('without = ["bolts"]', 'without = ["nut"]').replace('on = "rest"', 'on = "x"\nfoo = 1')
    keys = [line.split(": ")[1] for line in faults_of(bad)]
    assert keys == [
        "spaces.freezer.film",
        "materials.bolt.conductivity",
        "body[1].box.to",
        "boundary[3].on",
        "boundary[3].foo",
        "probe[1].at",
        "bridge[1].without[1]",
    ]


def test_no_temperature_anywhere():
    text = ROUND.replace("temperature = 20", "heat_flow = 1").replace("temperature = -20", "heat_flow = -1")
    assert any("no temperature can be computed" in line for line in faults_of(text))


def test_no_bodies_no_boundaries():
    head = PANEL.split("[[body]]")[0]
    text = "\n".join(faults_of(head))
    assert "body: is required and missing" in text and "boundary: is required and missing" in text
    assert "body: needs at least one entry" in "\n".join(faults_of("body = []\n" + head))


@pytest.mark.parametrize("name", ["part.geo", "part.GEO", "part.geo_unrolled"])
def test_gmsh_scripts_need_trust(tmp_path, name):
    """A .geo file can run commands: refused, as a mesh and as a body, unless the user says so."""
    (tmp_path / name).write_text("// a script")
    head = f'dimensions = 3\nmesh = "{name}"'
    bodies = (
        PANEL.replace(PANEL_AT, 'group = "a"').replace(BOLT_AT, 'group = "b"').replace("repeat = {", "# repeat = {")
    )
    refused = faults_of(bodies.replace("dimensions = 3", head), tmp_path)
    assert len(refused) == 1 and "can run commands on this machine" in refused[0]
    case = loads(bodies.replace("dimensions = 3", head + "\ntrust_scripts = true"), tmp_path)
    assert case.model.mesh == tmp_path / name and case.model.trust_scripts


def test_foreign_mesh(tmp_path):
    (tmp_path / "a.msh").write_text("$MeshFormat")
    text = PANEL.replace("dimensions = 3", 'dimensions = 3\nmesh = "a.msh"\nmesh_unit = "in"')
    lines = faults_of(text, tmp_path)
    assert len([line for line in lines if "bodies are given by group" in line]) == 2
    text = text.replace(PANEL_AT, 'group = "a"').replace(BOLT_AT, 'group = "b"')
    assert any("can't repeat a part of a foreign mesh" in line for line in faults_of(text, tmp_path))
    case = loads(text.replace("repeat = {", "# repeat = {"), tmp_path)
    assert case.model.mesh_unit == pytest.approx(0.0254) and case.body[0].kind == "group"


def test_files_beside_the_case(tmp_path):
    (tmp_path / "part.step").write_text("ISO-10303-21;")
    (tmp_path / "empty.stp").write_text("")
    (tmp_path / "folder.stp").mkdir()
    text = PANEL.replace(BOLT_AT, 'file = "part.step"')
    assert loads(text, tmp_path).body[1].file == tmp_path / "part.step"
    assert any("is empty" in line for line in faults_of(text.replace("part.step", "empty.stp"), tmp_path))
    assert any("is a folder" in line for line in faults_of(text.replace("part.step", "folder.stp"), tmp_path))
    named = text.replace('material = "bolt"\nheat', 'materials = { head = "bolt" }\nheat')
    assert loads(named, tmp_path).body[1].materials == {"head": "bolt"}
    wrong = faults_of(named.replace('head = "bolt"', 'head = "blt"'), tmp_path)
    assert any('did you mean "bolt"?' in line for line in wrong)


def test_hostile_names_do_not_break_messages():
    """Braces would be filled in by pydantic, percent signs by formatting."""
    odd = "{what} %s {0} \\u202e <script>"
    lines = faults_of(PANEL.replace('material = "foam"', f'material = "{odd}"'))
    assert len(lines) == 1 and "{what} %s {0}" in lines[0]
