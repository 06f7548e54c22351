"""One table of cell types from several libraries."""

import numpy as np

from netpart.formats import CellType, ReadOptions
from netpart.formats.library import ignored_by_name, unite_types
from netpart.netlist import Direction, Names

IN, OUT, UNKNOWN = Direction.INPUT, Direction.OUTPUT, Direction.UNKNOWN


def test_the_first_library_that_knows_an_area_or_a_direction_counts() -> None:
    shape = {"A": CellType("A", 2.0, {"x": UNKNOWN, "y": OUT}, macro=True), "B": CellType("B")}
    timing = {"A": CellType("A", 3.0, {"x": IN, "y": IN, "z": OUT}, sequential=True), "B": CellType("B", 5.0)}
    assert unite_types([shape, timing]) == {
        "A": CellType("A", 2.0, {"x": IN, "y": OUT, "z": OUT}, sequential=True, macro=True),
        "B": CellType("B", 5.0),
    }
    assert unite_types([]) == {}


def test_nets_are_left_out_by_globs_of_their_names() -> None:
    names = ["clk", "clk_b", "CLK", "d[0]", "d[1]", "rst"]
    pins = np.arange(6)
    found = ignored_by_name(names, pins, ReadOptions(ignore_nets=("clk*", "d[[]1]", "r?t")))
    assert found.mask.tolist() == [True, True, False, False, True, True]
    assert [net.name for net in found.nets] == ["clk", "clk_b", "d[1]", "rst"]
    assert [net.num_pins for net in found.nets] == [0, 1, 4, 5]
    assert not ignored_by_name(Names.from_strings(names), pins, ReadOptions()).mask.any()
