"""Builder: collects cells, nets and pins one by one, for readers and for people who write netlists by hand."""

from __future__ import annotations

from array import array
from collections.abc import Iterable

import numpy as np

from netpart.netlist.errors import DuplicateNameError, EmptyNetlistError, NetlistError, UnknownNameError
from netpart.netlist.model import CellFlag, Direction, IgnoredNet, Netlist, Source
from netpart.netlist.names import Names

__all__ = ["Builder"]


class Builder:
    """Collects a netlist; `build` checks the whole and freezes it.

    Examples
    --------
    >>> builder = Builder("pair")
    >>> a, b = builder.add_cell("a"), builder.add_cell("b")
    >>> builder.add_net("ab", [a, b])
    0
    >>> builder.build()
    <Netlist pair: 2 cells, 1 nets, 2 pins>
    """

    def __init__(self, name: str = "") -> None:
        self.name = name
        self._cell_index: dict[str, int] = {}
        self._net_index: dict[str, int] = {}
        self._type_index: dict[str, int] = {"": 0}
        self._module_index: dict[str, int] = {"": 0}
        self._module_parents = array("i", [-1])
        self._cell_types = array("i")
        self._cell_modules = array("i")
        self._cell_flags = array("B")
        self._areas = array("d")
        self._weights = array("d")
        self._pin_nets = array("q")
        self._pin_cells = array("q")
        self._pin_directions = array("B")
        self.ignored_nets: list[IgnoredNet] = []
        self.sources: list[Source] = []
        self.notes: list[str] = []

    def add_module(self, path: str, parent: str = "") -> int:
        """Add a module instance below an instance that stands already (the top has the path ``""``)."""
        if path in self._module_index:
            raise DuplicateNameError(f"module instance {path!r} is defined twice")
        if parent not in self._module_index:
            raise UnknownNameError(f"unknown module instance {parent!r}")
        self._module_index[path] = index = len(self._module_index)
        self._module_parents.append(self._module_index[parent])
        return index

    def add_cell(self, name: str, type: str = "", area: float = 1.0, flags: CellFlag | int = 0, module: int = 0) -> int:
        """Add a cell and return its index; `module` is what `add_module` returned, 0 for the top."""
        index = len(self._cell_types)
        if self._cell_index.setdefault(name, index) != index:
            raise DuplicateNameError(f"cell {name!r} is defined twice")
        if not 0 <= module < len(self._module_parents):
            raise NetlistError(f"cell {name!r} stands in module {module}, but there are {len(self._module_parents)}")
        self._cell_types.append(self._type_index.setdefault(type, len(self._type_index)))
        self._cell_modules.append(module)
        self._cell_flags.append(int(flags))
        self._areas.append(area)
        return index

    def add_net(self, name: str, cells: Iterable[int | str] = (), weight: float = 1.0) -> int:
        """Add a net, with its cells by index or name where they are known already, and return its index."""
        index = len(self._weights)
        if self._net_index.setdefault(name, index) != index:
            raise DuplicateNameError(f"net {name!r} is defined twice")
        self._weights.append(weight)
        for cell in cells:
            self.add_pin(index, cell)
        return index

    def add_pin(self, net: int | str, cell: int | str, direction: Direction | int = 0) -> None:
        """Join a cell to a net.

        Raises
        ------
        UnknownNameError
            If a name or index is not there yet.
        """
        net_index = self._net_index.get(net, -1) if isinstance(net, str) else net
        cell_index = self._cell_index.get(cell, -1) if isinstance(cell, str) else cell
        if not 0 <= net_index < len(self._weights):
            raise UnknownNameError(f"unknown net {net!r}")
        if not 0 <= cell_index < len(self._cell_types):
            raise UnknownNameError(f"unknown cell {cell!r}")
        self._pin_nets.append(net_index)
        self._pin_cells.append(cell_index)
        self._pin_directions.append(int(direction))

    def build(self) -> Netlist:
        """Check and freeze; the builder may go on to be used.

        Raises
        ------
        NetlistError
            See `Netlist.from_arrays`.
        """
        num_cells, num_nets = len(self._cell_types), len(self._weights)
        if num_cells == 0:
            raise EmptyNetlistError(f"netlist {self.name!r} has no cells")
        nets = np.array(self._pin_nets, dtype=np.int64)
        order = np.argsort(nets, kind="stable")
        offsets = np.zeros(num_nets + 1, dtype=np.int64)
        np.cumsum(np.bincount(nets, minlength=num_nets), out=offsets[1:])
        return Netlist.from_arrays(
            offsets,
            np.array(self._pin_cells, dtype=np.int64)[order],
            num_cells=num_cells,
            areas=np.array(self._areas, dtype=np.float64),
            net_weights=np.array(self._weights, dtype=np.float64),
            cell_names=Names.from_strings(self._cell_index),
            net_names=Names.from_strings(self._net_index),
            cell_types=np.array(self._cell_types, dtype=np.int32),
            type_names=Names.from_strings(self._type_index),
            cell_flags=np.array(self._cell_flags, dtype=np.uint8),
            cell_modules=np.array(self._cell_modules, dtype=np.int32),
            module_names=Names.from_strings(self._module_index),
            module_parents=np.array(self._module_parents, dtype=np.int32),
            pin_directions=np.array(self._pin_directions, dtype=np.uint8)[order],
            name=self.name,
            ignored_nets=tuple(self.ignored_nets),
            sources=tuple(self.sources),
            notes=tuple(self.notes),
        )
