"""The spectral stage as the other stages use it: its figures, its seeds."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import AreaWindow, Netlist
from netpart.solve.journal import Journal
from netpart.spectral import Spectrum, find_spectrum

__all__ = ["describe_spectrum", "sweep_seed"]


def sweep_seed(netlist: Netlist, window: AreaWindow, fixed: NDArray[np.int32]) -> NDArray[np.int32] | None:
    """The sweep's bisection of a (coarse) netlist, or None where its largest connected part is too small for one."""
    spectrum = find_spectrum(netlist)
    if spectrum is None:
        return None
    return spectrum.seed(window, fixed if np.any(fixed >= 0) else None)


def describe_spectrum(netlist: Netlist, journal: Journal) -> tuple[Spectrum | None, dict[str, Any] | None]:
    """The spectrum and its part of a record."""
    with journal.stage("spectrum", "second eigenpair and sweep"):
        spectrum = find_spectrum(netlist)
    if spectrum is None:
        return None, None
    if spectrum.parts:
        journal.warn(
            f"the netlist has {1 + len(spectrum.parts):,} connected parts; λ1 and conductance are those of the largest, "
            f"with {len(spectrum.cells):,} of {netlist.num_cells:,} cells"
        )
    return spectrum, spectrum.to_dict()
