"""Certificates of lower bounds: arrays that an independent check can follow, in one NumPy archive.

The file is an ``.npz`` archive without pickled objects. Its member ``header`` holds JSON as bytes::

    {"schema": "netpart-certificate/1", "netlist": sha256, "window": {"lower": [...], "upper": [...], "slack": ...},
     "proofs": [{"kind": "spreading", "arrays": ["demands", ...]}, ...]}

and array ``a`` of proof i is the member ``i.a``. A certificate holds for one netlist and one area window; it is
refused for any other. It carries no value: the bound is what the check computes from it.
"""

from __future__ import annotations

import hashlib
import io
import json
import zipfile
import zlib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from netpart.netlist import Netlist, NetpartError, Rules

__all__ = ["Certificate", "CertificateError", "digest_netlist", "dump_certificates", "load_certificates"]

SCHEMA = "netpart-certificate/1"
MAX_BYTES = 2**32
"""What a certificate may hold once it is decompressed."""


class CertificateError(NetpartError):
    """A certificate that is broken, or that belongs to another netlist or other rules."""


@dataclass(frozen=True, slots=True, eq=False)
class Certificate:
    """One proof: its kind and the arrays that the check of this kind reads."""

    kind: str
    arrays: dict[str, NDArray[Any]]

    def array(self, name: str, kind: str, shape: tuple[int | None, ...]) -> NDArray[Any]:
        """An array by name, refused unless it has the dtype kind (``"i"``, ``"f"`` …) and the shape (None: any)."""
        found = self.arrays.get(name)
        if found is None:
            raise CertificateError(f"{self.kind} certificate: array {name!r} is missing")
        fits = found.dtype.kind == kind and found.ndim == len(shape)
        if not fits or any(want is not None and want != have for want, have in zip(shape, found.shape, strict=True)):
            raise CertificateError(
                f"{self.kind} certificate: array {name!r} is {found.dtype} of shape {found.shape}, "
                f"expected kind {kind!r} and shape {shape}"
            )
        return found


def digest_netlist(netlist: Netlist) -> str:
    """SHA-256 over what a bound depends on: net offsets, net cells, net weights and cell areas, little-endian."""
    digest = hashlib.sha256()
    for array, dtype in (
        (netlist.net_offsets, "<i8"),
        (netlist.net_cells, "<i4"),
        (netlist.net_weights, "<f8"),
        (netlist.areas, "<f8"),
    ):
        digest.update(len(array).to_bytes(8, "little"))
        digest.update(np.ascontiguousarray(array, dtype=dtype).tobytes())
    return digest.hexdigest()


def dump_certificates(netlist: Netlist, rules: Rules, certificates: Sequence[Certificate]) -> bytes:
    """The content of a certificate file."""
    header = _binding(netlist, rules) | {
        "proofs": [{"kind": proof.kind, "arrays": list(proof.arrays)} for proof in certificates]
    }
    members: dict[str, Any] = {
        f"{i}.{name}": array for i, proof in enumerate(certificates) for name, array in proof.arrays.items()
    }
    members["header"] = np.frombuffer(json.dumps(header, sort_keys=True).encode(), dtype=np.uint8)
    buffer = io.BytesIO()
    np.savez_compressed(buffer, allow_pickle=False, **members)
    return buffer.getvalue()


def load_certificates(source: Path | bytes, netlist: Netlist, rules: Rules) -> list[Certificate]:
    """Read a certificate file made for this netlist and window.

    Raises
    ------
    CertificateError
        If the file is broken or was made for something else.
    """
    stream = io.BytesIO(source) if isinstance(source, bytes) else source
    try:
        with zipfile.ZipFile(stream) as archive:
            if sum(member.file_size for member in archive.infolist()) > MAX_BYTES:
                raise CertificateError(f"certificate: it holds more than {MAX_BYTES:,} bytes")
        with np.load(stream, allow_pickle=False) as members:
            header = json.loads(members["header"].tobytes())
            if not isinstance(header, dict) or header.get("schema") != SCHEMA:
                raise CertificateError(f"certificate: expected the schema {SCHEMA!r}")
            for key, expected in _binding(netlist, rules).items():
                if header.get(key) != expected:
                    raise CertificateError(f"certificate: it was made for another {key}")
            return [
                Certificate(str(proof["kind"]), {str(name): members[f"{i}.{name}"] for name in proof["arrays"]})
                for i, proof in enumerate(header["proofs"])
            ]
    except CertificateError:
        raise
    except (OSError, EOFError, KeyError, TypeError, ValueError, zipfile.BadZipFile, zlib.error) as error:
        raise CertificateError(f"certificate: not a readable archive of arrays ({error})") from None


def _binding(netlist: Netlist, rules: Rules) -> dict[str, Any]:
    window = rules.window(netlist)
    return {
        "schema": SCHEMA,
        "netlist": digest_netlist(netlist),
        "window": {"lower": window.lower.tolist(), "upper": window.upper.tolist(), "slack": window.slack},
    }
