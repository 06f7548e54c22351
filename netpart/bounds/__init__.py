"""Lower bounds on the cost of every legal partition, and the proofs that they hold."""

from netpart.bounds.bound import Bound, next_attainable
from netpart.bounds.eigenproof import StarMatrix, verify_eigenvalue
from netpart.bounds.spectral import spectral_bound

__all__ = ["Bound", "StarMatrix", "next_attainable", "spectral_bound", "verify_eigenvalue"]
