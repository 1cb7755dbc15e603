"""Cautions where a surface can hurt who touches it.

Thresholds from memory: ISO 13732-1 (hot surfaces: 51 °C for one minute's contact with any material, 60 °C and more
for seconds with bare metal), ISO 13732-3 (cold surfaces: metal below about -20 °C numbs and freezes fast to moist skin
within seconds). They are told where the case's films or materials depend on temperatures, that is where such surfaces
are what the case is about, and for surfaces that face a space.
"""

from __future__ import annotations

import numpy as np

from coldseam.solution.steady import Steady

HOT_MINUTE, HOT_SECONDS = 51.0, 60.0
COLD = -20.0
"""°C."""
ASK = "Local rules and the standard decide what guards and signs are needed; this is no assessment of safety."


def cautions(steady: Steady) -> list[str]:
    """Return a caution for every boundary facing a space that is hot or cold enough to burn skin."""
    told = []
    for number, boundary in enumerate(steady.case.boundary):
        if boundary.space is None:
            continue
        values = steady.temperature[np.unique(steady.mesh.facets[steady.facet_boundary == number])]
        hot, cold = float(values.max()), float(values.min())
        if hot >= HOT_MINUTE:
            contact = "seconds on bare metal" if hot >= HOT_SECONDS else "a minute"
            told.append(
                f'caution: boundary "{boundary.name}" reaches {hot:.1f} °C; touching it burns skin within {contact} '
                f"(ISO 13732-1, from memory). {ASK}"
            )
        if cold <= COLD and boundary.space is not None and steady.case.spaces[boundary.space].temperature > COLD:
            told.append(
                f'caution: boundary "{boundary.name}" falls to {cold:.1f} °C beside warmer air; bare metal that cold '
                f"injures skin on contact (ISO 13732-3, from memory). {ASK}"
            )
    return told
