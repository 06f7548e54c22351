"""Hyperedges to weighted graphs: cliques, stars and their Laplacians."""

from netpart.expand.clique import MAX_PAIRS, WEIGHTINGS, CliqueGraph, Weighting, incidence, pair_weights
from netpart.expand.laplacian import area_weighted_laplacian, inverse_root, laplacian, normalized_laplacian
from netpart.expand.star import StarGraph

__all__ = [
    "MAX_PAIRS",
    "WEIGHTINGS",
    "CliqueGraph",
    "StarGraph",
    "Weighting",
    "area_weighted_laplacian",
    "incidence",
    "inverse_root",
    "laplacian",
    "normalized_laplacian",
    "pair_weights",
]
