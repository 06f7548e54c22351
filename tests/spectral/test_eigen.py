"""λ1 against closed forms, dense solvers and networkx."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
import scipy.linalg

from netpart.netlist import Netlist, UsageError
from netpart.spectral import find_smallest, second_eigenpair
from tests.expand.graphs import netlist_of
from tests.strategies import make_netlist

CLOSED_FORMS = [
    # F. R. K. Chung, Spectral Graph Theory, 1997, section 1.2, examples 1.1-1.6: eigenvalues of the normalised Laplacian
    ("complete K_n: n/(n − 1)", nx.complete_graph(70), "degree", 70 / 69),
    ("complete bipartite K_a,b: 1", nx.complete_bipartite_graph(31, 41), "degree", 1.0),
    ("star S_n: 1", nx.star_graph(79), "degree", 1.0),
    ("path P_n: 1 − cos(π/(n − 1))", nx.path_graph(90), "degree", 1 - np.cos(np.pi / 89)),
    ("cycle C_n: 1 − cos(2π/n)", nx.cycle_graph(75), "degree", 1 - np.cos(2 * np.pi / 75)),
    ("hypercube Q_d: 2/d", nx.hypercube_graph(7), "degree", 2 / 7),
    # A. E. Brouwer and W. H. Haemers, Spectra of Graphs, 2012, sections 1.4 and 12.5: eigenvalues of L = D − A
    ("complete K_n: n", nx.complete_graph(70), "area", 70.0),
    ("complete bipartite K_a,b: min(a, b)", nx.complete_bipartite_graph(31, 41), "area", 31.0),
    ("path P_n: 2 − 2 cos(π/n)", nx.path_graph(90), "area", 2 - 2 * np.cos(np.pi / 90)),
    ("cycle C_n: 2 − 2 cos(2π/n)", nx.cycle_graph(75), "area", 2 - 2 * np.cos(2 * np.pi / 75)),
    ("hypercube Q_d: 2", nx.hypercube_graph(7), "area", 2.0),
    ("grid m × n: 2 − 2 cos(π/max)", nx.grid_2d_graph(9, 14), "area", 2 - 2 * np.cos(np.pi / 14)),
    ("Petersen graph: 3 − 1", nx.petersen_graph(), "area", 2.0),
    ("Petersen graph, 3-regular: 2/3", nx.petersen_graph(), "degree", 2 / 3),
]


@pytest.mark.parametrize(("name", "graph", "mass", "expected"), CLOSED_FORMS, ids=[entry[0] for entry in CLOSED_FORMS])
def test_closed_forms(name: str, graph: nx.Graph, mass: str, expected: float) -> None:
    pair = second_eigenpair(netlist_of(graph), mass=mass, tolerance=1e-8)
    assert pair.converged
    assert pair.value == pytest.approx(expected, rel=1e-9)


def test_zacharys_club_has_the_spectrum_that_networkx_finds() -> None:
    club = nx.karate_club_graph()
    netlist = netlist_of(club)
    assert second_eigenpair(netlist).value == pytest.approx(nx.normalized_laplacian_spectrum(club)[1], rel=1e-12)
    assert second_eigenpair(netlist, mass="area").value == pytest.approx(nx.laplacian_spectrum(club)[1], rel=1e-12)


def random_netlist(seed: int, num_cells: int, areas: bool = False) -> Netlist:
    rng = np.random.default_rng(seed)
    chain = [[i, i + 1] for i in range(num_cells - 1)]
    nets = [rng.choice(num_cells, int(rng.integers(2, 12)), replace=False).tolist() for _ in range(num_cells // 2)]
    values = rng.uniform(0.5, 4.0, num_cells).tolist() if areas else None
    return make_netlist(chain + nets, num_cells, areas=values, weights=rng.uniform(0.2, 5, len(chain) + len(nets)).tolist())


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("num_cells", [40, 150])
@pytest.mark.parametrize("mass", ["degree", "area"])
def test_random_netlists_match_a_dense_solver(seed: int, num_cells: int, mass: str) -> None:
    netlist = random_netlist(seed, num_cells, areas=True)
    adjacency = np.zeros((num_cells, num_cells))
    for net in range(netlist.num_nets):
        cells = netlist.cells_of(net)
        adjacency[np.ix_(cells, cells)] += netlist.net_weights[net] / (len(cells) - 1)
    np.fill_diagonal(adjacency, 0)
    degrees = adjacency.sum(axis=1)
    masses = degrees if mass == "degree" else netlist.areas
    values, vectors = scipy.linalg.eigh(np.diag(degrees) - adjacency, np.diag(masses))
    pair = second_eigenpair(netlist, mass=mass, tolerance=1e-7)
    assert pair.value == pytest.approx(values[1], rel=1e-8)
    assert abs(pair.vector @ (masses * vectors[:, 1])) == pytest.approx(1, abs=1e-6)
    assert pair.vector @ (masses * pair.vector) == pytest.approx(1, abs=1e-10)
    assert pair.vector @ masses == pytest.approx(0, abs=1e-8)
    assert pair.vector[np.argmax(np.abs(pair.vector))] > 0


def test_cells_without_area_hardly_move_the_eigenvalue() -> None:
    """As their mass goes to zero the pencil tends to that of the network with them eliminated; here they have 1 %."""
    inner = nx.path_graph(80)
    netlist = netlist_of(inner)
    nets = [netlist.cells_of(net).tolist() for net in range(netlist.num_nets)] + [[0, 80], [40, 81]]
    with_ports = make_netlist(nets, 82, areas=[1.0] * 80 + [0.0, 0.0])
    bare = second_eigenpair(netlist, mass="area").value
    assert second_eigenpair(with_ports, mass="area").value == pytest.approx(bare, rel=2e-3)


def test_a_netlist_in_two_pieces_has_eigenvalue_zero() -> None:
    nets = [[i, i + 1] for i in range(99) if i != 49]
    assert second_eigenpair(make_netlist(nets, 100)).value == pytest.approx(0, abs=1e-12)


def test_equal_input_gives_equal_bits() -> None:
    netlist = random_netlist(3, 400)
    assert second_eigenpair(netlist).vector.tobytes() == second_eigenpair(netlist).vector.tobytes()


def test_unconverged_results_say_so() -> None:
    pair = second_eigenpair(netlist_of(nx.path_graph(2000)), max_steps=40)
    assert not pair.converged
    assert pair.residual > 1e-4 * pair.value


def test_unknown_mass_is_refused() -> None:
    with pytest.raises(UsageError, match="mass"):
        second_eigenpair(make_netlist([[0, 1]], 2), mass="volume")


def test_lanczos_on_a_diagonal_matrix_with_a_known_null_vector() -> None:
    diagonal = np.concatenate([[0.0], np.linspace(0.25, 9.0, 199)])
    kernel = np.eye(200)[0]
    start = np.cos(np.arange(200.0))
    value, vector, residual, converged = find_smallest(lambda x: diagonal * x, kernel, start, tolerance=1e-8)
    assert converged
    assert value == pytest.approx(0.25, rel=1e-12)
    assert abs(vector[1]) == pytest.approx(1.0, abs=1e-6)
    assert residual < 1e-7


def test_lanczos_stops_where_the_space_is_exhausted() -> None:
    """Two distinct eigenvalues besides the null vector: two steps span everything there is."""
    diagonal = np.array([0.0] + [1.0] * 60 + [3.0] * 60)
    value, _, residual, converged = find_smallest(lambda x: diagonal * x, np.eye(121)[0], np.ones(121))
    assert converged
    assert value == pytest.approx(1.0, rel=1e-12)
    assert residual < 1e-10
