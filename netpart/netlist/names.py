"""Names of cells, nets, types and modules, kept as one block of UTF-8 bytes until somebody prints them."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Iterator, Sequence
from typing import Any, overload

import numpy as np
from numpy.typing import NDArray

from netpart.netlist.errors import UnknownNameError

__all__ = ["Names"]


class Names(Sequence[str]):
    """An immutable sequence of names.

    Parameters
    ----------
    data : bytes
        The UTF-8 bytes of all names, one after the other.
    offsets : (n + 1,) int64 array
        Name `i` stands at ``data[offsets[i]:offsets[i + 1]]``.

    Notes
    -----
    A million names of 20 characters take 28 MB here and some 75 MB as a list of strings. `find` builds its
    dictionary at the first call, in O(n).
    """

    __slots__ = ("_index", "data", "offsets")

    def __init__(self, data: bytes, offsets: NDArray[np.int64]) -> None:
        self.data = data
        self.offsets = offsets
        self._index: dict[bytes, int] | None = None

    @classmethod
    def from_strings(cls, names: Iterable[str]) -> Names:
        """Names from strings, in the given order."""
        return cls.from_bytes([name.encode("utf-8", "surrogateescape") for name in names])

    @classmethod
    def from_bytes(cls, names: Sequence[bytes]) -> Names:
        """Names from UTF-8 byte strings, in the given order."""
        offsets = np.zeros(len(names) + 1, dtype=np.int64)
        np.cumsum(np.fromiter(map(len, names), dtype=np.int64, count=len(names)), out=offsets[1:])
        return cls(b"".join(names), offsets)

    @classmethod
    def numbered(cls, prefix: str, count: int) -> Names:
        """The names ``prefix0, prefix1, …``."""
        return cls.from_bytes([f"{prefix}{i}".encode() for i in range(count)])

    @classmethod
    def blank(cls, count: int) -> Names:
        """`count` empty names, for clusters that have none; takes no memory."""
        return cls(b"", np.broadcast_to(np.int64(0), count + 1))

    def __len__(self) -> int:
        return len(self.offsets) - 1

    @overload
    def __getitem__(self, index: int) -> str: ...
    @overload
    def __getitem__(self, index: slice) -> list[str]: ...
    def __getitem__(self, index: int | slice) -> str | list[str]:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(len(self)))]
        return self.bytes_at(index).decode("utf-8", "surrogateescape")

    def bytes_at(self, index: int) -> bytes:
        """Name `index` as it stood in the file."""
        count = len(self)
        if not -count <= index < count:
            raise IndexError(f"name {index} of {count}")
        index %= count
        return self.data[self.offsets[index] : self.offsets[index + 1]]

    def __iter__(self) -> Iterator[str]:
        for name in self.iter_bytes():
            yield name.decode("utf-8", "surrogateescape")

    def iter_bytes(self) -> Iterator[bytes]:
        """All names as bytes, in order."""
        bounds = self.offsets.tolist()
        for start, stop in itertools.pairwise(bounds):
            yield self.data[start:stop]

    def find(self, name: str | bytes) -> int:
        """The index of a name.

        Raises
        ------
        UnknownNameError
            If no such name exists.
        """
        if self._index is None:
            self._index = {known: i for i, known in enumerate(self.iter_bytes())}
        key = name if isinstance(name, bytes) else name.encode("utf-8", "surrogateescape")
        try:
            return self._index[key]
        except KeyError:
            raise UnknownNameError(f"unknown name {key.decode('utf-8', 'replace')!r}") from None

    def first_repeat(self) -> int | None:
        """The index of the first name that stood before, or None if all differ."""
        seen: set[bytes] = set()
        for i, name in enumerate(self.iter_bytes()):
            if name in seen:
                return i
            seen.add(name)
        return None

    def __contains__(self, name: object) -> bool:
        if not isinstance(name, str | bytes):
            return False
        try:
            self.find(name)
        except UnknownNameError:
            return False
        return True

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Names):
            return NotImplemented
        return self.data == other.data and np.array_equal(self.offsets, other.offsets)

    def __hash__(self) -> int:
        return hash(self.data)

    def __repr__(self) -> str:
        shown = ", ".join(repr(name) for name in self[:3])
        return f"<Names: {len(self):,} ({shown}{', …' if len(self) > 3 else ''})>"

    def __getstate__(self) -> dict[str, Any]:
        return {"data": self.data, "offsets": self.offsets}

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.data = state["data"]
        self.offsets = state["offsets"]
        self._index = None
