"""The nets of a Verilog module, bit by bit: which numbers an expression stands for."""

from __future__ import annotations

from netpart.formats.verilog_grammar import MAX_VECTOR_WIDTH
from netpart.formats.verilog_module import Expression, Module
from netpart.formats.verilog_text import shown
from netpart.netlist import LimitError

__all__ = ["CONSTANTS", "FIRST_NET", "ModuleNets"]

CONSTANTS = {"0": 0, "1": 1, "x": 2}
"""The local nets that are constants; x stands for z too."""

FIRST_NET = 3
"""The number of the first net that is no constant."""


class ModuleNets:
    """The nets of a module by name.

    Attributes
    ----------
    names : list of str
        By local number: the constants, then the bits of the ports in the order of the header, then all other nets in the
        order in which connections first name them. Only what is connected gets a number.
    num_port_bits : int
    undeclared : list of str
        Nets that were used without a declaration.
    """

    def __init__(self, module: Module) -> None:
        self.module = module
        self.names: list[str] = list(CONSTANTS)
        self.undeclared: list[str] = []
        self.scalars: dict[str, int] = {}
        self.vectors: dict[str, list[int]] = {}
        self.bits: dict[tuple[str, int], int] = {}
        for name in module.ports:
            numbers = [self._new(bit) for bit in self._bit_names(name)]
            if module.nets[name] is None:
                self.scalars[name] = numbers[0]
            else:
                self.vectors[name] = numbers
        self.num_port_bits = len(self.names) - FIRST_NET

    def _bit_names(self, name: str) -> list[str]:
        return [name] if self.module.nets[name] is None else [f"{name}[{index}]" for index in self._indices(name)]

    def _indices(self, name: str) -> range:
        left, right = self.module.nets[name] or (0, 0)
        return range(left, right - 1, -1) if left >= right else range(left, right + 1)

    def _new(self, name: str) -> int:
        self.names.append(name)
        return len(self.names) - 1

    def find(self, expression: Expression, base: int, *, declared: bool = False) -> list[int]:
        """The nets of an expression, most significant bit first.

        Parameters
        ----------
        base : int
            The offset of the statement.
        declared : bool
            Names must have been declared: clause 4.5 lets a connection declare a scalar, but not a right side.
        """
        kind, name, at = expression[0], expression[1], base + expression[-1]
        if kind == "net":
            number = self.scalars.get(name)
            return self._whole(name, at, declared) if number is None else [number]
        if kind == "bit":
            return [self._bit(name, expression[2], at)]
        if kind == "constant":
            return [CONSTANTS[bit] for bit in name]
        if kind == "part":
            return self._part(name, expression[2], expression[3], at)
        parts = expression[-2]
        numbers = [net for part in parts for net in self.find(part, base, declared=declared)]
        times = expression[1] if kind == "repeat" else 1
        if len(numbers) * times > MAX_VECTOR_WIDTH:
            raise self.module.text.error(at, f"at most {MAX_VECTOR_WIDTH:,} bits", f"{len(numbers) * times:,}", LimitError)
        return numbers * times

    def _whole(self, name: str, at: int, declared: bool) -> list[int]:
        nets = self.module.nets
        if name not in nets:
            if declared or not self.module.implicit:
                raise self.module.text.error(at, "a declared net", shown(name))
            nets[name] = None
            self.undeclared.append(name)
        if nets[name] is None:
            self.scalars[name] = number = self._new(name)
            return [number]
        numbers = self.vectors.get(name)
        if numbers is None:
            self.vectors[name] = numbers = [self._bit(name, index, at) for index in self._indices(name)]
        return numbers

    def _bit(self, name: str, index: int, at: int) -> int:
        number = self.bits.get((name, index))
        if number is None:
            place = self._place(name, index, at)
            vector = self.vectors.get(name)
            number = self._new(f"{name}[{index}]") if vector is None else vector[place]
            self.bits[name, index] = number
        return number

    def _part(self, name: str, left: int, right: int, at: int) -> list[int]:
        first, last = self._place(name, left, at), self._place(name, right, at)
        if first > last:
            bounds = self.module.nets[name]
            assert bounds is not None
            raise self.module.text.error(at, f"a select in the direction of [{bounds[0]}:{bounds[1]}]", f"[{left}:{right}]")
        return [self._bit(name, index, at) for index in self._indices(name)[first : last + 1]]

    def _place(self, name: str, index: int, at: int) -> int:
        """Where a bit stands within its vector, counted from the left."""
        if name not in self.module.nets:
            raise self.module.text.error(at, "a declared vector", f"{shown(name)}, which is not declared")
        bounds = self.module.nets[name]
        if bounds is None:
            raise self.module.text.error(at, "a vector", f"{shown(name)}, which is a scalar")
        if not min(bounds) <= index <= max(bounds):
            raise self.module.text.error(at, f"a bit of [{bounds[0]}:{bounds[1]}] of {shown(name)}", f"bit {index}")
        return abs(index - bounds[0])
