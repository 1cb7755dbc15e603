"""Unit fields of a network: they add up, and the heat flows read from them balance."""

import numpy as np
import pytest
from bound_models import MODELS
from brick_models import bricks, solved_on

from coldseam.solution.linear import MultigridSolver, node_hierarchy
from coldseam.solution.respond import respond


@pytest.mark.parametrize("name", ["three spaces", "edge with source", "corner", "bolt with contact"])
def test_fields_of_the_terminals_add_up_to_one(name):
    model = MODELS[name].model
    fields = solved_on(model, bricks(model, 4))[3].fields[:, : len(model.films)]
    assert np.allclose(fields.sum(axis=1), 1.0, rtol=0, atol=1e-12)
    assert fields.min() > -1e-9 and fields.max() < 1.0 + 1e-9, "no temperature outside those around"


@pytest.mark.parametrize("name", ["three spaces", "edge with source", "corner with source and flux"])
def test_flows_of_the_energy_balance(name):
    """What enters at the terminals and what is released in bodies leave nothing over."""
    known = MODELS[name]
    model = known.model
    nodes = solved_on(model, bricks(model, 4))[3]
    flow = nodes.network.energy(nodes.fields) @ model.state
    released = nodes.network.load.sum() if model.has_load else 0.0
    assert flow[: len(model.films)].sum() + released == pytest.approx(0.0, abs=1e-9 * np.abs(flow).max())


def test_a_good_first_guess_saves_iterations_and_changes_nothing():
    model = MODELS["bolt"].model
    network = solved_on(model, bricks(model, 6))[3].network
    solver = MultigridSolver(network.matrix, node_hierarchy(network.matrix))
    cold = respond(network, 3, 1e-12, solver)
    warm = respond(network, 3, 1e-12, solver, lambda: 1.001 * cold.fields)
    assert warm.iterations[0] <= cold.iterations[0] - 3
    assert np.abs(warm.fields - cold.fields).max() < 1e-5
