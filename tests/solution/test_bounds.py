"""Two-sided bounds hold on every mesh, and a broken proof is noticed."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from bound_models import INDEPENDENT, MODELS
from brick_models import bricks, independent_flows, prove_on, solved_on

from coldseam import study
from coldseam.case import read
from coldseam.errors import SolveError
from coldseam.solution import bounds as bounds_module
from coldseam.solution import linear
from coldseam.solution.bounds import bounds_of, check_gap, facet_fields, local_gap, prove
from coldseam.solution.linear import MultigridSolver, facet_hierarchy, node_hierarchy
from coldseam.solution.respond import respond
from coldseam.volumes.facets import facet_system

PUBLISHED = Path(__file__).parents[1] / "published"
MESHES = {
    2: [dict(per_metre=n) for n in (1, 2, 4, 8)]
    + [dict(per_metre=2, refined=3, seed=1), dict(per_metre=4, refined=2, seed=2)],
    3: [dict(per_metre=2), dict(per_metre=4)]
    + [dict(per_metre=2, refined=n, seed=n) for n in (1, 2, 4)]
    + [dict(per_metre=4, refined=1, seed=9)],
}
"""Six meshes a model: uniform ones, and crooked ones with random bisections."""

STRICT = [name for name, known in MODELS.items() if not (known.model.axisymmetric and any(known.model.source))]


def reading(model, terminal: int) -> np.ndarray:
    """Return the vector that reads a terminal's heat flow."""
    return np.eye(len(model.state))[terminal]


def gap_of(proof, state) -> np.ndarray:
    """Return the cells' parts of the gap of a state."""
    return local_gap(proof.mesh, proof.given, proof.weights, proof.nodes, proof.bounds, state)


@pytest.mark.parametrize("name", MODELS)
def test_bounds_hold_on_every_mesh(name):
    known = MODELS[name]
    doubt = known.doubt * max(map(abs, known.flows))
    widths = []
    for mesh in MESHES[known.model.dim]:
        proof = prove_on(known.model, bricks(known.model, **mesh))
        for terminal, flow in enumerate(known.flows):
            low, high = proof.bounds.interval(reading(known.model, terminal), known.model.state)
            assert low - doubt <= flow <= high + doubt, f"{mesh}: {flow} outside {low} ... {high}"
        widths.append((high - low) / max(map(abs, known.flows)))
        check_gap(gap_of(proof, known.model.state), proof.bounds, known.model.state)
    assert widths[MESHES[known.model.dim].index(dict(per_metre=4))] <= 0.6 * max(widths), "finer meshes prove more"


@pytest.mark.parametrize("name", ["edge with films", "edge with sheet", "ring", "three spaces", "bolt with contact"])
def test_the_energies_themselves_are_ordered(name):
    """low <= Lambda <= high for every state, not only for the one at hand: no negative eigenvalue of high - low."""
    model = MODELS[name].model
    for mesh in MESHES[model.dim][:3]:
        proof = prove_on(model, bricks(model, **mesh))
        assert np.linalg.eigvalsh(proof.bounds.high - proof.bounds.low).min() >= 0.0


@pytest.mark.slow
@pytest.mark.parametrize("name", [name for name, known in MODELS.items() if known.why == INDEPENDENT])
def test_best_known_flows(name):
    """The documented flows again, by Richardson extrapolation of scikit-fem's solutions with quadratic elements."""
    known = MODELS[name]
    first, second, third = (independent_flows(known.model, known.finest // n) for n in (4, 2, 1))
    ratio = np.abs(second - first).max() / np.abs(third - second).max()
    best = (third + (third - second) / (ratio - 1.0))[: len(known.flows)]
    assert ratio > 2.0
    assert np.abs(best - known.flows).max() <= known.doubt * np.abs(known.flows).max()


@pytest.mark.parametrize("name", ["edge with films", "edge with sheet", "contact", "ring", "bolt"])
@pytest.mark.parametrize("size", [1e-3, 1e-2])
def test_a_flux_that_does_not_balance_is_refused(name, size):
    """Facet values off by a thousandth: fluxes no longer balance, and the identity of Prager and Synge breaks."""
    model = MODELS[name].model
    proof = prove_on(model, bricks(model, 4))
    response = proof.bounds.response
    noise = 1.0 + size * np.random.default_rng(0).standard_normal(response.fields.shape)
    wrong = replace(response, fields=np.where(response.network.free[:, None], response.fields * noise, response.fields))
    broken = replace(proof, bounds=bounds_of(proof.mesh, proof.given, proof.bounds.facets, proof.nodes, wrong))
    with pytest.raises(SolveError, match="does not close"):
        check_gap(gap_of(broken, model.state), broken.bounds, model.state)


@pytest.mark.parametrize("name", ["edge with films", "ring"])
def test_a_wrong_conductance_in_one_network_is_refused(monkeypatch, name):
    model = MODELS[name].model
    honest = bounds_module.facet_system

    def wrong(mesh, given, weights):
        return honest(mesh, replace(given, conductivity=1.01 * given.conductivity), weights)

    monkeypatch.setattr(bounds_module, "facet_system", wrong)
    proof = prove_on(model, bricks(model, 4))
    with pytest.raises(SolveError, match="does not close"):
        check_gap(gap_of(proof, model.state), proof.bounds, model.state)


def loosely_proven(model, grid, tolerance: float):
    """Return (proof pieces, facet response) with the facet network solved by multigrid to a loose tolerance."""
    mesh, given, weights, nodes = solved_on(model, grid)
    system = facet_system(mesh, given, weights)
    free, free_nodes = system.network.free, nodes.network.free
    matrix = system.network.matrix[free][:, free]
    coarse = node_hierarchy(nodes.network.matrix[free_nodes][:, free_nodes])
    hierarchy = facet_hierarchy(matrix, system.from_nodes[free][:, free_nodes], coarse)
    response = respond(system.network, mesh.dim, tolerance, MultigridSolver(matrix, hierarchy))
    return mesh, given, weights, nodes, system, response


@pytest.mark.parametrize("name", ["edge with films", "corner", "bolt"])
def test_a_loose_solve_that_owns_up_only_widens_the_interval(name):
    known = MODELS[name]
    mesh, given, weights, nodes, system, response = loosely_proven(known.model, bricks(known.model, 4), 1e-3)
    assert response.error_energy.max() > 0
    proven = bounds_of(mesh, given, system, nodes, response)
    tight = prove(mesh, given, weights, nodes)
    assert np.linalg.eigvalsh(tight.low + 1e-9 * np.eye(len(tight.low)) - proven.low).min() >= 0.0, "low must not rise"
    low, high = proven.interval(reading(known.model, 1), known.model.state)
    doubt = known.doubt * max(map(abs, known.flows))
    assert low - doubt <= known.flows[1] <= high + doubt


@pytest.mark.parametrize("name", ["edge with films", "corner", "bolt"])
def test_a_loose_solve_that_claims_to_be_tight_is_refused(name):
    model = MODELS[name].model
    mesh, given, weights, nodes, system, response = loosely_proven(model, bricks(model, 4), 1e-2)
    claimed = replace(response, error_energy=np.zeros_like(response.error_energy))
    proven = bounds_of(mesh, given, system, nodes, claimed)
    with pytest.raises(SolveError, match="does not close"):
        check_gap(local_gap(mesh, given, weights, nodes, proven, model.state), proven, model.state)


def test_proof_builds_one_hierarchy_and_no_second(monkeypatch):
    """A work budget: three unit fields on nodes and facets of a solid share the nodes' one hierarchy."""
    model = MODELS["corner with source and flux"].model
    built, factored = [], []
    honest, split = linear.node_hierarchy, linear.splu

    def counted(matrix, *uneven):
        built.append(matrix.shape[0])
        return honest(matrix, *uneven)

    for module in (linear, bounds_module, __import__("coldseam.solution.respond", fromlist=["respond"])):
        monkeypatch.setattr(
            module, "node_hierarchy", lambda m, *u: built.append(m.shape[0]) or honest(m, *u), raising=False
        )
    monkeypatch.setattr(linear, "splu", lambda *a, **k: factored.append(a[0].shape[0]) or split(*a, **k))
    for module in (linear, bounds_module, __import__("coldseam.solution.respond", fromlist=["respond"])):
        monkeypatch.setattr(module, "DIRECT_LIMIT", {2: 100, 3: 100}, raising=False)
    proof = prove_on(model, bricks(model, 6))
    assert len(built) == 1 and built[0] == int(proof.nodes.network.free.sum())
    assert max(factored) <= 200, "only the coarsest level is factorised"
    assert len(proof.nodes.iterations) == len(model.films), "the last terminal's field costs no solve"
    assert max(proof.nodes.iterations) <= 30 and max(proof.bounds.response.iterations) <= 30


def test_small_sections_are_factorised_once_a_network(monkeypatch):
    factored, split = [], linear.splu
    monkeypatch.setattr(linear, "splu", lambda *a, **k: factored.append(a[0].shape[0]) or split(*a, **k))
    model = MODELS["three spaces"].model
    proof = prove_on(model, bricks(model, 4))
    assert factored == [proof.nodes.network.free.sum(), proof.bounds.response.network.free.sum()]


def test_the_facets_tell_the_nodes_a_layered_wall_exactly():
    """Piecewise linear: both networks hold it to rounding, and the jump of the conductivity (1 to 5) blurs no interface."""
    steady = study.run(read.load(PUBLISHED / "two-layers.toml")).solution.steady
    told = steady.reference + facet_fields(steady.mesh, steady.given, steady.bounds) @ steady.state
    assert told == pytest.approx(steady.temperature, abs=1e-6)


def test_read_temperatures_are_the_mean_of_both_networks_and_nearer():
    """ISO 10211 case 4: the bar's cold end, published 0.805 °C; the nodes alone come from below, the facets from above."""
    case = read.replace(read.load(PUBLISHED / "iso10211-case-4.toml"), "model.accuracy", 0.02)
    steady = study.run(case).solution.steady
    end = int(np.argmax(np.where(np.isclose(steady.mesh.points[:, 2], 0.0), steady.temperature, -np.inf)))
    facets = steady.reference + (facet_fields(steady.mesh, steady.given, steady.bounds) @ steady.state)[end]
    assert steady.temperature[end] < 0.805 < facets
    assert steady.read_temperature[end] == pytest.approx(0.5 * (steady.temperature[end] + facets))
    assert abs(steady.read_temperature[end] - 0.805) < 0.5 * abs(steady.temperature[end] - 0.805)
