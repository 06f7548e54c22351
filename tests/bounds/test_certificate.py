"""Certificate files: what is written is read back, and nothing else is let in."""

from __future__ import annotations

import io
import json
from pathlib import Path

import numpy as np
import pytest

from netpart.bounds.certificate import Certificate, CertificateError, digest_netlist, dump_certificates, load_certificates
from netpart.netlist import Rules
from tests.bounds.circuits import path
from tests.strategies import make_netlist

PROOFS = [
    Certificate("one", {"a": np.arange(5, dtype=np.int16), "b": np.ones((2, 3))}),
    Certificate("two", {"a": np.zeros(0, np.int64)}),
]


def test_round_trip(tmp_path: Path) -> None:
    netlist, rules = path(8), Rules.from_request(2)
    content = dump_certificates(netlist, rules, PROOFS)
    file = tmp_path / "certificate.npz"
    file.write_bytes(content)
    for source in (content, file):
        found = load_certificates(source, netlist, rules)
        assert [proof.kind for proof in found] == ["one", "two"]
        for before, after in zip(PROOFS, found, strict=True):
            assert list(before.arrays) == list(after.arrays)
            for name, array in before.arrays.items():
                assert after.arrays[name].dtype == array.dtype
                assert np.array_equal(after.arrays[name], array)


def test_same_content_same_bytes() -> None:
    netlist, rules = path(8), Rules.from_request(2)
    assert dump_certificates(netlist, rules, PROOFS) == dump_certificates(netlist, rules, PROOFS)


def test_refused_for_another_netlist_or_window() -> None:
    netlist, rules = path(8), Rules.from_request(2)
    content = dump_certificates(netlist, rules, PROOFS)
    nets = [[v, v + 1] for v in range(7)]
    others = [
        path(9),
        make_netlist([*nets[:-1], [0, 7]], 8),
        make_netlist(nets, 8, areas=[1.0] * 7 + [2.0]),
        make_netlist(nets, 8, weights=[1.0] * 6 + [2.0]),
    ]
    for other in others:
        with pytest.raises(CertificateError, match="another netlist"):
            load_certificates(content, other, rules)
    with pytest.raises(CertificateError, match="another window"):
        load_certificates(content, netlist, Rules.from_request(2, tolerance="30%"))
    assert load_certificates(content, make_netlist(nets, 8, name="renamed"), rules)


def test_broken_files_are_refused(tmp_path: Path) -> None:
    netlist, rules = path(8), Rules.from_request(2)
    content = dump_certificates(netlist, rules, PROOFS)
    for broken in (b"", b"no archive", content[: len(content) // 2], content[:-40]):
        with pytest.raises(CertificateError):
            load_certificates(broken, netlist, rules)
    with pytest.raises(CertificateError):
        load_certificates(tmp_path / "missing.npz", netlist, rules)


def test_no_pickled_objects() -> None:
    buffer = io.BytesIO()
    header = {"schema": "netpart-certificate/1"}
    netlist, rules = path(8), Rules.from_request(2)
    genuine = load_header(dump_certificates(netlist, rules, PROOFS))
    header = genuine | {"proofs": [{"kind": "one", "arrays": ["a"]}]}
    members = {"header": np.frombuffer(json.dumps(header).encode(), np.uint8), "0.a": np.array([{}], dtype=object)}
    np.savez(buffer, **members)
    with pytest.raises(CertificateError, match="Object arrays"):
        load_certificates(buffer.getvalue(), netlist, rules)


def test_header_without_what_it_needs() -> None:
    netlist, rules = path(8), Rules.from_request(2)
    genuine = load_header(dump_certificates(netlist, rules, []))
    for change in ({"schema": "other"}, {"proofs": [{"kind": "one", "arrays": ["gone"]}]}, {"proofs": 3}):
        buffer = io.BytesIO()
        np.savez(buffer, header=np.frombuffer(json.dumps(genuine | change).encode(), np.uint8))
        with pytest.raises(CertificateError):
            load_certificates(buffer.getvalue(), netlist, rules)


def load_header(content: bytes) -> dict[str, object]:
    with np.load(io.BytesIO(content)) as members:
        header: dict[str, object] = json.loads(members["header"].tobytes())
    return header


def test_digest_covers_structure_weights_and_areas_only() -> None:
    first, second = path(8), make_netlist([[v, v + 1] for v in range(7)], 8, name="other")
    assert digest_netlist(first) == digest_netlist(second)
    assert len(digest_netlist(first)) == 64


def test_arrays_are_checked_for_kind_and_shape() -> None:
    proof = Certificate("one", {"a": np.arange(5)})
    assert proof.array("a", "i", (5,)) is proof.arrays["a"]
    assert proof.array("a", "i", (None,)) is proof.arrays["a"]
    for name, kind, shape in (("b", "i", (5,)), ("a", "f", (5,)), ("a", "i", (4,)), ("a", "i", (5, 1))):
        with pytest.raises(CertificateError):
            proof.array(name, kind, shape)
