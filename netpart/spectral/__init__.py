"""Eigenpairs of netlists' graphs, the sweep cut, conductance and the Cheeger bracket."""

from netpart.spectral.eigen import Eigenpair, second_eigenpair
from netpart.spectral.lanczos import find_smallest
from netpart.spectral.spectrum import Spectrum, find_components, find_spectrum
from netpart.spectral.sweep import Profile, legal_seed, sweep_profile

__all__ = [
    "Eigenpair",
    "Profile",
    "Spectrum",
    "find_components",
    "find_smallest",
    "find_spectrum",
    "legal_seed",
    "second_eigenpair",
    "sweep_profile",
]
