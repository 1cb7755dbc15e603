"""Film coefficients by name, from the mean temperature of a surface and that of the fluid.

The correlations are those of the ``ht`` library where it has them; fluid properties at the mean of surface and
fluid temperature (ducts and tube banks: of the fluid). One film holds for a whole boundary.

- vertical, inclined surfaces: Churchill, Chu 1975, Int. J. Heat Mass Transfer 18, 1323 (the form for all Ra; inclined
  with g cos(tilt): Incropera, section 9.6.2)
- level surfaces: McAdams 1954, Heat Transmission: 0.54 Ra^(1/4), 0.15 Ra^(1/3) where the air tumbles, 0.27 Ra^(1/4)
  where it lies still; the length is area over perimeter (Goldstein 1973)
- horizontal cylinders: Churchill, Chu 1975, ibid. 1049; vertical ones: Popiel 2008 where they are slender
- spheres: Churchill 2002; inside of a box: its six faces by the above, weighted by area (composition: own)
- plate along a flow: 0.664 Re^(1/2) Pr^(1/3), above Re = 5e5 (0.037 Re^0.8 - 871) Pr^(1/3) (Incropera, section 7.2)
- cylinder across a flow: Churchill, Bernstein 1977; sphere in a flow: Whitaker 1972, AIChE Journal 18, 361
- tube banks: Žukauskas 1987; ducts: 3.66, or Gnielinski 1976
- mixed: Nu^n = Nu_forced^n ± Nu_free^n, n = 3; across 7/2, cylinders and spheres 4 (Incropera, section 9.9); of a sphere
  what both are above the 2 of still air
- standard: convective part of ISO 6946 (5.0, 2.5, 0.7 inside; 4 + 4 v outside)

A correlation that jumps where its regime changes is bridged by a straight line in the logarithms over ±10 % of that
place, so that a solution exists there.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from coldseam.physics.fluids import Properties

if TYPE_CHECKING:
    from coldseam.case.films import Convection

GRAVITY = 9.80665
LEAST_DIFFERENCE = 0.01
"""K: below it the buoyancy of this difference is taken, so that a film is never nothing."""
PLATE_TRANSITION = 5e5
DUCT_TRANSITION = 2300.0
LEVEL_TRANSITION = 1e7
JUMP = 0.10
STANDARD_INSIDE = {"up": 5.0, "horizontal": 2.5, "down": 0.7}
"""W/(m² K)."""


@dataclass(frozen=True, kw_only=True)
class Film:
    """A film coefficient and what it was made of.

    Parameters
    ----------
    h
        Convective film coefficient, W/(m² K).
    correlation
        Its name and source.
    number, value
        The number it depends on ("Ra" or "Re"; "" for a plain value) and its value.
    nusselt
        Nusselt number.
    length
        Characteristic length, m.
    valid
        Range of validity of the number.
    temperature
        At which the properties were taken, °C.
    parts_valid
        Whether the other correlations that it is made of are in their ranges.
    """

    h: float
    correlation: str
    number: str = ""
    value: float | None = None
    nusselt: float | None = None
    length: float | None = None
    valid: tuple[float, float] | None = None
    temperature: float | None = None
    parts_valid: bool = True

    @property
    def in_range(self) -> bool:
        """Whether the number lies in the correlation's range, and those of its parts in theirs."""
        if self.valid is None or self.value is None:
            return self.parts_valid
        return self.parts_valid and self.valid[0] <= self.value <= self.valid[1]


def film(law: Convection, surface: float, outside: float, properties: Callable[[float], Properties]) -> Film:
    """Return the film of a surface.

    Parameters
    ----------
    law
        The convection of a case.
    surface, outside
        Mean temperature of the surface and temperature of the fluid, °C.
    properties
        Returns the fluid's properties at a temperature in °C.

    Examples
    --------
    >>> from coldseam.case.films import Convection
    >>> from coldseam.physics.fluids import air
    >>> law = Convection.model_validate({"kind": "free", "surface": "vertical", "length": 2000})
    >>> round(film(law, 5.0, 25.0, air).h, 2)
    3.87
    """
    if law.kind == "standard":
        return _standard(law)
    if law.kind == "free":
        return _box(law, surface, outside, properties) if law.box else _free(law, surface, outside, properties)
    if law.kind == "forced":
        return _forced(law, law.surface, surface, outside, properties)
    return _mixed(law, surface, outside, properties)


def slope(law: Convection, surface: float, outside: float, properties: Callable[[float], Properties]) -> float:
    """Return the change of the film with the surface temperature, W/(m² K²); arguments as of :func:`film`."""
    if law.kind == "standard":
        return 0.0
    step = 0.02 * max(abs(surface - outside), 0.1)
    high, low = (film(law, surface + s, outside, properties).h for s in (step, -step))
    return (high - low) / (2.0 * step)


def _standard(law: Convection) -> Film:
    if law.surface == "outside":
        return Film(h=4.0 + 4.0 * (law.speed or 0.0), correlation="ISO 6946, outside: 4 + 4 v")
    return Film(h=STANDARD_INSIDE[law.surface], correlation=f"ISO 6946, inside, heat flow {law.surface}")


def _made(h_of: Callable[[float], float], number: str, value: float, length: float, p: Properties, **rest) -> Film:
    nusselt = h_of(value)
    return Film(h=nusselt * p.conductivity / length, number=number, value=value, nusselt=nusselt, length=length, **rest)


def _free(law: Convection, surface: float, outside: float, properties) -> Film:
    import ht

    at = 0.5 * (surface + outside)
    p = properties(at)
    length = law.length or 0.0
    gravity = GRAVITY * math.cos(math.radians(law.tilt or 0.0))
    difference = max(abs(surface - outside), LEAST_DIFFERENCE)
    grashof = gravity * abs(p.expansion) * difference * length**3 / p.kinematic**2
    pr = p.prandtl
    tumbling = (surface > outside) == (law.surface == "facing up")
    of_surface: dict[str, tuple[str, tuple[float, float], Callable[[float], float]]] = {
        "vertical": (
            "Churchill, Chu 1975, vertical plate, all Ra",
            (0.1, 1e12),
            lambda ra: ht.Nu_vertical_plate_Churchill(pr, ra / pr),
        ),
        "horizontal cylinder": (
            "Churchill, Chu 1975, horizontal cylinder",
            (1e-6, 1e12),
            lambda ra: ht.Nu_horizontal_cylinder_Churchill_Chu(pr, ra / pr),
        ),
        "sphere": ("Churchill 2002, sphere", (1e-3, 1e11), lambda ra: ht.Nu_sphere_Churchill(pr, ra / pr)),
        "level": (
            ("McAdams 1954, level, air tumbling", (1e4, 1e11), lambda ra: _level(ra, pr))
            if tumbling
            else ("McAdams 1954, level, air layered", (1e5, 1e10), lambda ra: 0.27 * ra**0.25)
        ),
    }
    of_surface["inclined"] = ("Churchill, Chu 1975 with g cos(tilt)", *of_surface["vertical"][1:])
    slender = law.diameter is not None and law.diameter < 35.0 * length / grashof**0.25
    of_surface["vertical cylinder"] = (
        ("Popiel 2008, slender vertical cylinder", (1e-1, 1e10), lambda ra: _slender(pr, ra / pr, length, law.diameter))
        if slender
        else of_surface["vertical"]
    )
    key = "level" if law.surface in ("facing up", "facing down") else law.surface
    name, valid, nusselt = of_surface[key]
    return _made(nusselt, "Ra", grashof * pr, length, p, correlation=name, valid=valid, temperature=at)


def _slender(pr: float, grashof: float, length: float, diameter: float | None) -> float:
    import ht

    assert diameter is not None
    return ht.Nu_vertical_cylinder_Popiel_Churchill(pr, grashof, length, diameter)


def _level(ra: float, pr: float) -> float:
    import ht

    return _bridged(lambda x: ht.Nu_horizontal_plate_McAdams(pr, x / pr, buoyancy=True), ra, LEVEL_TRANSITION)


def _bridged(function: Callable[[float], float], x: float, jump: float) -> float:
    """Return f(x), joined straight in the logarithms over ±10 % of a place where it jumps."""
    low, high = jump * (1.0 - JUMP), jump * (1.0 + JUMP)
    if not low < x < high:
        return function(x)
    part = math.log(x / low) / math.log(high / low)
    return math.exp((1.0 - part) * math.log(function(low)) + part * math.log(function(high)))


def _box(law: Convection, surface: float, outside: float, properties) -> Film:
    """Return the film inside a box: walls, floor and ceiling weighted by their areas."""
    width, depth, height = law.box or (0.0, 0.0, 0.0)
    level = width * depth / (2.0 * (width + depth))
    parts = [
        (2.0 * (width + depth) * height, _free(_as(law, "vertical", height), surface, outside, properties)),
        (width * depth, _free(_as(law, "facing up", level), surface, outside, properties)),
        (width * depth, _free(_as(law, "facing down", level), surface, outside, properties)),
    ]
    h = sum(area * part.h for area, part in parts) / sum(area for area, _ in parts)
    walls = parts[0][1]
    return Film(
        h=h,
        correlation="walls (whose numbers these are), floor and ceiling by area; as vertical and level surfaces",
        number="Ra",
        value=walls.value,
        nusselt=walls.nusselt,
        length=height,
        valid=walls.valid,
        temperature=walls.temperature,
        parts_valid=all(part.in_range for _, part in parts),
    )


def _as(law: Convection, surface: str, length: float) -> Convection:
    return law.model_copy(update={"surface": surface, "length": length, "box": None})


def _forced(law: Convection, kind: str, surface: float, outside: float, properties) -> Film:
    import ht

    at = outside if kind in ("duct", "tube bank", "sphere") else 0.5 * (surface + outside)
    p = properties(at)
    length, pr = law.length or 0.0, p.prandtl
    reynolds = (law.speed or 0.0) * length / p.kinematic
    if kind == "plate":
        name = "laminar plate" if reynolds < PLATE_TRANSITION else "plate, laminar then turbulent"
        valid = (1e3, 1e8)
        return _made(
            lambda re: _plate(re, pr), "Re", reynolds, length, p, correlation=name, valid=valid, temperature=at
        )
    if kind == "cylinder":
        name, valid = "Churchill, Bernstein 1977, cylinder across a flow", (0.2 / pr, 1e7)
        return _made(
            lambda re: ht.Nu_cylinder_Churchill_Bernstein(re, pr), "Re", reynolds, length, p,
            correlation=name, valid=valid, temperature=at,
        )  # fmt: skip
    if kind == "sphere":
        thinner = (p.viscosity / properties(surface).viscosity) ** 0.25
        return _made(
            lambda re: 2.0 + (0.4 * re**0.5 + 0.06 * re ** (2.0 / 3.0)) * pr**0.4 * thinner, "Re", reynolds, length, p,
            correlation="Whitaker 1972, sphere in a flow", valid=(3.5, 7.6e4), temperature=at,
        )  # fmt: skip
    if kind == "tube bank":
        assert law.pitch is not None and law.rows is not None
        (along, across), rows = law.pitch, law.rows
        name, valid = "Žukauskas 1987, tube bank (speed in the narrowest place)", (40.0, 1e6)
        return _made(
            lambda re: ht.Nu_Zukauskas_Bejan(re, pr, rows, along, across), "Re", reynolds, length, p,
            correlation=name, valid=valid, temperature=at,
        )  # fmt: skip
    turbulent = reynolds >= DUCT_TRANSITION
    name, valid = (
        ("Gnielinski 1976, smooth duct", (3000.0, 5e6))
        if turbulent
        else ("laminar duct, fully developed", (0.0, 2300.0))
    )
    return _made(
        lambda re: _bridged(lambda x: _duct(x, pr), re, DUCT_TRANSITION), "Re", reynolds, length, p,
        correlation=name, valid=valid, temperature=at,
    )  # fmt: skip


def _plate(re: float, pr: float) -> float:
    import ht

    if re <= 0.0:
        return 0.0
    if re < PLATE_TRANSITION:
        return ht.Nu_horizontal_plate_laminar_Baehr(re, pr)
    return (0.037 * re**0.8 - 871.0) * pr ** (1.0 / 3.0)


def _duct(re: float, pr: float) -> float:
    import ht

    if re < DUCT_TRANSITION:
        return ht.laminar_T_const()
    return ht.turbulent_Gnielinski(re, pr, fd=(0.79 * math.log(re) - 1.64) ** -2)


def _mixed(law: Convection, surface: float, outside: float, properties) -> Film:
    free = _free(law, surface, outside, properties)
    kind = {"horizontal cylinder": "cylinder", "sphere": "sphere"}.get(law.surface, "plate")
    forced = _forced(law, kind, surface, outside, properties)
    power = 3.0 if law.mixing != "across" else 3.5 if kind == "plate" else 4.0
    still = 2.0 if kind == "sphere" else 0.0
    sign = -1.0 if law.mixing == "opposing" else 1.0
    assert free.nusselt is not None and forced.nusselt is not None and free.length is not None
    # The two take their conductivities at different temperatures: as numbers of the free one's.
    other = forced.h * free.nusselt / free.h
    parts = max(other - still, 0.0) ** power + sign * max(free.nusselt - still, 0.0) ** power
    nusselt = still + abs(parts) ** (1.0 / power)
    prandtl = properties(0.5 * (surface + outside)).prandtl
    richardson = (free.value or 0.0) / prandtl / max(forced.value or 0.0, 1e-9) ** 2
    return Film(
        h=max(nusselt, 1.0) * free.h / free.nusselt,
        correlation=f"mixed, {law.mixing}: {free.correlation}; {forced.correlation} (Gr/Re² {richardson:.3g})",
        number="Ra",
        value=free.value,
        nusselt=nusselt,
        length=free.length,
        valid=free.valid,
        temperature=free.temperature,
        parts_valid=forced.in_range or not law.speed,
    )
