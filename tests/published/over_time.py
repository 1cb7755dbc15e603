"""The published and exact values over time; see ``references.py``."""

from __future__ import annotations

from collections.abc import Iterator
from math import cos, pi

from scipy.optimize import brentq

from published import exact_over_time as exact
from published.reference import Reference

ASKED = "the accuracy the case asks for, of the temperatures' range"
SERIES = "Carslaw, Jaeger, Conduction of Heat in Solids, 2nd ed. 1959, {}; Incropera, DeWitt, table 5.1"
COOLING = {
    "slab": (exact.slab, "3.11", 0.05 * 0.02),
    "cylinder": (exact.cylinder, "7.7", pi * 0.05**2 * 0.02),
    "sphere-axisymmetric": (exact.sphere, "9.4", 2 / 3 * pi * 0.05**3),
    "sphere-3d": (exact.sphere, "9.4", pi / 6 * 0.05**3),
}
"""Case: series, section, volume in m³ (m³/m)."""
FOURIER = {0.1: 1.0, 1.0: 1.0, 10.0: 0.2}
"""Biot number: Fourier number at the end of the run."""


def _probe(name: str) -> tuple[str, ...]:
    return ("probes", name, "temperature")


def _cooling_down() -> Iterator[Reference]:
    """Slab, cylinder and sphere from 100 °C in air of 0 °C: centre, surface, heat given off."""
    words = {"slab": "Slab", "cylinder": "Cylinder", "sphere-axisymmetric": "Sphere", "sphere-3d": "Sphere, 3D"}
    for stem, (series, section, volume) in COOLING.items():
        for biot, fourier in FOURIER.items():
            same = dict(
                case=f"{stem}-over-time",
                change=(("spaces.air.film", 10 * biot), ("time.duration", 1e4 * fourier)),
                source=SERIES.format(section),
                slow=biot != 1.0,  # tests/solution has all of them on grids
            )
            which = "Bi 1" if biot == 1.0 else "Bi 0.1 and 10"
            share = 0.01 if stem == "sphere-3d" else 0.005
            for name, place in (("centre", 0.0), ("surface", 1.0)):
                yield Reference(
                    title=f"{words[stem]} cooling down, {which}: centre, surface",
                    quantity=_probe(name),
                    value=100 * series(biot, fourier, place),
                    unit="°C",
                    tolerance=100 * share,
                    reason=ASKED,
                    **same,
                )
            if biot == 1.0:
                moment = 1e4 * brentq(lambda f, of=series: of(1.0, f, 0.0) - 0.8, 0.02, 1.0)
                yield Reference(
                    title="Slab, cylinder, spheres cooling down, Bi 1: when the centre is at 80 °C",
                    quantity=("history", "events", "centre at 80 °C", "time"),
                    value=moment,
                    unit="s",
                    tolerance=2 * share * moment,
                    reason="twice the share asked of the temperatures: the centre falls by 1 % of the range in some 2 % of the time",
                    **same,
                )
            yield Reference(
                title=f"{words[stem]} cooling down, {which}: heat given off",
                quantity=("history", "energies", "in"),
                value=-exact.given_off(series, biot, fourier),
                scale=1 / (volume * 2e6 * 100),
                unit="of all",
                tolerance=share,
                reason=ASKED,
                **same,
            )


def _nafems_t3() -> Iterator[Reference]:
    for place, value in ((80, 36.60), (60, exact.nafems_t3(0.06, 32.0))):
        yield Reference(
            title="NAFEMS T3, temperature after 32 s" if place == 80 else "NAFEMS T3, one more temperature",
            case="nafems-t3",
            quantity=_probe(f"at {place} mm"),
            value=value,
            unit="°C",
            tolerance=0.1,
            reason="0.1 % of the range of 100 K; printed to 0.01 K",
            source="NAFEMS TNSB rev. 3, 1990, test T3; exact series, Carslaw, Jaeger 1959, 3.5",
        )


def _half_space() -> Iterator[Reference]:
    concrete = dict(k=1.65, alpha=7.5e-7, h=25.0)
    for name, depth in (("surface", 0.0), ("at 50 mm", 0.05), ("at 100 mm", 0.1)):
        yield Reference(
            title="Half-space with a film, 3 temperatures after 6 h",
            case="half-space-with-film",
            quantity=_probe(name),
            value=20 - 40 * exact.half_space_with_film(depth, 6 * 3600, **concrete),
            unit="°C",
            tolerance=0.005 * 40,
            reason=ASKED,
            source="Carslaw, Jaeger 1959, 2.7",
        )


def _periodic() -> Iterator[Reference]:
    for name, depth in (("at 100 mm", 0.1), ("at 200 mm", 0.2), ("at 450 mm", 0.45)):
        amplitude, lag = exact.periodic(depth, alpha=7.5e-7, period=86400)
        yield Reference(
            title="Daily wave at the surface, 3 depths",
            case="periodic-surface",
            quantity=_probe(name),
            value=10 * amplitude * cos(2 * pi * lag / 86400),
            unit="°C",
            tolerance=0.005 * 20,
            reason=ASKED,
            source="Carslaw, Jaeger 1959, 2.6",
        )


def _brick() -> Iterator[Reference]:
    fouriers = [0.5 / 3.7e6 * 20 * 3600 / half**2 for half in (0.1, 0.15, 0.2)]
    biots = [10 * half / 0.5 for half in (0.1, 0.15, 0.2)]

    def product(*places: float) -> float:
        parts = [exact.slab(b, f, p) for b, f, p in zip(biots, fouriers, places, strict=True)]
        return 100 * parts[0] * parts[1] * parts[2]

    mean = 100.0
    for b, f in zip(biots, fouriers, strict=True):
        mean *= 1 - exact.given_off(exact.slab, b, f)
    values = {"centre": product(0, 0, 0), "face": product(1, 0, 0), "corner": product(1, 1, 1)}
    same = dict(
        title="Brick after 20 h: centre, face, corner, mean",
        case="brick-over-time",
        unit="°C",
        tolerance=0.01 * 100,
        reason=ASKED,
        source="Incropera, DeWitt, section 5.8 (product of three slabs)",
    )
    for name, value in values.items():
        yield Reference(quantity=_probe(name), value=value, **same)
    yield Reference(quantity=("bodies", "brick", "mean_temperature"), value=mean, **same)


def _freezing() -> Iterator[Reference]:
    water = dict(k=2.22, c=2050, rho=1000, latent=333.6e3)
    for stem, axis, time in (("strip", 0, 3600), ("cylinder", 1, 3600), ("3d", 0, 900)):
        front, flux = exact.freezing(10, time, **water)
        same = dict(
            case=f"freezing-{stem}",
            reason="1 %: the front passes node by node",
            source="Neumann's solution, Carslaw, Jaeger 1959, 11.2",
            slow=True,  # some 30 s each; tests/solution/test_melting.py has the same on grids
        )
        yield Reference(
            title="Freezing water, front: strip and axisymmetric after 1 h, 3D after 15 min",
            quantity=("history", "melted", "water", "front", "mean", axis),
            value=1000 * front,
            unit="mm",
            tolerance=0.01 * 1000 * front,
            **same,
        )
        yield Reference(
            title="Freezing water, heat flux: strip and axisymmetric after 1 h, 3D after 15 min",
            quantity=("boundaries", "cold face", "heat_flux_mean"),
            value=-flux,
            unit="W/m²",
            tolerance=0.01 * flux,
            **same,
        )


GROUPS = (_cooling_down, _nafems_t3, _half_space, _periodic, _brick, _freezing)
