"""Flattening: the bodies of Verilog modules, instance by instance, to nets and cells in numbers of the whole design."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from netpart.formats.verilog_body import Body
from netpart.formats.verilog_module import Module, Vocabulary
from netpart.formats.verilog_nets import FIRST_NET
from netpart.formats.verilog_text import shown
from netpart.netlist import MAX_PINS, IndexOverflowError, LimitError, Names

__all__ = ["MAX_DEPTH", "Flat", "flatten", "sort_modules"]

MAX_DEPTH = 1000
"""Instances within instances."""


def sort_modules(top: Module, modules: Mapping[str, Module], kinds: Vocabulary) -> list[str]:
    """The modules below the top, each after all that it instantiates; checks what flattening relies on.

    Raises
    ------
    InputError
        Where a module contains itself.
    LimitError
        Where instances are nested more deeply than `MAX_DEPTH`.
    IndexOverflowError
        Where the flat design would hold more cells and instances than can be counted.
    """
    order: list[str] = []
    heights: dict[str, int] = {}
    sizes: dict[str, int] = {}
    children = {top.name: _children(top, modules, kinds)}
    open_modules: dict[str, Iterator[str]] = {top.name: iter(children[top.name])}
    stack = [top.name]
    while stack:
        name = stack[-1]
        child = next(open_modules[name], None)
        if child is None:
            below = children[name]
            heights[name] = 1 + max((heights[kind] for kind in below), default=0)
            sizes[name] = modules[name].num_instances + sum(count * sizes[kind] for kind, count in below.items())
            order.append(name)
            del open_modules[stack.pop()]
        elif child in open_modules:
            cycle = " in ".join(shown(kind) for kind in [child, *reversed(stack[stack.index(child) :])][:12])
            raise _at_instance(modules[name], child, kinds, "a hierarchy without cycles", cycle)
        elif child not in heights:
            children[child] = _children(modules[child], modules, kinds)
            open_modules[child] = iter(children[child])
            stack.append(child)
    name = top.name
    if heights[name] > MAX_DEPTH + 1:
        for _ in range(MAX_DEPTH):
            name = max(children[name], key=lambda kind: heights[kind])
        deeper = max(children[name], key=lambda kind: heights[kind])
        raise _at_instance(modules[name], deeper, kinds, f"at most {MAX_DEPTH:,} nested instances", "one more", LimitError)
    if sizes[top.name] > MAX_PINS:
        raise IndexOverflowError(
            f"module {shown(top.name)} holds {sizes[top.name]:,} instances; at most {MAX_PINS:,} are counted"
        )
    return order


def _children(module: Module, modules: Mapping[str, Module], kinds: Vocabulary) -> dict[str, int]:
    """How many instances of each defined module stand in a module."""
    return {str(kinds.names[kind]): count for kind, count in Counter(module.types).items() if kinds.names[kind] in modules}


def _at_instance(
    module: Module, kind: str, kinds: Vocabulary, expected: str, found: str, error: type[LimitError] | None = None
) -> Exception:
    place, _ = module.connections(module.types.index(kinds.numbers[kind]))
    return module.text.error(place, expected, found, error)


class _Scope(NamedTuple):
    """An instance of a module: the prefix of its names, and the local nets that begin there, numbered from `first`."""

    module: str
    prefix: str
    first: int
    local_nets: NDArray[np.int64]


@dataclass(slots=True)
class Flat:
    """The whole design in numbers; nets 0, 1 and 2 are the constants.

    Attributes
    ----------
    paths, parents : module instances, the top first
    pin_nets, pin_cells, pin_directions : one for each pin
    cell_types, cell_modules : one for each cell
    ties : (t, 2) int64, pairs of nets that are one
    supplies : list of (net, supply0 or supply1)
    module_counts : how often each module is instantiated
    """

    paths: list[str] = field(default_factory=list)
    parents: list[int] = field(default_factory=list)
    num_nets: int = FIRST_NET
    pin_nets: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))
    pin_cells: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))
    pin_directions: NDArray[np.uint8] = field(default_factory=lambda: np.zeros(0, np.uint8))
    cell_types: NDArray[np.int32] = field(default_factory=lambda: np.zeros(0, np.int32))
    cell_modules: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))
    ties: NDArray[np.int64] = field(default_factory=lambda: np.zeros((0, 2), np.int64))
    supplies: list[tuple[int, str]] = field(default_factory=list)
    module_counts: Counter[str] = field(default_factory=Counter)
    scopes: list[_Scope] = field(default_factory=list)

    def name_cells(self, bodies: Mapping[str, Body], ports: Sequence[str]) -> Names:
        """Names of ports and cells, all different."""
        names = list(ports)
        for scope in self.scopes:
            own = bodies[scope.module].cell_names
            names += [scope.prefix + name for name in own] if scope.prefix else own
        return _join(_made_different(names))

    def name_nets(self, bodies: Mapping[str, Body], kept: NDArray[np.bool_]) -> Names:
        """Names of the nets that are kept, all different."""
        names: list[str] = []
        for scope in self.scopes:
            own = bodies[scope.module].net_names
            prefix = scope.prefix
            wanted = scope.local_nets[kept[scope.first : scope.first + len(scope.local_nets)]].tolist()
            names += [prefix + own[net] for net in wanted] if prefix else [own[net] for net in wanted]
        return _join(_made_different(names))


def flatten(top: str, bodies: Mapping[str, Body]) -> Flat:
    """Walk the instances from the top, parents before children, in the order of the text."""
    flat = Flat()
    pin_nets, pin_cells, pin_directions = [flat.pin_nets], [flat.pin_cells], [flat.pin_directions]
    cell_types, cell_modules, ties = [flat.cell_types], [flat.cell_modules], [flat.ties]
    num_cells = 0
    paths: dict[str, None] = {}
    pending = [(top, "", -1, np.full(bodies[top].num_port_bits, -1, np.int64))]
    while pending:
        name, path, parent, bound = pending.pop()
        body = bodies[name]
        number = len(flat.paths)
        flat.paths.append(path)
        flat.parents.append(parent)
        flat.module_counts[name] += 1
        prefix = path + "/" if number else ""

        nets = np.full(len(body.net_names), -1, np.int64)
        nets[:FIRST_NET] = np.arange(FIRST_NET)
        nets[FIRST_NET : FIRST_NET + len(bound)] = bound
        own = np.flatnonzero(nets < 0)
        nets[own] = np.arange(flat.num_nets, flat.num_nets + len(own))
        flat.scopes.append(_Scope(name, prefix, flat.num_nets, own))
        flat.num_nets += len(own)
        if len(body.pin_nets):
            pin_nets.append(nets[body.pin_nets])
            pin_cells.append(body.pin_cells + num_cells)
            pin_directions.append(body.pin_directions)
        if len(body.cell_types):
            cell_types.append(body.cell_types)
            cell_modules.append(np.full(len(body.cell_types), number))
            num_cells += len(body.cell_types)
        if len(body.ties):
            ties.append(nets[body.ties])
        flat.supplies += [(int(nets[net]), supply) for net, supply in body.supplies]
        children = []
        for child in body.children:
            child_path = prefix + child.name
            while child_path in paths:  # an escaped name with a slash
                child_path = f"{prefix}\\{child_path.removeprefix(prefix)}"
            paths[child_path] = None
            outer = np.where(child.nets >= 0, nets[child.nets], -1)
            children.append((child.module, child_path, number, outer))
        pending.extend(reversed(children))
    flat.pin_nets, flat.pin_cells = np.concatenate(pin_nets), np.concatenate(pin_cells)
    flat.pin_directions, flat.ties = np.concatenate(pin_directions), np.concatenate(ties)
    flat.cell_types, flat.cell_modules = np.concatenate(cell_types), np.concatenate(cell_modules)
    return flat


def _made_different(names: list[str]) -> list[str]:
    r"""Names as they are; of equal ones the later gets a backslash before its last part, as the escaped name it is."""
    if len(set(names)) == len(names):
        return names
    taken = set(names)
    seen: set[str] = set()
    different = []
    for name in names:
        if name in seen:
            path, slash, last = name.rpartition("/")
            while name in taken:
                last = "\\" + last
                name = f"{path}{slash}{last}"
            taken.add(name)
        seen.add(name)
        different.append(name)
    return different


def _join(names: list[str]) -> Names:
    offsets = np.zeros(len(names) + 1, np.int64)
    np.cumsum(np.fromiter(map(len, names), np.int64, len(names)), out=offsets[1:])
    return Names("".join(names).encode("latin-1"), offsets)
