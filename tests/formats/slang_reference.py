"""An outside reader: pyslang elaborates the text, and a walk over its instances gives the same form as ours."""

from __future__ import annotations

from collections import Counter, defaultdict
from typing import Any

from pyslang import ast, syntax

__all__ = ["Nets", "slang_literal", "slang_nets"]

Key = tuple[str, str, int]


Nets = Counter[frozenset[tuple[str, int]]]

_DIRECTIONS = {"In": 1, "Out": 2, "InOut": 3}
_AS_PORT_CELL = {"In": 2, "Out": 1, "InOut": 3}


def slang_nets(text: str, stubs: set[str]) -> tuple[set[str], Nets]:
    """Cell names, and nets as sets of (cell, direction), of a design whose library cells are the modules in `stubs`.

    Nets on a constant are left out, ports of the top module are cells, as `read_verilog` has it.
    """
    compilation = ast.Compilation()
    compilation.addSyntaxTree(syntax.SyntaxTree.fromText(text))
    errors = [d for d in compilation.getAllDiagnostics() if d.isError()]
    assert not errors, [str(d.code) for d in errors]
    (top,) = [instance for instance in compilation.getRoot().topInstances if instance.name == "top"]
    parents: dict[Key, Key] = {}
    pins: list[tuple[Key, str, int]] = []
    cells: set[str] = set()

    def find(key: Key) -> Key:
        while parents.setdefault(key, key) != key:
            key = parents[key]
        return key

    def unite(first: Key, second: Key) -> None:
        parents[find(first)] = find(second)

    def bits(expression: Any, path: str) -> list[Key]:
        kind = type(expression).__name__
        if kind == "AssignmentExpression":
            return bits(expression.left, path)
        if kind == "ConversionExpression" and expression.type.bitWidth == expression.operand.type.bitWidth:
            return bits(expression.operand, path)
        if kind == "NamedValueExpression":
            return symbol_bits(expression.symbol, path)
        if kind == "ElementSelectExpression":
            whole = dict(zip(indices(expression.value.type), bits(expression.value, path), strict=True))
            return [whole[int(str(expression.selector.constant))]]
        if kind == "RangeSelectExpression":
            order = indices(expression.value.type)
            whole = dict(zip(order, bits(expression.value, path), strict=True))
            left, right = int(str(expression.left.constant)), int(str(expression.right.constant))
            step = -1 if left >= right else 1
            return [whole[index] for index in range(left, right + step, step)]
        if kind == "ConcatenationExpression":
            return [key for part in expression.operands for key in bits(part, path)]
        if kind == "ReplicationExpression":
            return bits(expression.concat, path) * int(str(expression.count.constant))
        if kind == "IntegerLiteral":
            return [("", "constant", 0)] * expression.type.bitWidth
        raise AssertionError(f"the reference does not know {kind}")

    def indices(kind: Any) -> list[int]:
        if not kind.hasFixedRange:
            return [0]
        left, right = kind.fixedRange.left, kind.fixedRange.right
        step = -1 if left >= right else 1
        return list(range(left, right + step, step))

    def symbol_bits(symbol: Any, path: str) -> list[Key]:
        return [(path, symbol.name, index) for index in indices(symbol.type)]

    def walk(body: Any, path: str) -> None:
        for member in body:
            kind = type(member).__name__
            if kind == "ContinuousAssignSymbol":
                for left, right in zip(bits(member.assignment.left, path), bits(member.assignment.right, path), strict=True):
                    unite(left, right)
            elif kind == "InstanceSymbol":
                name = path + member.name
                if member.definition.name in stubs:
                    cells.add(name)
                for connection in member.portConnections:
                    if connection.expression is None:
                        continue
                    outer = bits(connection.expression, path)
                    if member.definition.name in stubs:
                        direction = _DIRECTIONS[connection.port.direction.name]
                        pins.extend((key, name, direction) for key in outer)
                    else:
                        inner = symbol_bits(connection.port.internalSymbol, name + "/")
                        for left, right in zip(inner, outer, strict=True):
                            unite(left, right)
                if member.definition.name not in stubs:
                    walk(member.body, name + "/")

    for port in top.body.portList:
        order = indices(port.type)
        for index, key in zip(order, symbol_bits(port.internalSymbol, ""), strict=True):
            cell = (
                port.name
                if (len(order) == 1 and not port.type.hasFixedRange) or port.type.isScalar
                else f"{port.name}[{index}]"
            )
            cells.add(cell)
            pins.append((key, cell, _AS_PORT_CELL[port.direction.name]))
    walk(top.body, "")
    nets: dict[Key, dict[str, int]] = defaultdict(lambda: defaultdict(int))
    for key, cell, direction in pins:
        nets[find(key)][cell] |= direction
    nets.pop(find(("", "constant", 0)), None)
    return cells, Counter(frozenset(net.items()) for net in nets.values())


def slang_literal(constant: str) -> str:
    """The bits of a constant as pyslang evaluates it, most significant first; z is written x."""
    compilation = ast.Compilation()
    compilation.addSyntaxTree(syntax.SyntaxTree.fromText(f"module top; localparam p = {constant}; endmodule"))
    (parameter,) = [member for member in compilation.getRoot().topInstances[0].body if member.name == "p"]
    value = parameter.value.value
    return "".join(str(value[index]).lower().replace("z", "x") for index in reversed(range(value.bitWidth)))
