"""File formats: netlists, libraries, assignments."""

from netpart.formats.library import CellType, ReadOptions
from netpart.formats.registry import read, read_assignment
from netpart.formats.source import MAX_BYTES, SourceText, load

__all__ = ["MAX_BYTES", "CellType", "ReadOptions", "SourceText", "load", "read", "read_assignment"]
