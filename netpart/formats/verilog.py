"""Structural Verilog (IEEE Std 1364-2005, the subset named in `verilog_grammar`): modules to a flat netlist.

Hierarchy is flattened from the top module without recursion. Cells are the instances of modules that the files do not
define, of gate primitives, and of black boxes: modules with ports and nothing inside. A cell inside instances ``a`` and
``b`` is called ``a/b/cell``; bit 3 of the vector ``d`` is the net ``d[3]``. Where an escaped identifier makes two names
look the same, the later one keeps its backslash. A net takes its name from the module nearest to the top; within that
module ports come before other nets, and what is connected first comes first.

Each bit of a port of the top module is a cell of area 0 with the flag PORT; seen from that cell an input port drives its
net, so its pin is an output. Nets that are assigned to one another are one net (clause 6.1). Undeclared names in
connections are scalar nets (clause 4.5). Where a connection is narrower than its port, the low bits are joined and the
others are 0 for an input, as for unsigned nets (clause 12.3.9.2), and open for an output.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import scipy.sparse as sparse
import scipy.sparse.csgraph
from numpy.typing import NDArray

from netpart.formats.library import CellType, ReadOptions, ignored_by_name
from netpart.formats.source import SourceText
from netpart.formats.verilog_body import Body, Design, compile_module
from netpart.formats.verilog_flat import MAX_DEPTH, Flat, flatten, sort_modules
from netpart.formats.verilog_grammar import MAX_NAME_LENGTH, MAX_VECTOR_WIDTH
from netpart.formats.verilog_module import Module, Vocabulary
from netpart.formats.verilog_nets import FIRST_NET
from netpart.formats.verilog_scan import scan_modules
from netpart.formats.verilog_text import decoded, looks_like_verilog, shown
from netpart.netlist import CellFlag, Direction, IgnoredNet, InputError, Names, Netlist, Source

__all__ = ["MAX_DEPTH", "MAX_NAME_LENGTH", "MAX_VECTOR_WIDTH", "looks_like_verilog", "read_verilog"]

_AS_PORT_CELL = {"input": Direction.OUTPUT, "output": Direction.INPUT, "inout": Direction.INOUT}
_TIED = ("tied to 0", "tied to 1", "tied to x")


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

    Notes
    -----
    Takes O(characters + bits connected). Cells and nets stand in the order of the modules, the top module first.
    """
    kinds, ports = Vocabulary(), Vocabulary()
    modules: dict[str, Module] = {}
    for text in texts:
        for module in scan_modules(text, kinds, ports, grammar_only=grammar_only):
            if module.name in modules:
                raise module.text.error(module.offset, "different module names", f"module {shown(module.name)} again")
            modules[module.name] = module
    if not modules:
        raise InputError(texts[0].path, expected="a module", found="none")
    top = _find_top(modules, kinds, options, texts)
    defined = {name: module for name, module in modules.items() if module is top or not module.is_black_box}
    order = sort_modules(top, defined, kinds)
    boxes = {name: module for name, module in modules.items() if name not in defined}
    design = Design(defined, boxes, kinds, ports, types)
    bodies = {name: compile_module(defined[name], design) for name in order}
    _check_port_names(top)
    flat = flatten(top.name, bodies)
    return _freeze(flat, top, design, bodies, options, texts)


def _find_top(modules: Mapping[str, Module], kinds: Vocabulary, options: ReadOptions, texts: Sequence[SourceText]) -> Module:
    path = texts[0].path
    if options.top is not None:
        wanted = options.top.encode("utf-8", "surrogateescape").decode("latin-1")
        if wanted not in modules:
            names = ", ".join(shown(name) for name in sorted(modules)[:8]) + (", …" if len(modules) > 8 else "")
            raise InputError(path, expected=f"a module {options.top!r}", found=names)
        return modules[wanted]
    modules = {name: module for name, module in modules.items() if not module.is_black_box} or modules
    used = {kinds.names[kind] for module in modules.values() for kind in set(module.types)}
    tops = sorted(name for name in modules if name not in used)
    if len(tops) == 1:
        return modules[tops[0]]
    if not tops:
        return next(iter(modules.values()))  # whose cycle is told when modules are sorted
    names = ", ".join(map(shown, tops[:8])) + (f" and {len(tops) - 8} more" if tops[8:] else "")
    raise InputError(path, expected="one top module, or its name with --top", found=f"{len(tops)}: {names}")


def _check_port_names(top: Module) -> None:
    """Ports and instances of a module share one name space (clause 4.11), and here both become cells."""
    for name in sorted(top.ports.keys() & set(top.names)):
        instance = top.names.index(name)
        place, _ = top.connections(instance)
        raise top.text.error(place, "an instance name that is no port", shown(name))


def _freeze(
    flat: Flat,
    top: Module,
    design: Design,
    bodies: Mapping[str, Body],
    options: ReadOptions,
    texts: Sequence[SourceText],
) -> Netlist:
    """From flat numbers to the netlist: ports as cells, united nets, areas, names."""
    body = bodies[top.name]
    num_ports = body.num_port_bits
    layout, _ = design.layout(top)
    port_directions = np.repeat(
        np.array([_AS_PORT_CELL[direction or "inout"] for direction in top.ports.values()], np.uint8),
        np.array([layout[port][1] for port in top.ports], np.int64),
    )
    raw_nets = np.concatenate((np.arange(FIRST_NET, FIRST_NET + num_ports), flat.pin_nets))
    cells = np.concatenate((np.arange(num_ports), flat.pin_cells + num_ports))
    pin_directions = np.concatenate((port_directions, flat.pin_directions))
    roots = _unite(flat)
    nets = roots[raw_nets]
    pin_counts = np.bincount(nets, minlength=flat.num_nets)
    reasons = _left_out(flat, roots)
    kept = pin_counts > 0
    kept[:FIRST_NET] = False
    names = flat.name_nets(bodies, kept)
    kept_numbers = np.flatnonzero(kept)
    requested = ignored_by_name(names, pin_counts[kept_numbers], options)
    dropped = [number in reasons for number in kept_numbers.tolist()] if reasons else np.zeros(len(kept_numbers), np.bool_)
    stays = ~(requested.mask | dropped)
    ignored = [
        IgnoredNet(names[i], reasons[int(kept_numbers[i])], int(pin_counts[kept_numbers[i]]))
        for i in np.flatnonzero(dropped).tolist()
    ]
    if not stays.all():
        kept[kept_numbers[~stays]] = False
        names = Names.from_bytes([names.bytes_at(i) for i in np.flatnonzero(stays).tolist()])
    num_constant_pins = int(pin_counts[:FIRST_NET].sum())
    keep_pin = kept[nets]
    new_nets = (np.cumsum(kept) - 1)[nets[keep_pin]]
    order = np.argsort(new_nets, kind="stable")
    offsets = np.concatenate(([0], np.cumsum(np.bincount(new_nets, minlength=len(names)))))

    used = np.unique(flat.cell_types)
    type_names = [decoded(design.type_names[kind]) for kind in used.tolist()]
    cell_types = np.searchsorted(used, flat.cell_types) + 1
    type_areas, type_flags = _describe_types(
        type_names, np.bincount(cell_types, minlength=len(used) + 1)[1:], design.library, options, top
    )
    already = {net.name for net in ignored}
    return Netlist.from_arrays(
        offsets,
        cells[keep_pin][order],
        num_cells=num_ports + len(cell_types),
        areas=np.concatenate((np.zeros(num_ports), type_areas[cell_types - 1])),
        cell_names=flat.name_cells(bodies, body.net_names[FIRST_NET : FIRST_NET + num_ports]),
        net_names=names,
        cell_types=np.concatenate((np.zeros(num_ports, np.int64), cell_types)),
        type_names=Names.from_strings(["", *type_names]),
        cell_flags=np.concatenate((np.full(num_ports, int(CellFlag.PORT)), type_flags[cell_types - 1])),
        cell_modules=np.concatenate((np.zeros(num_ports, np.int64), flat.cell_modules)),
        module_names=Names.from_bytes([path.encode("latin-1") for path in flat.paths]),
        module_parents=np.array(flat.parents, np.int32),
        pin_directions=pin_directions[keep_pin][order],
        name=decoded(top.name),
        ignored_nets=(*ignored, *(net for net in requested.nets if net.name not in already)),
        sources=tuple(Source(text.path, "verilog", text.sha256) for text in texts),
        notes=tuple(_notes(flat, bodies, num_constant_pins)),
    )


def _unite(flat: Flat) -> NDArray[np.int64]:
    """For each net the net that it is part of: the first of those that assignments make one; constants stay apart."""
    roots = np.arange(flat.num_nets)
    ties = flat.ties[(flat.ties >= FIRST_NET).all(axis=1)]
    if len(ties):
        shape = (flat.num_nets, flat.num_nets)
        joined = sparse.coo_array((np.ones(len(ties), np.bool_), (ties[:, 0], ties[:, 1])), shape=shape)
        _, labels = scipy.sparse.csgraph.connected_components(joined, directed=False)
        _, first, inverse = np.unique(labels, return_index=True, return_inverse=True)
        roots = first[inverse]
    return roots


def _left_out(flat: Flat, roots: NDArray[np.int64]) -> dict[int, str]:
    """Nets that are no nets to be cut: supplies, and nets that an assignment ties to a constant."""
    reasons: dict[int, str] = {}
    for first, second in flat.ties[(flat.ties < FIRST_NET).any(axis=1)].tolist():
        constant, net = sorted((first, second))
        if net >= FIRST_NET:
            reasons.setdefault(int(roots[net]), _TIED[constant])
    for net, supply in flat.supplies:
        reasons[int(roots[net])] = supply
    return reasons


def _describe_types(
    names: Sequence[str], counts: NDArray[np.int64], types: Mapping[str, CellType], options: ReadOptions, top: Module
) -> tuple[NDArray[np.float64], NDArray[np.uint8]]:
    """Area and flags of each type; all types without an area are told at once."""
    areas = np.ones(len(names))
    flags = np.zeros(len(names), np.uint8)
    missing = []
    for i, name in enumerate(names):
        known = types.get(name, CellType(name))
        flags[i] = CellFlag.SEQUENTIAL * known.sequential | CellFlag.MACRO * known.macro
        if not options.unit_areas:
            area = options.default_area if known.area is None else known.area
            if area is None:
                missing.append(f"{name} ({counts[i]:,} cells)")
            else:
                areas[i] = area
    if missing:
        missing.sort()
        more = f" and {len(missing) - 20} more" if missing[20:] else ""
        raise InputError(
            top.text.source.path,
            expected="an area for every cell type (--library FILE, --default-area AREA or --unit-areas)",
            found=f"none for {', '.join(missing[:20])}{more}",
        )
    return areas, flags


def _notes(flat: Flat, bodies: Mapping[str, Body], num_constant_pins: int) -> list[str]:
    """What the user should know, in words."""
    total = {name: flat.module_counts[name] for name in bodies}
    notes = []
    if num_constant_pins:
        notes.append(f"{num_constant_pins:,} pins are tied to constants and join no net")
    num_open = sum(body.num_open * total[name] for name, body in bodies.items())
    if num_open:
        notes.append(f"{num_open:,} pins are left open")
    unequal = sum(body.num_unequal * total[name] for name, body in bodies.items())
    if unequal:
        notes.append(f"{unequal:,} connections are wider or narrower than their port; the low bits are joined")
    undeclared = [net for body in bodies.values() for net in body.undeclared]
    if undeclared:
        shown_names = ", ".join(map(decoded, undeclared[:3])) + (
            f" and {len(undeclared) - 3} more" if undeclared[3:] else ""
        )
        notes.append(f"nets used without a declaration (scalars by clause 4.5): {shown_names}")
    empty = sorted(
        name for name, body in bodies.items() if not len(body.cell_types) and not body.children and not len(body.ties)
    )
    if empty and len(bodies) > 1:
        shown_names = ", ".join(map(decoded, empty[:3])) + (f" and {len(empty) - 3} more" if empty[3:] else "")
        notes.append(f"modules without cells, of which nothing remains: {shown_names}")
    return notes
