"""Compiling the kernels: whether they are cached, and a run on a small netlist that needs all of them."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from netpart.netlist import Netlist, Rules
from netpart.refine import kernels
from netpart.solve.journal import Journal
from netpart.solve.settings import Settings
from netpart.solve.split import split

__all__ = ["kernels_are_cached", "warm_up"]

_NUM_CELLS = 600


def kernels_are_cached() -> bool:
    """Whether an earlier run has left its compiled kernels in the cache."""
    cache = getattr(kernels.move_pass, "_cache", None)
    folder = getattr(cache, "cache_path", None)
    return folder is not None and any(Path(folder).glob("kernels.move_pass*.nbi"))


def warm_up(journal: Journal | None = None) -> None:
    """Run every kernel once, so that it is compiled and cached."""
    rng = np.random.default_rng(1)
    cells = (np.repeat(np.arange(_NUM_CELLS), 3) + rng.integers(0, 12, 3 * _NUM_CELLS)) % _NUM_CELLS
    netlist = Netlist.from_arrays(np.arange(0, 3 * _NUM_CELLS + 1, 3), cells, num_cells=_NUM_CELLS, name="warm-up")
    journal = journal or Journal()
    moves = Settings.from_mapping({"starts": 4, "recombinations": 2})
    for blocks, objective, settings in (
        (2, "cut-nets", moves),
        (4, "connectivity", moves),
        (2, "cut-nets", Settings.from_mapping({"method": "swaps", "levels": "one", "starts": 1, "tie_rule": "random"})),
    ):
        with journal.stage("kernels", f"{blocks} blocks, {objective}, {settings.method}"):
            split(netlist, rules=Rules.from_request(blocks), objective=objective, settings=settings, jobs=1)
