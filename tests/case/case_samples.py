"""Case texts that the tests of reading start from."""

PANEL = """\
title = "Freezer wall panel"

[model]
dimensions = 3
accuracy = "1 %"

[spaces.freezer]
temperature = -20
film = 8

[spaces.bay]
temperature = "77 degF"
relative_humidity = "60 %"
surface_resistance = 0.13

[materials.foam]
conductivity = "22 mW/mK"

[materials.bolt]
conductivity = 17
density = 7900
specific_heat = 460
source = "EN 10088-1 table A.3"

[[body]]
name = "panel"
material = "foam"
box = { from = [0, 0, 0], to = [300, 300, "10 cm"] }

[[body]]
name = "bolts"
material = "bolt"
heat_source = 5
cylinder = { from = [150, 150, 0], to = [150, 150, 100], diameter = 8 }
repeat = { step = [[20, 0, 0]], count = [2] }

[[boundary]]
name = "warm face"
on = { plane = { z = 100 } }
space = "bay"

[[boundary]]
name = "cold face"
on = { plane = { z = 0 }, facing = "-z" }
space = "freezer"

[[boundary]]
name = "cut planes"
on = "rest"
adiabatic = true

[[probe]]
name = "bolt head"
at = [150, 150, 100]

[[contact]]
name = "glue"
between = ["panel", "bolts"]
resistance = 0.01

[[sheet]]
name = "skin"
material = "bolt"
thickness = 0.5
on = { plane = { z = 100 } }

[[bridge]]
name = "bolt"
kind = "point"
without = ["bolts"]

[[limit]]
name = "heat leak"
quantity = { space = "freezer", heat_flow = true }
at_most = "0.25 kW"
"""

CORNER = """\
title = "Panel corner"

[model]
dimensions = 2

[spaces.bay]
temperature = 25
film = 8
[spaces.freezer]
temperature = -20
film = 8

[materials.foam]
conductivity = [0.022, 0.03]

[[body]]
name = "corner"
material = "foam"
polygon = { points = [[0, 0], [500, 0], [500, 100], [100, 100], [100, 500], [0, 500]] }

[[body]]
name = "pipe"
material = "foam"
disc = { center = [50, 50], radius = 10 }

[[boundary]]
name = "outside"
on = { plane = { x = 0 } }
space = "bay"
[[boundary]]
name = "below"
on = { plane = { y = 0 } }
space = "bay"
[[boundary]]
name = "inside"
on = { within = { from = [100, 100], to = [600, 600] } }
space = "freezer"
[[boundary]]
name = "cuts"
on = "rest"
adiabatic = true

[[bridge]]
name = "edge"
kind = "linear"
basis = "both"
flanking = [
  { layers = [["foam", 100]], length = 400, length_external = 500, between = ["bay", "freezer"] },
  { layers = [["foam", 100]], length = 400, length_external = 500, between = ["bay", "freezer"] },
]

[[limit]]
name = "psi"
quantity = { bridge = "edge", psi = true }
at_most = "20 mW/mK"
[[limit]]
name = "dry"
quantity = { boundary = "outside", surface_humidity = true }
at_most = "80 %"
"""

BOX = """\
title = "Vaccine box"
[model]
dimensions = 3
[spaces.in]
temperature = 5
film = 8
[spaces.out]
temperature = 43
surface_resistance = 0
[materials.pur]
conductivity = 0.022
[materials.lid]
conductivity = 0.04

[[body]]
name = "shell"
enclosure = { inside = { from = [0, 0, 0], to = [400, 300, 200] }, layers = [["pur", 80], ["lid", 2]], \
faces = { "+z" = [["lid", 60]], "-y" = [] }, openings = [{ face = "+x", from = [0, 50], to = [100, 150] }] }

[[boundary]]
name = "inside"
on = { shell = "cavity" }
space = "in"
[[boundary]]
name = "outside"
on = { body = "shell/lid" }
space = "out"
[[boundary]]
name = "edges"
on = "rest"
adiabatic = true
"""

ROUND = """\
title = "Pipe through a wall"
[model]
dimensions = 2
axisymmetric = true
[materials.foam]
conductivity = 0.03
[[body]]
name = "wall"
material = "foam"
heat_source = "3 W"
box = { from = [10, 0], to = [200, 100] }
[[boundary]]
name = "warm"
on = { facing = "+y" }
temperature = 20
[[boundary]]
name = "cold"
on = "rest"
temperature = -20
"""

ALL = {"panel": PANEL, "corner": CORNER, "box": BOX, "round": ROUND}
