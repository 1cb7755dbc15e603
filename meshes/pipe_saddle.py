"""Make pipe_saddle.msh: half of a cold pipe on a saddle, in hexahedra and wedges.

A quarter of the job by symmetry (x = 0 halves the pipe, z = 0 halves the saddle): a DN 100 pipe (114.3 x 3.6 mm)
in 50 mm of foam. Over the first 150 mm the lower 120 degrees of the foam are a load-bearing block that
lies in a 4 mm steel shell with a web and a foot plate. All dimensions are made up for this example, but
for the pipe's, which is a usual size.

Run: python meshes/pipe_saddle.py [output.msh]
"""

import math
import sys
from pathlib import Path

import gmsh

BORE, PIPE, FOAM, SHELL = 53.55, 57.15, 107.15, 111.15
"""Radii, mm."""
SADDLE, HALF_WEB, FOOT_TOP, FOOT, FOOT_WIDTH = 60.0, 4.0, -200.0, -210.0, 60.0
LOW, HIGH = 150.0, 450.0
"""Where the saddle and the model end along the pipe, mm."""
ROUND_LOW, ROUND_HIGH, THROUGH_FOAM, DOWN_WEB = 8, 9, 5, 5


def section():
    """Draw the section at z = 0; return {name: surface}."""
    geo = gmsh.model.geo
    centre = geo.addPoint(0, 0, 0)
    at = {}
    for name, radius in (("bore", BORE), ("pipe", PIPE), ("foam", FOAM), ("shell", SHELL)):
        for angle in (0, SADDLE) if name == "shell" else (0, SADDLE, 180):
            turn = math.radians(angle)
            at[name, angle] = geo.addPoint(radius * math.sin(turn), -radius * math.cos(turn), 0)
    corner = geo.addPoint(HALF_WEB, -math.sqrt(SHELL**2 - HALF_WEB**2), 0)
    low = {ring: geo.addCircleArc(at[ring, 0], centre, at[ring, SADDLE]) for ring in ("bore", "pipe", "foam")}
    high = {ring: geo.addCircleArc(at[ring, SADDLE], centre, at[ring, 180]) for ring in ("bore", "pipe", "foam")}
    over_web = geo.addCircleArc(at["shell", 0], centre, corner)
    beside_web = geo.addCircleArc(corner, centre, at["shell", SADDLE])
    rays = {}
    for inner, outer in (("bore", "pipe"), ("pipe", "foam"), ("foam", "shell")):
        for angle in (0, SADDLE) if outer == "shell" else (0, SADDLE, 180):
            rays[outer, angle] = geo.addLine(at[inner, angle], at[outer, angle])
    web_foot = geo.addPoint(0, FOOT_TOP, 0), geo.addPoint(HALF_WEB, FOOT_TOP, 0)
    foot = [geo.addPoint(x, y, 0) for x, y in ((FOOT_WIDTH, FOOT_TOP), (FOOT_WIDTH, FOOT), (0, FOOT))]
    web_lines = [geo.addLine(corner, web_foot[1]), geo.addLine(web_foot[1], web_foot[0])]
    web_lines.append(geo.addLine(web_foot[0], at["shell", 0]))
    chain = [web_foot[1], *foot, web_foot[0]]
    foot_lines = [geo.addLine(a, b) for a, b in zip(chain, chain[1:], strict=False)]

    def surface(*loop):
        return geo.addPlaneSurface([geo.addCurveLoop(list(loop))])

    made = {}
    for inner, outer, name in (("bore", "pipe", "pipe"), ("pipe", "foam", "foam")):
        made[f"{name} low"] = surface(rays[outer, 0], low[outer], -rays[outer, SADDLE], -low[inner])
        made[f"{name} high"] = surface(rays[outer, SADDLE], high[outer], -rays[outer, 180], -high[inner])
    made["shell"] = surface(rays["shell", 0], over_web, beside_web, -rays["shell", SADDLE], -low["foam"])
    made["web"] = surface(over_web, *web_lines)
    made["foot"] = surface(*foot_lines, -web_lines[1])
    for curve in low.values():
        geo.mesh.setTransfiniteCurve(curve, ROUND_LOW + 1)
    for curve in high.values():
        geo.mesh.setTransfiniteCurve(curve, ROUND_HIGH + 1)
    geo.mesh.setTransfiniteCurve(over_web, 2)
    geo.mesh.setTransfiniteCurve(beside_web, ROUND_LOW)
    for (outer, _), curve in rays.items():
        geo.mesh.setTransfiniteCurve(curve, THROUGH_FOAM + 1 if outer == "foam" else 2)
    for curve, pieces in zip(web_lines, (DOWN_WEB, 1, DOWN_WEB), strict=True):
        geo.mesh.setTransfiniteCurve(curve, pieces + 1)
    for name, tag in made.items():
        if name == "shell":
            corners = [at["foam", 0], at["shell", 0], at["shell", SADDLE], at["foam", SADDLE]]
            geo.mesh.setTransfiniteSurface(tag, "Left", corners)
        elif name != "foot":
            geo.mesh.setTransfiniteSurface(tag)
        if name != "foot":  # the foot stays in triangles, which become wedges
            geo.mesh.setRecombine(2, tag)
    return made


def drawn_out(surfaces, length, layers):
    """Draw surfaces out along z; return {name: (far surface, volume)}."""
    heights = [(i + 1) / layers for i in range(layers)]
    made = {}
    for name, tag in surfaces.items():
        out = gmsh.model.geo.extrude(
            [(2, tag)], 0, 0, length, numElements=[1] * layers, heights=heights, recombine=True
        )
        made[name] = out[0][1], out[1][1]
    return made


def name_groups(near, far):
    """Name the solids and the outer faces."""
    solids = {
        "pipe": [near["pipe low"], near["pipe high"], far["pipe low"], far["pipe high"]],
        "foam": [near["foam high"], far["foam low"], far["foam high"]],
        "block": [near["foam low"]],
        "saddle": [near["shell"], near["web"], near["foot"]],
    }
    for name, members in solids.items():
        gmsh.model.addPhysicalGroup(3, [volume for _, volume in members], name=name)
    volumes = [volume for members in solids.values() for _, volume in members]
    outer = gmsh.model.getBoundary([(3, volume) for volume in volumes], combined=True, oriented=False)
    groups = {"bore": [], "surface": [], "foot": [], "cuts": []}
    for _, tag in outer:
        x0, y0, z0, x1, y1, z1 = gmsh.model.getBoundingBox(2, tag)
        radius = max(math.hypot(*gmsh.model.getValue(0, abs(p), [])[:2]) for _, p in corners_of(tag))
        flat_cut = x1 < 1e-3 or z1 < 1e-3 or z0 > HIGH - 1e-3
        if flat_cut:
            groups["cuts"].append(tag)
        elif abs(radius - BORE) < 1e-3:
            groups["bore"].append(tag)
        else:
            groups["foot" if y1 < FOOT + 1e-3 else "surface"].append(tag)
    for name, members in groups.items():
        gmsh.model.addPhysicalGroup(2, members, name=name)


def corners_of(surface):
    return gmsh.model.getBoundary([(2, surface)], combined=False, oriented=False, recursive=True)


def main(output):
    gmsh.initialize()
    gmsh.option.setNumber("General.Terminal", 0)
    gmsh.option.setNumber("Mesh.MeshSizeMax", 14)
    gmsh.model.add("pipe saddle")
    near = drawn_out(section(), LOW, 4)
    pipe_and_foam = {name: tag for name, (tag, _) in near.items() if name.startswith(("pipe", "foam"))}
    far = drawn_out(pipe_and_foam, HIGH - LOW, 5)
    gmsh.model.geo.synchronize()
    name_groups(near, far)
    gmsh.model.mesh.generate(3)
    gmsh.write(str(output))
    gmsh.finalize()


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_suffix(".msh"))
