"""How far a run over time can be trusted: an estimate, for the proof of the heat flows is of steady states.

The mesh is the one whose steady heat flows, at the largest temperature differences, are proven to a part of themselves; near
surfaces it follows the diffusion length of the recording interval, inside the accuracy asked (``solution/timemesh.py``).
What it leaves in error is estimated as

    share = max(accuracy asked, accuracy reached) max(relaxed, 1)²

of the temperatures' range, of a heat, and of the time at which something happens: errors fall as h², and ``relaxed`` is by
how much sizes had to be let out. Beside it stands what the steps may be off. Slab, cylinder, sphere, brick and half-space
lie within it (tests/published).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from coldseam.solution.spaces import outside_range
from coldseam.solution.transient import History

BASIS = (
    "an estimate from the mesh and the steps, not a proof: the proof of the heat flows is of steady states at the "
    "largest temperature differences"
)


def accuracy_over_time(history: History, steady: dict[str, Any], relaxed: float) -> dict[str, Any]:
    """Return what answers.json says under ``accuracy``: that of the steady refinement, and ``over_time``.

    Parameters
    ----------
    history
        The finished run.
    steady
        From :func:`coldseam.answers.build.accuracy_answer`, of the steady refinement.
    relaxed
        By what factor sizes near surfaces had to be let out.
    """
    share = max(steady["asked"], steady["reached"] or 0.0) * max(relaxed, 1.0) ** 2
    low, high = outside_range(history.system.case)
    read = history.rows[:, [n for n, column in enumerate(history.columns) if column.unit == "degC"]]
    span = float(max(high, read.max(initial=high)) - min(low, read.min(initial=low)))
    return steady | {
        "over_time": {
            "kind": "estimate",
            "basis": BASIS,
            "share": share,
            "temperature": share * span + history.tolerance,
            "temperature_from_mesh": share * span,
            "temperature_from_steps": history.tolerance,
        }
    }


def event_error(time: float | None, of_step: float | None, share: float) -> float | None:
    """Return how uncertain the time of an event (s) is: the steps' part and the mesh's; None where it is not known.

    >>> event_error(3600.0, 4.0, 0.01)
    40.0
    """
    if time is None or of_step is None or not np.isfinite(of_step):
        return None
    return of_step + share * time
