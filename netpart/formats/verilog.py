"""Structural Verilog (IEEE Std 1364-2005, the subset named in `verilog_grammar`): modules to a flat netlist.

Hierarchy is flattened from the top module without recursion. Cells are the instances of modules that the files do not
define, of gate primitives, and of empty modules that a library describes (stubs). A cell inside instances ``a`` and
``b`` is called ``a/b/cell``; bit 3 of the vector ``d`` is the net ``d[3]``. Where an escaped identifier makes two names
look the same, the later one keeps its backslash. A net takes its name from the module nearest to the top.

Each bit of a port of the top module is a cell of area 0 with the flag PORT; seen from that cell an input port drives its
net, so its pin is an output. Nets that are assigned to one another are one net (clause 6.1). Undeclared names in
connections are scalar nets (clause 4.5).
"""

from __future__ import annotations

import re
from array import array
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from netpart.formats.library import CellType, ReadOptions, ignored_by_name
from netpart.formats.source import SourceText
from netpart.formats.verilog_grammar import GATES
from netpart.formats.verilog_scan import Instance, Module, parse_instance, scan_modules
from netpart.netlist import (
    MAX_PINS,
    CellFlag,
    Direction,
    IgnoredNet,
    IndexOverflowError,
    InputError,
    LimitError,
    Names,
    Netlist,
    Source,
)

__all__ = ["MAX_DEPTH", "MAX_VECTOR_WIDTH", "looks_like_verilog", "read_verilog"]

MAX_VECTOR_WIDTH = 1 << 20
"""Bits in one vector."""

MAX_DEPTH = 1000
"""Instances within instances."""

_CONSTANTS = {"0": 0, "1": 1, "x": 2}
_DIRECTIONS = {"input": Direction.INPUT, "output": Direction.OUTPUT, "inout": Direction.INOUT}
_AS_PORT_CELL = {"input": Direction.OUTPUT, "output": Direction.INPUT, "inout": Direction.INOUT}
_HEAD = re.compile(rb"(?:\s|//[^\n]*|/\*.*?\*/|\(\*.*?\*\)|`[^\n]*)*+(?:macro)?module[\s\\]", re.DOTALL)


def looks_like_verilog(data: bytes) -> bool:
    """Whether the first word, comments and directives aside, is ``module``."""
    return _HEAD.match(data) is not None


def read_verilog(
    texts: Sequence[SourceText],
    types: Mapping[str, CellType],
    options: ReadOptions,
    *,
    grammar_only: bool = False,
) -> Netlist:
    """Read one design from one or several files.

    Parameters
    ----------
    texts : sequence of SourceText
    types : mapping of cell type name to CellType
    options : ReadOptions
    grammar_only : bool
        Parse every statement with the grammar; the result is the same, far more slowly.

    Raises
    ------
    InputError
        With file, line and column; also for cell types without an area, all of which are listed.
    """
    modules: dict[str, Module] = {}
    for text in texts:
        for module in scan_modules(text, grammar_only=grammar_only):
            if module.name in modules:
                raise module.file.error(module.offset, "different module names", f"module {module.name!r} again")
            modules[module.name] = module
    if not modules:
        raise InputError(texts[0].path, expected="a module", found="none")
    defined = {name: module for name, module in modules.items() if not _is_stub(module, types)}
    top = _find_top(defined or modules, options, texts)
    defined.setdefault(top.name, top)
    _check_hierarchy(defined, top)
    flat = _Flattener(defined, types, top)
    flat.run()
    return _freeze(flat, types, options, texts)


def _is_stub(module: Module, types: Mapping[str, CellType]) -> bool:
    return module.name in types and not module.instances and not module.assignments


def _find_top(modules: Mapping[str, Module], options: ReadOptions, texts: Sequence[SourceText]) -> Module:
    path = texts[0].path
    if options.top is not None:
        if options.top not in modules:
            raise InputError(path, expected=f"a module {options.top!r}", found=", ".join(sorted(modules)[:5]))
        return modules[options.top]
    used = {instance.type for module in modules.values() for instance in module.instances}
    tops = [module for name, module in modules.items() if name not in used]
    if len(tops) == 1:
        return tops[0]
    if not tops:
        raise InputError(path, expected="a module that no other one instantiates", found="none")
    names = sorted(module.name for module in tops)
    shown = ", ".join(names[:8]) + (f" and {len(names) - 8} more" if names[8:] else "")
    raise InputError(path, expected="one top module, or its name with --top", found=f"{len(names)}: {shown}")


def _check_hierarchy(modules: Mapping[str, Module], top: Module) -> None:
    """Refuse modules that contain themselves, too deep a hierarchy, and more cells than can be counted."""
    size: dict[str, int] = {}
    open_modules: dict[str, None] = {}
    stack: list[tuple[str, Iterator[Instance]]] = [(top.name, iter(top.instances))]
    open_modules[top.name] = None
    totals = {top.name: 0}
    while stack:
        name, rest = stack[-1]
        for instance in rest:
            child = instance.type
            if child not in modules:
                totals[name] += 1
            elif child in size:
                totals[name] += size[child]
            elif child in open_modules:
                cycle = [*list(open_modules)[list(open_modules).index(child) :], child]
                raise modules[name].file.error(instance.offset, "a hierarchy without cycles", " in ".join(reversed(cycle)))
            else:
                if len(stack) >= MAX_DEPTH:
                    raise modules[name].file.error(
                        instance.offset, f"at most {MAX_DEPTH} nested instances", "one more", LimitError
                    )
                totals[child] = 1
                open_modules[child] = None
                stack.append((child, iter(modules[child].instances)))
                break
        else:
            size[name] = totals[name]
            del open_modules[name]
            stack.pop()
            if stack:
                totals[stack[-1][0]] += size[name]
    if size[top.name] > MAX_PINS:
        raise IndexOverflowError(f"module {top.name!r} holds {size[top.name]:,} cells; at most {MAX_PINS:,} are counted")


class _Flattener:
    """Walks the instances below the top, numbers nets and cells, collects pins; nets that are assigned are united."""

    def __init__(self, modules: Mapping[str, Module], types: Mapping[str, CellType], top: Module) -> None:
        self.modules = modules
        self.types = types
        self.top = top
        self.net_names: list[str] = ["1'b0", "1'b1", "1'bx"]
        self.net_parents = array("q", range(3))
        self.supplies: set[int] = set()
        self.cell_names: list[str] = []
        self.cell_types: list[str] = []
        self.cell_modules = array("i")
        self.instance_paths: list[str] = [""]
        self.instance_parents = array("i", [-1])
        self.pin_nets = array("q")
        self.pin_cells = array("q")
        self.pin_directions = array("B")
        self.port_cells: list[int] = []
        self.num_open = 0
        self.undeclared: list[str] = []

    def run(self) -> None:
        """Flatten everything."""
        pending = [(self.top, "", 0, self._top_ports())]
        while pending:
            module, prefix, path_index, ports = pending.pop()
            scope = _Scope(self, module, prefix, ports)
            for left, right, base in module.assignments:
                self._unite(scope, left, right, base)
            children = []
            for instance in module.instances:
                child = self.modules.get(instance.type)
                if child is None:
                    try:
                        self._add_cell(scope, instance, path_index)
                    except InputError:
                        # read again by the grammar, which knows where in the statement the fault stands
                        self._add_cell(scope, parse_instance(module.file, instance), path_index)
                else:
                    path = prefix + instance.name
                    self.instance_paths.append(path)
                    self.instance_parents.append(path_index)
                    try:
                        ports = self._bind(scope, instance, child)
                    except InputError:
                        ports = self._bind(scope, parse_instance(module.file, instance), child)
                    children.append((child, path + "/", len(self.instance_paths) - 1, ports))
            pending.extend(reversed(children))

    def new_net(self, name: str) -> int:
        """A net of its own."""
        self.net_names.append(name)
        self.net_parents.append(len(self.net_parents))
        return len(self.net_parents) - 1

    def find(self, net: int) -> int:
        """The net that a net has been united with."""
        parents = self.net_parents
        while parents[net] != net:
            parents[net] = parents[parents[net]]
            net = parents[net]
        return net

    def _top_ports(self) -> dict[str, list[int]]:
        ports: dict[str, list[int]] = {}
        for name, direction in self.top.ports.items():
            assert direction is not None
            bits = _bit_names(self.top, name, self.top.offset)
            ports[name] = [self.new_net(bit) for bit in bits]
            for bit, net in zip(bits, ports[name], strict=True):
                self.port_cells.append(len(self.cell_names))
                self._add_pin(net, _AS_PORT_CELL[direction])
                self._name_cell(bit, "", 0)
        return ports

    def _name_cell(self, name: str, kind: str, path_index: int) -> None:
        self.cell_names.append(name)
        self.cell_types.append(kind)
        self.cell_modules.append(path_index)

    def _add_pin(self, net: int, direction: int) -> None:
        self.pin_nets.append(net)
        self.pin_cells.append(len(self.cell_names))
        self.pin_directions.append(direction)

    def _add_cell(self, scope: _Scope, instance: Instance, path_index: int) -> None:
        known = self.types.get(instance.type)
        directions: Mapping[str, int] = known.pins if known is not None else {}
        if instance.pins is not None:
            find_net = scope.scalars.get
            for port, net, bit in instance.pins:
                if not net:
                    self.num_open += 1
                    continue
                number = find_net(net) if not bit else scope.bits.get((net, bit))
                if number is None:
                    for position, number in scope.simple_nets(net, bit, instance):
                        pin = port if position is None else f"{port}[{position}]"
                        self._add_pin(number, _direction_of(directions, port, pin))
                else:
                    self._add_pin(number, directions.get(port.lstrip("\\"), 0))
        else:
            for names, number, direction in self._connected(scope, instance):
                self._add_pin(number, direction if direction is not None else _direction_of(directions, *names))
        name = scope.prefix + (instance.name or f"{instance.type}_{instance.offset}")
        self._name_cell(name, instance.type, path_index)

    def _connected(self, scope: _Scope, instance: Instance) -> Iterator[tuple[tuple[str, str], int, Direction | None]]:
        """(port, port bit), net, and the direction where the gate type tells it."""
        style, entries = instance.connections
        seen: set[str] = set()
        for order, entry in enumerate(entries):
            port, expression = entry if style == "named" else (f"#{order}", entry)
            if port in seen:
                raise scope.module.file.error(instance.offset, "each port once", f"port {port!r} twice")
            seen.add(port)
            if expression is None:
                self.num_open += 1
                continue
            nets = scope.nets_of(expression, instance.base)
            direction = None
            if instance.type in GATES:
                last = len(entries) - 1
                many_outputs = instance.type in ("buf", "not")
                drives = order < max(last, 1) if many_outputs else order == 0
                direction = Direction.OUTPUT if drives else Direction.INPUT
            for position, net in enumerate(nets):
                bit = port if len(nets) == 1 else f"{port}[{len(nets) - 1 - position}]"
                yield (port, bit), net, direction

    def _bind(self, scope: _Scope, instance: Instance, child: Module) -> dict[str, list[int]]:
        """The nets of the child's ports, outermost bit first."""
        where = scope.module.file
        if instance.pins is not None:
            named: list[tuple[str, list[int] | None]] = []
            for port, net, bit in instance.pins:
                nets = [number for _, number in scope.simple_nets(net, bit, instance)] if net else None
                named.append((port.lstrip("\\"), nets))
        else:
            style, entries = instance.connections
            if style == "ordered":
                if len(entries) > len(child.ports):
                    raise where.error(
                        instance.offset, f"at most {len(child.ports)} connections to {child.name}", f"{len(entries)}"
                    )
                entries = tuple(zip(child.ports, entries, strict=False))
            named = [
                (port, None if expression is None else scope.nets_of(expression, instance.base))
                for port, expression in entries
            ]
        ports: dict[str, list[int]] = {}
        for port, bound in named:
            if port not in child.ports:
                raise where.error(instance.offset, f"a port of module {child.name}", f"{port!r}")
            if port in ports:
                raise where.error(instance.offset, "each port once", f"port {port!r} twice")
            if bound is None:
                self.num_open += 1
                continue
            width = _width(child, port, instance.offset)
            if len(bound) > width:
                bound = bound[-width:]
            prefix = scope.prefix + instance.name + "/"
            missing = width - len(bound)
            bits = _bit_names(child, port, child.offset)[:missing] if missing else []
            ports[port] = [self.new_net(prefix + bit) for bit in bits] + bound
        return ports

    def _unite(self, scope: _Scope, left: Any, right: Any, base: int) -> None:
        targets, values = scope.nets_of(left, base), scope.nets_of(right, base)
        if len(values) < len(targets):
            values = [_CONSTANTS["0"]] * (len(targets) - len(values)) + values
        for a, b in zip(reversed(targets), reversed(values), strict=False):
            first, second = sorted((self.find(a), self.find(b)))
            self.net_parents[second] = first


class _Scope:
    """The names of one instance of a module."""

    def __init__(self, flat: _Flattener, module: Module, prefix: str, ports: dict[str, list[int]]) -> None:
        self.flat = flat
        self.module = module
        self.prefix = prefix
        self.vectors = ports
        self.scalars: dict[str, int] = {}
        self.bits: dict[tuple[str, str], int] = {}
        for name, nets in ports.items():
            if module.nets[name] is None:
                self.scalars[name] = nets[0]
                self.scalars["\\" + name] = nets[0]
        for name in module.supplies:
            flat.supplies.update(self._whole(name, module.offset))

    def simple_nets(self, net: str, bit: str, instance: Instance) -> list[tuple[int | None, int]]:
        """(port bit or None, net) of a simple connection; remembers the answer for the next time."""
        name = net.lstrip("\\") if net[0] == "\\" else net
        if bit:
            number = self.bits[net, bit] = self._one_bit(name, int(bit), instance.offset)
            return [(None, number)]
        nets = self._whole(name, instance.offset)
        if len(nets) == 1:
            self.scalars[net] = nets[0]
            return [(None, nets[0])]
        return [(len(nets) - 1 - position, number) for position, number in enumerate(nets)]

    def nets_of(self, expression: Any, base: int) -> list[int]:
        """The nets of an expression, outermost bit first."""
        kind = expression[0]
        offset = base + expression[-1]
        if kind == "net":
            return self._whole(expression[1], offset)
        if kind == "bit":
            return [self._one_bit(expression[1], expression[2], offset)]
        if kind == "constant":
            return [_CONSTANTS[bit] for bit in expression[1]]
        if kind == "part":
            _, name, left, right, _ = expression
            self._check_bit(name, left, offset)
            self._check_bit(name, right, offset)
            bounds = self.module.nets[name]
            assert bounds is not None
            if (left - right) * (bounds[0] - bounds[1]) < 0:
                raise self.module.file.error(offset, f"a select in the direction of {name}[{bounds[0]}:{bounds[1]}]")
            step = -1 if left >= right else 1
            return [self._one_bit(name, index, offset) for index in range(left, right + step, step)]
        parts = [net for part in expression[-2] for net in self.nets_of(part, base)]
        if kind == "repeat":
            if len(parts) * expression[1] > MAX_VECTOR_WIDTH:
                raise self.module.file.error(offset, f"at most {MAX_VECTOR_WIDTH} bits", "more", LimitError)
            return parts * expression[1]
        return parts

    def _whole(self, name: str, offset: int) -> list[int]:
        nets = self.vectors.get(name)
        if nets is None:
            if name not in self.module.nets:
                self.module.nets[name] = None
                self.flat.undeclared.append(self.prefix + name)
            if self.module.nets[name] is None:
                nets = [self.flat.new_net(self.prefix + name)]
            else:
                left, right = self.module.nets[name] or (0, 0)
                _width(self.module, name, offset)
                step = -1 if left >= right else 1
                nets = [self._one_bit(name, index, offset) for index in range(left, right + step, step)]
            self.vectors[name] = nets
        return nets

    def _one_bit(self, name: str, index: int, offset: int) -> int:
        self._check_bit(name, index, offset)
        key = (name, str(index))
        number = self.bits.get(key)
        if number is None:
            nets = self.vectors.get(name)
            bounds = self.module.nets[name]
            assert bounds is not None
            number = nets[abs(index - bounds[0])] if nets is not None else self.flat.new_net(f"{self.prefix}{name}[{index}]")
            self.bits[key] = number
        return number

    def _check_bit(self, name: str, index: int, offset: int) -> None:
        if name not in self.module.nets:
            raise self.module.file.error(offset, "a declared vector", f"{name!r}, which is not declared")
        bounds = self.module.nets[name]
        if bounds is None:
            raise self.module.file.error(offset, "a vector", f"{name!r}, which is a scalar")
        if not min(bounds) <= index <= max(bounds):
            raise self.module.file.error(offset, f"a bit of {name}[{bounds[0]}:{bounds[1]}]", f"bit {index}")


def _width(module: Module, name: str, offset: int) -> int:
    bounds = module.nets[name]
    if bounds is None:
        return 1
    width = abs(bounds[0] - bounds[1]) + 1
    if width > MAX_VECTOR_WIDTH:
        raise module.file.error(
            offset, f"a vector of at most {MAX_VECTOR_WIDTH} bits", f"{name}[{bounds[0]}:{bounds[1]}]", LimitError
        )
    return width


def _bit_names(module: Module, name: str, offset: int) -> list[str]:
    bounds = module.nets[name]
    if bounds is None:
        return [name]
    _width(module, name, offset)
    step = -1 if bounds[0] >= bounds[1] else 1
    return [f"{name}[{index}]" for index in range(bounds[0], bounds[1] + step, step)]


def _direction_of(directions: Mapping[str, int], port: str, bit: str) -> int:
    port, bit = port.lstrip("\\"), bit.lstrip("\\")
    return directions.get(bit, directions.get(port, 0))


def _freeze(flat: _Flattener, types: Mapping[str, CellType], options: ReadOptions, texts: Sequence[SourceText]) -> Netlist:
    """Areas, ignored nets, notes: from the flattener's lists to the netlist."""
    type_names = list(dict.fromkeys(["", *flat.cell_types]))
    type_index = {name: i for i, name in enumerate(type_names)}
    cell_types = np.fromiter(map(type_index.__getitem__, flat.cell_types), np.int32, len(flat.cell_types))
    type_areas, type_flags = _describe_types(type_names, types, options, flat)

    roots = np.frombuffer(flat.net_parents, np.int64).copy()
    while not np.array_equal(higher := roots[roots], roots):
        roots = higher
    nets = roots[np.frombuffer(flat.pin_nets, np.int64)] if len(flat.pin_nets) else np.zeros(0, np.int64)
    pin_counts = np.bincount(nets, minlength=len(roots))
    reasons = dict.fromkeys(_CONSTANTS.values(), "constant")
    reasons |= {int(roots[net]): "supply" for net in flat.supplies if roots[net] > 2}
    on_request = ignored_by_name(flat.net_names, pin_counts, options)
    kept = (pin_counts > 0) & ~on_request.mask
    kept[list(reasons)] = False
    ignored = [
        IgnoredNet(flat.net_names[net], reason, int(pin_counts[net]))
        for net, reason in sorted(reasons.items())
        if pin_counts[net]
    ]
    ignored += [net for net in on_request.nets if net.num_pins]
    new_index = np.cumsum(kept) - 1
    keep_pin = kept[nets]
    new_nets = new_index[nets[keep_pin]]
    order = np.argsort(new_nets, kind="stable")
    num_nets = int(kept.sum())
    offsets = np.concatenate(([0], np.cumsum(np.bincount(new_nets, minlength=num_nets))))
    cell_flags = type_flags[cell_types]
    cell_flags[flat.port_cells] = CellFlag.PORT
    areas = type_areas[cell_types]
    areas[flat.port_cells] = 0.0
    return Netlist.from_arrays(
        offsets,
        np.frombuffer(flat.pin_cells, np.int64)[keep_pin][order] if len(nets) else np.zeros(0, np.int64),
        num_cells=len(flat.cell_names),
        areas=areas,
        cell_names=Names.from_strings(_made_different(flat.cell_names)),
        net_names=Names.from_strings(_made_different([flat.net_names[net] for net in np.flatnonzero(kept).tolist()])),
        cell_types=cell_types,
        type_names=Names.from_strings(type_names),
        cell_flags=cell_flags,
        cell_modules=np.array(flat.cell_modules, np.int32),
        module_names=Names.from_strings(flat.instance_paths),
        module_parents=np.array(flat.instance_parents, np.int32),
        pin_directions=np.frombuffer(flat.pin_directions, np.uint8)[keep_pin][order] if len(nets) else None,
        name=flat.top.name,
        ignored_nets=tuple(ignored),
        sources=tuple(Source(text.path, "verilog", text.sha256) for text in texts),
        notes=_notes(flat),
    )


def _describe_types(
    type_names: Sequence[str], types: Mapping[str, CellType], options: ReadOptions, flat: _Flattener
) -> tuple[np.ndarray, np.ndarray]:
    areas = np.zeros(len(type_names))
    flags = np.zeros(len(type_names), np.uint8)
    missing = []
    for i, name in enumerate(type_names):
        if i == 0:
            continue
        known = types.get(name)
        if known is not None:
            flags[i] = CellFlag.SEQUENTIAL * known.sequential | CellFlag.MACRO * known.macro
        if options.unit_areas:
            areas[i] = 1.0
        elif known is not None and known.area is not None:
            areas[i] = known.area
        elif options.default_area is not None:
            areas[i] = options.default_area
        else:
            missing.append(name)
    if missing:
        counts = Counter(flat.cell_types)
        shown = ", ".join(f"{name} ({counts[name]:,} cells)" for name in sorted(missing)[:20])
        more = f" and {len(missing) - 20} more" if missing[20:] else ""
        raise InputError(
            flat.top.file.source.path,
            expected="an area for every cell type (--library FILE, --default-area AREA or --unit-areas)",
            found=f"none for {shown}{more}",
        )
    return areas, flags


def _made_different(names: list[str]) -> list[str]:
    r"""Names as they are; of equal ones the later gets a backslash before its last part, as the escaped name it is."""
    if len(set(names)) == len(names):
        return names
    seen: set[str] = set()
    different = []
    for name in names:
        while name in seen:
            path, slash, last = name.rpartition("/")
            name = f"{path}{slash}\\{last}"
        seen.add(name)
        different.append(name)
    return different


def _notes(flat: _Flattener) -> tuple[str, ...]:
    notes = []
    if flat.undeclared:
        names = ", ".join(flat.undeclared[:3]) + (f" and {len(flat.undeclared) - 3} more" if flat.undeclared[3:] else "")
        notes.append(f"nets used without a declaration (scalars by clause 4.5): {names}")
    return tuple(notes)
