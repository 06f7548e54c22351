"""One Verilog module in numbers of its own: its cells with their pins, its child modules, its assignments."""

from __future__ import annotations

import re
from array import array
from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.formats.library import CellType
from netpart.formats.verilog_grammar import GATES
from netpart.formats.verilog_module import Expression, Module, Vocabulary
from netpart.formats.verilog_nets import CONSTANTS, FIRST_NET, ModuleNets
from netpart.formats.verilog_text import decoded, shown
from netpart.netlist import MAX_PINS, Direction, IndexOverflowError, InputError

__all__ = ["Body", "Child", "Design", "compile_module"]

_DIRECTIONS = {
    "input": Direction.INPUT,
    "output": Direction.OUTPUT,
    "inout": Direction.INOUT,
    None: Direction.UNKNOWN,
}
_BIT = re.compile(r"(.+)\[[0-9]+\]", re.DOTALL)


class Child(NamedTuple):
    """An instance of a module: the local net on each bit of its ports, −1 where nothing is connected."""

    name: str
    module: str
    nets: NDArray[np.int64]


@dataclass(slots=True)
class Body:
    """A module in local numbers, those of its `ModuleNets`.

    Attributes
    ----------
    net_names : list of str
    num_port_bits : int
        The bits of all ports are the nets from `FIRST_NET` on.
    cell_names, cell_types
        One for each cell; types are numbers of the vocabulary.
    pin_nets, pin_cells, pin_directions
        One for each pin, in the order of the file.
    ties : (t, 2) int64
        Pairs of nets that are one.
    supplies : list of (net, supply0 or supply1)
    num_open, num_unequal : int
        Connections to nothing, and those to a port of another width.
    undeclared : list of str
    """

    net_names: list[str]
    num_port_bits: int
    cell_names: list[str]
    cell_types: NDArray[np.int32]
    pin_nets: NDArray[np.int64]
    pin_cells: NDArray[np.int64]
    pin_directions: NDArray[np.uint8]
    ties: NDArray[np.int64]
    supplies: list[tuple[int, str]]
    undeclared: list[str]
    children: list[Child] = field(default_factory=list)
    num_open: int = 0
    num_unequal: int = 0


class Design:
    """What the modules of a design know of one another, and what the library says of the cells.

    Parameters
    ----------
    modules : mapping of name to Module
        Those that are walked into; instances of all other types are cells.
    boxes : mapping of name to Module
        Black boxes, which tell the order and the directions of their ports.
    types, ports : Vocabulary
        Complete: every file has been scanned.
    library : mapping of name to CellType
    """

    def __init__(
        self,
        modules: Mapping[str, Module],
        boxes: Mapping[str, Module],
        types: Vocabulary,
        ports: Vocabulary,
        library: Mapping[str, CellType],
    ) -> None:
        self.modules = modules
        self.boxes = boxes
        self.type_names = [str(name) for name in types.names]
        self.port_names = ports.names
        self.library = library
        self.is_module = np.array([name in modules for name in self.type_names], np.bool_)
        self.is_gate = np.array([name in GATES for name in self.type_names], np.bool_)
        self.drives_many = np.array([name in ("buf", "not") for name in self.type_names], np.bool_)
        self.port_places = np.array([port if isinstance(port, int) else -1 for port in ports.names], np.int64)
        self._directions: dict[tuple[str, str | int], int] = {}
        self._buses: dict[str, dict[str, int]] = {}
        self._layouts: dict[str, tuple[dict[str | int, tuple[int, int]], int]] = {}

    def layout(self, module: Module) -> tuple[dict[str | int, tuple[int, int]], int]:
        """The first bit and the width of each port, by name and by place, and the number of bits of all ports."""
        if module.name not in self._layouts:
            layout: dict[str | int, tuple[int, int]] = {}
            total = 0
            for place, port in enumerate(module.ports):
                bounds = module.nets[port]
                width = 1 if bounds is None else abs(bounds[0] - bounds[1]) + 1
                layout[port] = layout[place] = (total, width)
                total += width
            self._layouts[module.name] = layout, total
        return self._layouts[module.name]

    def find_direction(self, kind: str, port: str | int) -> int:
        """The direction of a pin of a library cell, or of a bus where all its bits agree; 0 where unknown."""
        found = self._directions.get((kind, port))
        if found is None:
            self._directions[kind, port] = found = self._find_direction(kind, self._port_name(kind, port))
        return found

    def has_port(self, kind: str, port: str | int) -> bool:
        """Whether a black box has a port of that name, or so many."""
        return self._port_name(kind, port) in self.boxes[kind].ports

    def is_one_pin(self, kind: str, port: str | int) -> bool:
        """Whether the library has a pin of that name, and not a bus."""
        known = self.library.get(decoded(kind))
        name = self._port_name(kind, port)
        return known is not None and name is not None and decoded(name) in known.pins

    def _port_name(self, kind: str, port: str | int) -> str | None:
        if isinstance(port, str):
            return port
        order = list(self.boxes[kind].ports) if kind in self.boxes else []
        return order[port] if port < len(order) else None

    def _find_direction(self, kind: str, port: str | None) -> int:
        if port is None:
            return Direction.UNKNOWN
        if decoded(kind) in self.library:
            found = self._find_in_library(decoded(kind), decoded(port))
            if found:
                return found
        return _DIRECTIONS[self.boxes[kind].ports.get(port)] if kind in self.boxes else Direction.UNKNOWN

    def _find_in_library(self, kind: str, port: str) -> int:
        pins = self.library[kind].pins
        if port in pins:
            return int(pins[port])
        if kind not in self._buses:
            bits: dict[str, set[int]] = defaultdict(set)
            for pin, direction in pins.items():
                if (match := _BIT.fullmatch(pin)) is not None:
                    bits[match[1]].add(int(direction))
            self._buses[kind] = {bus: found.pop() if len(found) == 1 else 0 for bus, found in bits.items()}
        bit = _BIT.fullmatch(port)
        return int(pins.get(bit[1], 0)) if bit is not None else self._buses[kind].get(port, 0)


class _Connections(NamedTuple):
    """One entry for each connection: its instance, port, and where its nets stand in the nets of all values."""

    instances: NDArray[np.int64]
    ports: NDArray[np.int64]
    starts: NDArray[np.int64]
    widths: NDArray[np.int64]

    def select(self, rows: NDArray[np.bool_]) -> _Connections:
        """Some of them."""
        return _Connections(*(column[rows] for column in self))


def compile_module(module: Module, design: Design) -> Body:
    """A module in local numbers.

    Raises
    ------
    InputError
        For a bit that is out of range, a port that is not there or connected twice, sides of different width.
    IndexOverflowError
        For more pins than can be counted.
    """
    nets = ModuleNets(module)
    value_nets, value_ends = _evaluate_values(module, nets)
    values = np.array(module.connected_values, np.int64)
    starts = np.concatenate(([0], value_ends[:-1]))[values]
    counts = np.array(module.num_connections, np.int64)
    instances = np.repeat(np.arange(len(counts)), counts)
    all_ports = np.array(module.connected_ports, np.int64)
    connections = _Connections(instances, all_ports, starts, value_ends[values] - starts)
    _check_ports_differ(module, connections, len(design.port_names))

    types = np.array(module.types, np.int32)
    is_cell = ~design.is_module[types]
    has_children = not is_cell.all()
    of_cells = connections.select(is_cell[instances]) if has_children else connections
    num_unequal = _narrow_to_pins(of_cells, types, value_nets, design)
    widths = of_cells.widths
    num_pins = int(widths.sum())
    if num_pins > MAX_PINS:
        raise IndexOverflowError(f"module {shown(module.name)} has {num_pins:,} pins; at most {MAX_PINS:,} are counted")
    places = np.arange(num_pins) + np.repeat(of_cells.starts - (np.cumsum(widths) - widths), widths)
    cells = (np.cumsum(is_cell) - 1)[of_cells.instances]
    names = [module.names[i] for i in np.flatnonzero(is_cell).tolist()] if has_children else module.names
    body = Body(
        net_names=nets.names,
        num_port_bits=nets.num_port_bits,
        cell_names=_name_gates(names, types[is_cell], design) if "" in names else names,
        cell_types=types[is_cell],
        pin_nets=value_nets[places],
        pin_cells=np.repeat(cells, widths),
        pin_directions=np.repeat(_find_directions(module, of_cells, types, counts, design), widths),
        ties=_tie(module, nets),
        supplies=[
            (net, supply) for name, supply in module.supplies.items() for net in nets.find(("net", name, 0), module.offset)
        ],
        undeclared=nets.undeclared,
        num_open=int(np.sum(connections.widths == 0)),
        num_unequal=num_unequal,
    )
    ends, ends_of_rows = np.cumsum(counts), starts + connections.widths
    for instance in np.flatnonzero(~is_cell).tolist():
        rows = range(int(ends[instance] - counts[instance]), int(ends[instance]))
        connected = [(design.port_names[all_ports[row]], value_nets[starts[row] : ends_of_rows[row]]) for row in rows]
        _bind(module, instance, connected, design, body)
    return body


def _evaluate_values(module: Module, nets: ModuleNets) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """The nets of all values, and where those of each value end."""
    numbers = array("q")
    ends = array("q")
    for index, value in enumerate(module.values):
        if value is not None:
            try:
                numbers.extend(nets.find(value, 0))
            except InputError:
                instance = module.instance_with(index)
                for _, exact, _ in module.connections(instance)[1]:
                    if exact is not None:
                        nets.find(exact, module.statements[instance])
                raise
            if len(numbers) > MAX_PINS:
                raise IndexOverflowError(f"module {shown(module.name)} connects more than {MAX_PINS:,} bits")
        ends.append(len(numbers))
    return np.array(numbers, np.int64), np.array(ends, np.int64)


def _check_ports_differ(module: Module, connections: _Connections, num_ports: int) -> None:
    keys = np.sort(connections.instances * num_ports + connections.ports, kind="stable")
    repeated = np.flatnonzero(keys[1:] == keys[:-1])
    if len(repeated):
        seen: set[str | int] = set()
        for port, _, place in module.connections(int(keys[repeated[0]]) // num_ports)[1]:
            if port in seen:
                raise module.text.error(place, "each port once", f"port {shown(str(port))} again")
            seen.add(port)


def _narrow_to_pins(
    connections: _Connections, types: NDArray[np.int32], value_nets: NDArray[np.int64], design: Design
) -> int:
    """Join only the lowest bit to a pin that is no bus, as to a scalar port; returns how many nets were cut so."""
    num_unequal = 0
    for row in np.flatnonzero(connections.widths > 1).tolist():
        kind, port = types[connections.instances[row]], connections.ports[row]
        if design.is_one_pin(design.type_names[kind], design.port_names[port]):
            start, width = connections.starts[row], connections.widths[row]
            num_unequal += bool(np.any(value_nets[start : start + width] >= FIRST_NET))
            connections.starts[row], connections.widths[row] = start + width - 1, 1
    return num_unequal


def _find_directions(
    module: Module, connections: _Connections, types: NDArray[np.int32], counts: NDArray[np.int64], design: Design
) -> NDArray[np.uint8]:
    """The direction of each connection of a cell; those of gates are told by place (clauses 7.2 to 7.8)."""
    kinds = types[connections.instances]
    num_ports = len(design.port_names)
    _, first, inverse = np.unique(
        kinds.astype(np.int64) * num_ports + connections.ports, return_index=True, return_inverse=True
    )
    found = []
    for row in first.tolist():
        kind, port = design.type_names[kinds[row]], design.port_names[connections.ports[row]]
        if kind in design.boxes and not design.has_port(kind, port):
            raise _no_such_port(module, int(connections.instances[row]), port, kind)
        found.append(design.find_direction(kind, port))
    directions = np.array(found, np.uint8)[inverse]
    at_gates = np.flatnonzero(design.is_gate[kinds])
    if len(at_gates):
        places = design.port_places[connections.ports[at_gates]]
        last = counts[connections.instances[at_gates]] - 1
        drives = (places == 0) | (design.drives_many[kinds[at_gates]] & (places < last))
        directions[at_gates] = np.where(drives, int(Direction.OUTPUT), int(Direction.INPUT))
    return directions


def _name_gates(names: list[str], kinds: NDArray[np.int32], design: Design) -> list[str]:
    """Gates need no name (clause 7.1.4); those without are numbered."""
    named = []
    unnamed = 0
    for name, kind in zip(names, kinds.tolist(), strict=True):
        unnamed += not name
        named.append(name or f"{design.type_names[kind]}#{unnamed}")
    return named


def _bind(
    module: Module,
    instance: int,
    connected: list[tuple[str | int, NDArray[np.int64]]],
    design: Design,
    body: Body,
) -> None:
    """Add a child with the net on each bit of its ports."""
    child = design.modules[design.type_names[module.types[instance]]]
    layout, total = design.layout(child)
    bound = np.full(total, -1, np.int64)
    for port, nets in connected:
        if port not in layout:
            raise _no_such_port(module, instance, port, child.name)
        first, width = layout[port]
        if len(nets) == 0:
            continue
        if len(nets) != width:
            body.num_unequal += bool(np.any(nets >= FIRST_NET))
            name = port if isinstance(port, str) else list(child.ports)[port]
            if child.ports[name] == "input":
                bound[first : first + width] = CONSTANTS["0"]
        joined = min(width, len(nets))
        bound[first + width - joined : first + width] = nets[len(nets) - joined :]
    body.children.append(Child(module.names[instance], child.name, bound))


def _no_such_port(module: Module, instance: int, port: str | int, kind: str) -> InputError:
    connections = module.connections(instance)[1]
    place = next(place for name, _, place in connections if name == port)
    found = f"connection {port + 1} of {len(connections)}" if isinstance(port, int) else shown(port)
    return module.text.error(place, f"a port of module {shown(kind)}", found)


def _tie(module: Module, nets: ModuleNets) -> NDArray[np.int64]:
    """Pairs of nets that assignments make one (clause 6.1)."""
    pairs = array("q")
    for left, right, start in module.assignments:
        try:
            _add_pairs(module, nets, left, right, start, pairs)
        except InputError:
            for exact_left, exact_right in module.assigned(start):
                _add_pairs(module, nets, exact_left, exact_right, start, pairs)
            raise
    return np.array(pairs, np.int64).reshape(-1, 2)


def _add_pairs(module: Module, nets: ModuleNets, left: Expression, right: Expression, start: int, pairs: array[int]) -> None:
    targets, sources = nets.find(left, start), nets.find(right, start, declared=True)
    if len(sources) != len(targets):
        if max(sources) >= FIRST_NET:
            expected = f"{len(targets)} bits, as on the left side"
            raise module.text.error(start + right[-1], expected, f"{len(sources)}")
        sources = ([CONSTANTS["0"]] * len(targets) + sources)[-len(targets) :]
    for pair in zip(targets, sources, strict=True):
        pairs.extend(pair)
