"""Every fault of a case file: its line, its key, and words that say what would be accepted."""

import pytest
from case_samples import BOX, CORNER, PANEL, ROUND

from coldseam.case.read import loads
from coldseam.errors import CaseError

BOLT_AT = "cylinder = { from = [150, 150, 0], to = [150, 150, 100], diameter = 8 }"
PANEL_AT = 'box = { from = [0, 0, 0], to = [300, 300, "10 cm"] }'
POLYGON_AT = "polygon = { points = [[0, 0], [500, 0], [500, 100], [100, 100], [100, 500], [0, 500]] }"
DISC_AT = "disc = { center = [50, 50], radius = 10 }"
GLUE = 'between = ["panel", "bolts"]'
FOAM = 'conductivity = "22 mW/mK"'
LEAK = 'quantity = { space = "freezer", heat_flow = true }'


def faults_of(text, folder="."):
    with pytest.raises(CaseError) as error:
        loads(text, folder)
    return str(error.value).split("\n")


# (text, what is replaced, by what, a piece of the line named, the key, words of the message)
FAULTS = [
    # keys
    (PANEL, "film = 8", "flim = 8", "flim", "spaces.freezer.flim", 'is not a key here; did you mean "film"?'),
    (PANEL, "film = 8", "film = 8\nqqq = 1", "qqq", "spaces.freezer.qqq", "accepted are temperature, film"),
    (PANEL, "[[probe]]", "[[prob]]", "[[prob]]", "prob", 'did you mean "probe"?'),
    (PANEL, "[model]", "[modle]", "[modle]", "modle", 'did you mean "model"?'),
    (PANEL, 'title = "Freezer wall panel"', "", None, "title", "is required and missing"),
    (PANEL, '"Freezer wall panel"', '""', "title", "title", "text that is not empty"),
    (PANEL, '"Freezer wall panel"', "3", "title", "title", "expected a name"),
    (PANEL, '"panel"\nmat', '" panel"\nmat', '" panel"', "body[1].name", "must not begin or end with blanks"),
    (PANEL, "[model]", "[[model]]", "[[model]]", "model", "expected a table with dimensions"),
    (PANEL, "dimensions = 3", "", "[model]", "model.dimensions", "is required and missing"),
    (PANEL, "dimensions = 3", "dimensions = 4", "dimensions", "model.dimensions", "expected 2 or 3, not 4"),
    (PANEL, "dimensions = 3", "dimensions = 3\naxisymmetric = true", "axisym", "model.axisymmetric", "dimensions = 2"),
    (PANEL, "dimensions = 3", 'dimensions = 3\naxisymmetric = "yes"', "axisym", "model.axisymmetric", "true or false"),
    (PANEL, "dimensions = 3", 'dimensions = 3\nmesh_unit = "m"', "mesh_unit", "model.mesh_unit", "goes with mesh"),
    (PANEL, "dimensions = 3", 'dimensions = 3\nmesh_unit = "kg"', "mesh_unit", "model.mesh_unit", "accepted is mm, cm"),
    (PANEL, "dimensions = 3", "dimensions = 3\nsize = 0", "size", "model.size", "must be above 0"),
    (PANEL, "dimensions = 3", "dimensions = 3\nmax_nodes = 2.5", "max_nodes", "model.max_nodes", "whole number"),
    (PANEL, "dimensions = 3", "dimensions = 3\nmax_nodes = 1", "max_nodes", "model.max_nodes", "must be 10 or more"),
    (PANEL, '"1 %"', "0", "accuracy", "model.accuracy", "must be 1e-06 or more, not 0"),
    (PANEL, '"1 %"', "-0.01", "accuracy", "model.accuracy", "must be 1e-06 or more"),
    (PANEL, '"1 %"', "1e-9", "accuracy", "model.accuracy", "must be 1e-06 or more"),
    (PANEL, '"1 %"', "1", "accuracy", "model.accuracy", "must be below 0.5, not 1"),
    (PANEL, '"1 %"', "nan", "accuracy", "model.accuracy", "not a finite number"),
    # not in this version
    (PANEL, "[[probe]]", "[time]\nduration = 1\n[[probe]]", "[time]", "time", "steady cases only"),
    (PANEL, "[[probe]]", "[[event]]\nname = 'x'\n[[probe]]", "[[event]]", "event", "steady cases only"),
    (PANEL, "temperature = -20\nfilm = 8", "floating = { start = 2 }", "floating", "spaces.freezer.floating", "steady"),
    (PANEL, "= -20", "= { sine = 1 }", "sine", "spaces.freezer.temperature", "not supported yet"),
    (PANEL, "film = 8", "film = { vertical = 1 }", "vertical", "spaces.freezer.film", "not supported yet"),
    (PANEL, "= 17", "= { table = [] }", "table", "materials.bolt.conductivity", "not supported yet"),
    (PANEL, FOAM, FOAM + "\nair_gap = true", "air_gap", "materials.foam.air_gap", "not supported yet"),
    # spaces
    (PANEL, "film = 8", "", "[spaces.freezer]", "spaces.freezer", "needs exactly one of film or surface_resistance"),
    (PANEL, "film = 8", "film = 8\nsurface_resistance = 1", "surface_resistance = 1\n", "spaces.freezer.surf", "exactly one"),
    (PANEL, "film = 8", "film = 0", "film = 0", "spaces.freezer.film", "must be above 0, not 0"),
    (PANEL, "film = 8", 'film = "8 W/mK"', "film =", "spaces.freezer.film", "it is one of conductivity"),
    (PANEL, "= 0.13", "= -0.13", "-0.13", "spaces.bay.surface_resistance", "must be 0 or more"),
    (PANEL, "= -20", "= -280", "-280", "spaces.freezer.temperature", "below absolute zero"),
    (PANEL, "= -20", "= true", "= true\nfilm", "spaces.freezer.temperature", "true is not a temperature"),
    (PANEL, '"60 %"', "60", "= 60", "spaces.bay.relative_humidity", 'must be 1 or less, not 60 (a fraction, 1 = 100 %; '),
    (PANEL, '"60 %"', '"101 %"', "101 %", "spaces.bay.relative_humidity", 'must be 1 or less, not "101 %"'),
    (PANEL, "[materials.foam]", "[spaces.attic]\ntemperature=1\nfilm=1\n[materials.foam]", "[spaces.attic]", "spaces.attic",
     'no boundary has space = "attic"'),
    # materials
    (PANEL, FOAM, "", "[materials.foam]", "materials.foam.conductivity", "is required and missing"),
    (PANEL, "= 17", "= 0", "= 0\ndens", "materials.bolt.conductivity", "must be above 0, not 0"),
    (PANEL, "= 17", "= -17", "-17", "materials.bolt.conductivity", "must be above 0"),
    (PANEL, "= 17", "= [1, -2, 3]", "-2", "materials.bolt.conductivity[2]", "must be above 0, not -2"),
    (PANEL, "= 17", "= [1, 2]", "[1, 2]", "materials.bolt.conductivity", "[kx, ky, kz]"),
    (PANEL, "= 17", "= [1, 2, 3, 4]", "[1, 2, 3, 4]", "materials.bolt.conductivity", "not 4 numbers"),
    (PANEL, "= 17", "= []", "= []", "materials.bolt.conductivity", "three rows"),
    (PANEL, "= 17", "= [[1, 2, 0], [0, 1, 0], [0, 0, 1]]", "[[1, 2", "materials.bolt.conductivity", "must be symmetric"),
    (PANEL, "= 17", "= [[1, 2, 0], [2, 1, 0], [0, 0, 1]]", "[[1, 2", "materials.bolt.conductivity", "positive definite"),
    (PANEL, "= 17", "= [[1, 0], [0, 1]]", "[[1, 0", "materials.bolt.conductivity", "three rows"),
    (PANEL, "= 17", "= 17\naxes = [[1,0,0],[0,1,0],[0,0,1]]", "axes", "materials.bolt.axes", "single conductivity"),
    (PANEL, "= 17", "= [1,2,3]\naxes = [[2,0,0],[0,1,0],[0,0,1]]", "axes", "materials.bolt.axes", "row 1 must have unit length; it has 2"),
    (PANEL, "= 17", "= [1,2,3]\naxes = [[1,0,0],[0.6,0.8,0],[0,0,1]]", "axes", "materials.bolt.axes", "rows 1 and 2 must be at right"),
    (PANEL, "= 17", "= [1,2,3]\naxes = [[1,0],[0,1]]", "axes", "materials.bolt.axes", "needs 3 rows"),
    (PANEL, "= 17", "= [1,2,3]\naxes = 4", "axes", "materials.bolt.axes", "expected three unit vectors"),
    (PANEL, FOAM, 'library = "PIR foam, agd"', "library", "materials.foam.library", "PIR foam, aged"),
    (PANEL, FOAM, "library = 7", "library", "materials.foam.library", "the name of an entry"),
    (PANEL, "density = 7900", "density = 0", "density", "materials.bolt.density", "must be above 0"),
    (PANEL, "= 460", '= "460 J/K"', "460", "materials.bolt.specific_heat", "it is one of heat capacity"),
    (PANEL, "= 460", "= 460\nemissivity = 1.2", "emissivity", "materials.bolt.emissivity", "must be 1 or less"),
    (PANEL, '"EN 10088-1 table A.3"', "3", "source", "materials.bolt.source", "expected text, not 3"),
    # bodies
    (PANEL, PANEL_AT, "", "[[body]]", "body[1]", "needs exactly one of box, cylinder"),
    (PANEL, PANEL_AT, PANEL_AT + "\nsphere = { center = [0,0,0], radius = 1 }", "sphere", "body[1].sphere", "exactly one of box and sphere"),
    (PANEL, 'material = "foam"\n', "", "[[body]]", "body[1]", "needs a material, or void = true"),
    (PANEL, 'material = "foam"\n', 'material = "fom"\n', "fom", "body[1].material", 'did you mean "foam"?'),
    (PANEL, 'material = "foam"\n', 'material = "zzz"\n', "zzz", "body[1].material", "there is foam and bolt"),
    (PANEL, 'material = "foam"\n', "void = false\n", "void", "body[1].void", "can only be true"),
    (PANEL, 'material = "foam"\n', 'material = "foam"\nvoid = true\n', "void", "body[1].void", "only one of material and void"),
    (PANEL, 'material = "bolt"\nheat', "void = true\nheat", "heat_source", "body[2].heat_source", "a void can't give off heat"),
    (PANEL, "heat_source = 5", "heat_source = 5\nheat_density = 1", "heat_density", "body[2].heat_density", "only one of"),
    (PANEL, "[[boundary]]", f'[[body]]\nname = "bolts" # 2\nmaterial = "foam"\n{PANEL_AT}\n[[boundary]]', '"bolts" # 2', "body[3].name",
     "is the name of body[2] already"),
    (PANEL, '"10 cm"]', "0]", "box =", "body[1].box.to", "no size along z"),
    (PANEL, '"10 cm"]', "-5]", "box =", "body[1].box.to", "the wrong way round along z"),
    (PANEL, '"10 cm"]', '"10 kg"]', "box =", "body[1].box.to[3]", '"kg" is not a unit of length'),
    (PANEL, '300, "10 cm"]', "300]", "box =", "body[1].box.to", "3 numbers (the case has dimensions = 3), not 2"),
    (PANEL, 'to = [300, 300, "10 cm"]', "to = 7", "box =", "body[1].box.to", "expected a list of 3 numbers"),
    (PANEL, "to = [150, 150, 100]", "to = [150, 150, 0]", "cylinder", "body[2].cylinder.to", "no length"),
    (PANEL, "diameter = 8", "diameter = 0", "cylinder", "body[2].cylinder.diameter", "must be above 0"),
    (PANEL, ", diameter = 8", "", "cylinder", "body[2].cylinder", "needs exactly one of diameter or radius"),
    (PANEL, BOLT_AT, "cone = { from=[0,0,0], to=[0,0,1], diameter_from=0, diameter_to=0 }", "cone", "body[2].cone.diameter_to", "may be 0"),
    (PANEL, BOLT_AT, "tube = { from=[0,0,0], to=[0,0,1], outer_diameter=5, inner_diameter=5 }", "tube", "body[2].tube.inner_diameter",
     "must be less than outer_diameter"),
    (PANEL, BOLT_AT, "sphere = { center = [0, 0], radius = 3 }", "sphere", "body[2].sphere.center", "3 numbers"),
    (PANEL, BOLT_AT, "disc = { center = [0, 0], radius = 3 }", "disc", "body[2].disc", "is a shape of two dimensions"),
    (PANEL, BOLT_AT, "polygon = { points = [[0,0],[9,0],[0,9]], axis='z', from=0 }", "polygon", "body[2].polygon.to", "required in 3D"),
    (PANEL, BOLT_AT, "polygon = { points = [[0,0],[9,0],[0,9]], axis='z', from=2, to=1 }", "polygon", "body[2].polygon.to", "greater than from"),
    (PANEL, BOLT_AT, "polygon = { points = [[0,0],[9,0],[0,9]], axis='w', from=0, to=1 }", "polygon", "body[2].polygon.axis",
     'expected "x", "y" or "z", not "w"'),
    (CORNER, DISC_AT, BOLT_AT, "cylinder", "body[2].cylinder", "takes box, disc, ring and polygon"),
    (CORNER, DISC_AT, "ring = { center=[0,0], outer_diameter=2, inner_diameter=3 }", "ring", "body[2].ring.inner_diameter", "less than"),
    (CORNER, POLYGON_AT, "polygon = { points = [[0,0],[1,0]] }", "polygon", "body[1].polygon.points", "at least three points"),
    (CORNER, POLYGON_AT, "polygon = { points = [[0,0],[1,0],[2,0]] }", "polygon", "body[1].polygon.points", "no area"),
    (CORNER, POLYGON_AT, "polygon = { points = [[0,0],[1,0],[1,1],[0,0]] }", "polygon", "body[1].polygon.points",
     "points 4 and 1 are the same"),
    (CORNER, POLYGON_AT, "polygon = { points = [[0,0],[2,2],[2,0],[0,1]] }", "polygon", "body[1].polygon.points",
     "sides 1 and 3 of the polygon cross"),
    (CORNER, POLYGON_AT, "polygon = { points = [[0,0],[1,0],[0,1]], axis='z' }", "polygon", "body[1].polygon.axis", "for 3D only"),
    (ROUND, "from = [10, 0]", "from = [-10, 0]", "box", "body[1].box.from", "radius of an axisymmetric section"),
    (PANEL, "step = [[20, 0, 0]]", "step = [[0, 0, 0]]", "repeat", "body[2].repeat.step[1]", "the step has no length"),
    (PANEL, "count = [2]", "count = [2, 3]", "repeat", "body[2].repeat.count", "one number for each of the 1 vectors"),
    (PANEL, "count = [2]", "count = [0]", "repeat", "body[2].repeat.count[1]", "must be 1 or more, not 0"),
    (PANEL, "count = [2]", "count = 2", "repeat", "body[2].repeat.count", "expected a list"),
    (PANEL, BOLT_AT, 'group = "bolts"', "group", "body[2].group", "[model] has no mesh"),
    (PANEL, BOLT_AT, 'file = "none.step"', "file", "body[2].file", 'there is no file "none.step"'),
    (PANEL, BOLT_AT, 'file = "part.dwg"', "file", "body[2].file", ".step, .stp"),
    (PANEL, BOLT_AT, 'file = "part.geo"', "file", "body[2].file", "trust_scripts = true"),
    (PANEL, BOLT_AT, BOLT_AT + "\nmaterials = { a = 'foam' }", "materials = {", "body[2].materials", "goes with file only"),
    # enclosures
    (BOX, 'layers = [["pur", 80], ["lid", 2]], ', "", "enclosure", "body[1].enclosure.layers", "required unless faces gives all six"),
    (BOX, '["pur", 80]', '["pir", 80]', "enclosure", "body[1].enclosure.layers[1][1]", 'did you mean "pur"?'),
    (BOX, '["pur", 80]', '["pur", 0]', "enclosure", "body[1].enclosure.layers[1][2]", "must be above 0"),
    (BOX, '["pur", 80]', '["pur"]', "enclosure", "body[1].enclosure.layers[1]", "a layer is a pair"),
    (BOX, '"+z" = ', '"z" = ', "enclosure", "body[1].enclosure.faces.z", "accepted are -x, +x"),
    (BOX, 'face = "+x"', 'face = "-y"', "enclosure", "body[1].enclosure.openings[1].face", "is open already"),
    (BOX, "to = [100, 150]", "to = [100, 250]", "enclosure", "body[1].enclosure.openings[1]", "z from 0 to 200 mm"),
    (BOX, "to = [100, 150]", "to = [100, 50]", "enclosure", "body[1].enclosure.openings[1].to", "no size along z"),
    (BOX, 'name = "shell"', 'name = "shell"\nmaterial = "pur"', "material =", "body[1].material", "in its layers"),
    (BOX, 'body = "shell/lid"', 'body = "shel/lid"', "shel/lid", "boundary[2].on.body", "no body is called"),
    # boundaries
    (PANEL, 'space = "bay"', "", "[[boundary]]", "boundary[1]", "exactly one of space, temperature, heat_flux, heat_flow or adiabatic"),
    (PANEL, 'space = "bay"', 'space = "bay"\nheat_flux = 1', "heat_flux", "boundary[1].heat_flux", "exactly one of"),
    (PANEL, 'space = "bay"', 'space = "bey"', '"bey"', "boundary[1].space", 'no space is called "bey"; did you mean "bay"?'),
    (PANEL, "adiabatic = true", "adiabatic = false", "adiabatic", "boundary[3].adiabatic", "can only be true"),
    (PANEL, "adiabatic = true", "adiabatic = true\nfilm = 3", "film = 3", "boundary[3].film", "goes with space only"),
    (PANEL, "adiabatic = true", 'heat_flow = "3 W/m"', "heat_flow = ", "boundary[3].heat_flow", "heat flow per metre of depth"),
    (PANEL, 'on = "rest"', 'on = "all"', '"all"', "boundary[3].on", 'or "rest"'),
    (PANEL, 'on = "rest"', "on = {}", "on = {}", "boundary[3].on", "at least one of plane, within"),
    (PANEL, 'on = "rest"\n', "", "[[boundary]]", "boundary[3].on", "is required and missing"),
    (PANEL, "on = { plane = { z = 0 }, facing", 'on = "rest"\nprobe = { facing', "probe = {", "boundary[2].probe", "is not a key"),
    (PANEL, "{ plane = { z = 0 }, facing", "{ plane = { z = 0, x = 1 }, facing", "x = 1", "boundary[2].on.plane", "exactly one axis"),
    (PANEL, "{ plane = { z = 0 }, facing", "{ plane = { w = 0 }, facing", "w = 0", "boundary[2].on.plane.w", "accepted are x, y"),
    (PANEL, 'facing = "-z"', 'facing = "down"', "down", "boundary[2].on.facing", 'not "down"'),
    (PANEL, 'facing = "-z"', 'shell = "inner"', "inner", "boundary[2].on.shell", 'expected "outer" or "cavity"'),
    (PANEL, 'facing = "-z"', 'body = "panl"', "panl", "boundary[2].on.body", 'did you mean "panel"?'),
    (PANEL, 'facing = "-z"', "within = { from = [0,0,0], to = [1,-1,1] }", "within", "boundary[2].on.within.to", "y must not be less"),
    (CORNER, "plane = { x = 0 }", "plane = { z = 0 }", "z = 0", "boundary[1].on.plane", "no meaning in two dimensions"),
    (CORNER, "plane = { x = 0 }", 'facing = "+z"', "+z", "boundary[1].on.facing", "no meaning in two dimensions"),
    (PANEL, 'name = "cold face"', 'name = "warm face"', 'name = "warm face"\non = { plane = { z = 0 ', "boundary[2].name", "boundary[1] already"),
    # sheets, contacts, probes
    (PANEL, "thickness = 0.5", "thickness = 0", "thickness", "sheet[1].thickness", "must be above 0"),
    (PANEL, "thickness = 0.5", 'thickness = 0.5\nbetween = ["panel", "bolts"]', "between = [", "sheet[1].between", "exactly one of on and between"),
    (PANEL, GLUE, 'between = ["panel", "panel"]', "between", "contact[1].between", "two different bodies"),
    (PANEL, GLUE, 'between = ["panel", "bolt"]', "between", "contact[1].between[2]", 'no body is called "bolt"; did you mean "bolts"?'),
    (PANEL, GLUE, 'between = ["panel"]', "between", "contact[1].between[2]", "is required and missing"),
    (PANEL, "resistance = 0.01", "resistance = 0", "resistance = 0\n", "contact[1].resistance", "must be above 0"),
    (PANEL, "at = [150, 150, 100]", "at = [150, 150]", "at =", "probe[1].at", "3 numbers"),
    # bridges
    (PANEL, 'without = ["bolts"]', 'without = ["nuts"]', "without", "bridge[1].without[1]", 'no body is called "nuts"'),
    (PANEL, 'without = ["bolts"]', "without = []", "without", "bridge[1].without", "at least one entry"),
    (PANEL, 'without = ["bolts"]', 'without = ["bolts", "bolts"]', "without", "bridge[1].without", "a body twice"),
    (PANEL, 'without = ["bolts"]', "", "[[bridge]]", "bridge[1].without", 'required for kind = "point"'),
    (PANEL, 'without = ["bolts"]', 'wihout = ["bolts"]', "wihout", "bridge[1].wihout", 'did you mean "without"?'),
    (PANEL, 'without = ["bolts"]', 'without = ["bolts"]\nbasis = "internal"', "basis", "bridge[1].basis", "does not go with"),
    (PANEL, 'kind = "point"', 'kind = "spot"', "spot", "bridge[1].kind", 'expected "linear" or "point", not "spot"'),
    (CORNER, 'basis = "both"\n', "", "[[bridge]]", "bridge[1].basis", 'required for kind = "linear"'),
    (CORNER, ", length_external = 500, between", ", between", None, "bridge[1].flanking[1].length_external", 'required for basis = "both"'),
    (CORNER, 'flanking = [\n  { layers = [["foam", 100]]', "flanking = [\n  { layers = []", "layers = []", "bridge[1].flanking[1].layers", "at least one entry"),
    (CORNER, 'flanking = [\n  { layers = [["foam", 100]]', 'flanking = [\n  { layers = [["foem", 100]]', "foem", "bridge[1].flanking[1].layers[1][1]", '"foam"'),
    (ROUND, "[[body]]", '[[bridge]]\nname = "b"\nkind = "point"\nwithout = ["wall"]\n[[body]]', "[[bridge]]", "bridge[1]",
     "between two spaces, and the case has 0"),
    # limits
    (PANEL, 'at_most = "0.25 kW"', "", "[[limit]]", "limit[1]", "needs at_most or at_least"),
    (PANEL, '"0.25 kW"', '"0.25 K"', "at_most", "limit[1].at_most", "is not a unit of heat flow"),
    (PANEL, '"0.25 kW"', "1\nat_least = 2", "at_least", "limit[1].at_least", "must not be more than at_most"),
    (PANEL, LEAK, 'quantity = { space = "freezer" }', "quantity", "limit[1].quantity", "exactly one of heat_flow"),
    (PANEL, LEAK, 'quantity = { space = "freezer", psi = true }', "quantity", "limit[1].quantity.psi", "does not go with space"),
    (PANEL, LEAK, 'quantity = { boundary = "warm face", temperature = true }', "quantity", "limit[1].quantity.temperature", '"min"'),
    (PANEL, LEAK, 'quantity = { probe = "bolt heat", temperature = true }', "quantity", "limit[1].quantity.probe", '"bolt head"'),
    # whole document
    (PANEL, 'name = "cut planes"', 'name = "more"\non = "rest"\nspace = "bay"\n[[boundary]]\nname = "cut planes"', 'on = "rest"\nadia',
     "boundary[4].on", 'boundary[3] has the "rest" already'),
]  # fmt: skip


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
