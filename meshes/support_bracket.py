"""Make support_bracket.step: a support that carries a load through 100 mm of insulation.

Two stainless end plates (120 x 120 x 6 mm, rounded corners) hold a square glass-fibre tube (60 x 60 x 6 mm) between
them; four stainless M10 studs tie the plates together through the insulation. The insulation runs from
z = 0 to z = 100; the plates lie on its two faces. All dimensions are made up for this example.

The solids don't overlap: the plates have holes in which the studs sit. Their names travel in the file.

Run: python meshes/support_bracket.py [output.step]
"""

import re
import sys
from pathlib import Path

import gmsh

THICK, PLATE, PLATE_THICK, CORNER = 100.0, 120.0, 6.0, 12.0
TUBE, WALL, STUD, PITCH = 60.0, 6.0, 10.0, 90.0
"""mm; the studs stand at +-PITCH/2 in x and y."""


def plate(z):
    return gmsh.model.occ.extrude(
        [(2, gmsh.model.occ.addRectangle(-PLATE / 2, -PLATE / 2, z, PLATE, PLATE, roundedRadius=CORNER))],
        0, 0, PLATE_THICK,
    )[1]  # fmt: skip


def main(output):
    gmsh.initialize()
    gmsh.option.setNumber("General.Terminal", 0)
    gmsh.option.setString("Geometry.OCCTargetUnit", "MM")
    gmsh.model.add("support bracket")
    occ = gmsh.model.occ
    plates = {"cold plate": plate(-PLATE_THICK), "warm plate": plate(THICK)}
    outer = occ.addBox(-TUBE / 2, -TUBE / 2, 0, TUBE, TUBE, THICK)
    inner = occ.addBox(-TUBE / 2 + WALL, -TUBE / 2 + WALL, 0, TUBE - 2 * WALL, TUBE - 2 * WALL, THICK)
    tube = occ.cut([(3, outer)], [(3, inner)])[0][0]
    names = ("stud ++", "stud +-", "stud -+", "stud --")
    places = ((1, 1), (1, -1), (-1, 1), (-1, -1))
    studs = {
        name: (3, occ.addCylinder(x * PITCH / 2, y * PITCH / 2, -PLATE_THICK, 0, 0, THICK + 2 * PLATE_THICK, STUD / 2))
        for name, (x, y) in zip(names, places, strict=True)
    }
    for name, solid in plates.items():
        plates[name] = occ.cut([solid], list(studs.values()), removeTool=False)[0][0]
    occ.synchronize()
    solids = {tag: name for name, (_, tag) in {**plates, "tube": tube, **studs}.items()}
    gmsh.write(str(output))
    gmsh.finalize()
    write_names(output, [solids[tag] for tag in sorted(solids)])


def write_names(path, names):
    """Put the solids' names into the file, where the kernel writes numbers, in the order of their tags."""
    text = path.read_text()
    product = r"(PRODUCT\(\s*)'Open CASCADE STEP translator [\d.]+ 1%s',\s*'[^']*'"
    text, count = re.subn(product % "", lambda found: f"{found[1]}'support bracket','support bracket'", text)
    assert count == 1, "one assembly"
    for position, name in enumerate(names, 1):
        text, count = re.subn(product % rf"\.{position}", lambda found, n=name: f"{found[1]}'{n}','{n}'", text)
        assert count == 1, name
    text = re.sub(r"'\d{4}-\d\d-\d\dT[\d:]+'", "'2025-01-01T00:00:00'", text, count=1)  # the same file each time
    path.write_text(text)


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_suffix(".step"))
