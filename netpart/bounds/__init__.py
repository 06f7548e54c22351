"""Lower bounds on the cost of every legal partition, and the proofs that they hold."""

from netpart.bounds.bound import Bound, next_attainable
from netpart.bounds.certificate import Certificate, CertificateError, dump_certificates, load_certificates
from netpart.bounds.diagonal import DiagonalResult, check_diagonal, diagonal_bound
from netpart.bounds.eigenproof import StarMatrix, verify_eigenvalue
from netpart.bounds.spectral import spectral_bound
from netpart.bounds.spreading import SpreadingResult, spreading_bound
from netpart.bounds.verify import SpreadingProof, check_spreading

__all__ = [
    "Bound",
    "Certificate",
    "CertificateError",
    "DiagonalResult",
    "SpreadingProof",
    "SpreadingResult",
    "StarMatrix",
    "check_diagonal",
    "check_spreading",
    "diagonal_bound",
    "dump_certificates",
    "load_certificates",
    "next_attainable",
    "spectral_bound",
    "spreading_bound",
    "verify_eigenvalue",
]
