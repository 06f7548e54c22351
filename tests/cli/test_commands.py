"""The commands as a user runs them: files written, exit codes, what stands on stdout and stderr."""

from __future__ import annotations

import bz2
import csv
import gzip
import json
import os
import subprocess
import sys
from pathlib import Path

import jsonschema
import pytest

from netpart.cli import main
from netpart.report import load_schema

# Two rings of 12 cells joined by two nets: the best cut with the blocks balanced is 2, one net per joint.
RINGS = [*((i, (i + 1) % 12) for i in range(12)), *((12 + i, 12 + (i + 1) % 12) for i in range(12)), (0, 12), (6, 18)]
NET = f"0\n{2 * len(RINGS)}\n{len(RINGS)}\n24\n23\n" + "".join(f"a{a} s 1\na{b} l\n" for a, b in RINGS)


@pytest.fixture
def circuit(tmp_path: Path) -> Path:
    path = tmp_path / "rings.net"
    path.write_text(NET)
    return path


def run(*arguments: object) -> int:
    try:
        return main([str(argument) for argument in arguments])
    except SystemExit as stop:
        return int(stop.code or 0)


def test_split_writes_assignment_and_record(circuit: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = tmp_path / "out"
    assert run("split", circuit, "--unit-areas", "-o", out) == 0
    captured = capsys.readouterr()
    assert "cut nets" in captured.out
    assert "LEGAL" in captured.out
    assert "sign-off" in captured.out
    assert "best 2" in captured.err
    rows = list(csv.reader((out / "assignment.csv").open()))
    assert rows[0] == ["cell", "block"]
    assert len(rows) == 25
    record = json.loads((out / "record.json").read_text())
    jsonschema.Draft202012Validator(load_schema()).validate(record)
    assert record["result"]["cut_nets"] == 2
    assert record["best_bound"] <= 2
    assert sorted(path.name for path in out.iterdir()) == ["assignment.csv", "certificate.npz", "record.json"]


def test_the_schema_itself_is_valid() -> None:
    jsonschema.Draft202012Validator.check_schema(load_schema())


def test_json_stands_alone_on_stdout(circuit: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("split", circuit, "--unit-areas", "--json", "--quiet") == 0
    captured = capsys.readouterr()
    assert json.loads(captured.out)["schema"] == "netpart-record/1"
    assert captured.err == ""
    assert run("split", circuit, "--unit-areas", "--quiet") == 0
    assert capsys.readouterr().out == ""


def test_same_seed_same_bytes_whatever_the_threads(circuit: Path, tmp_path: Path) -> None:
    contents = []
    for number, jobs in enumerate((1, 2, 2)):
        assert (
            run("split", circuit, "--unit-areas", "--seed", 7, "--jobs", jobs, "--quiet", "-o", tmp_path / f"{number}") == 0
        )
        contents.append((tmp_path / f"{number}" / "assignment.csv").read_bytes())
    assert contents[0] == contents[1] == contents[2]


def test_audit_confirms_a_run_and_finds_an_altered_line(circuit: Path, tmp_path: Path) -> None:
    out = tmp_path / "out"
    run("split", circuit, "--unit-areas", "--quiet", "-o", out)
    assignment = out / "assignment.csv"
    assert run("audit", circuit, "--assignment", assignment) == 0
    lines = assignment.read_text().splitlines(keepends=True)
    flipped = lines[5].replace("B0", "B9").replace("B1", "B0").replace("B9", "B1")
    for altered in (flipped, "", "nobody,B0\n", "a4,B7\n", "a4\n", "a4,B0,B1\n"):
        assignment.write_text("".join([*lines[:5], altered, *lines[6:]]))
        assert run("audit", circuit, "--assignment", assignment) == 1, altered
    assignment.unlink()
    assert run("audit", circuit, "--assignment", assignment) == 2


def test_audit_refutes_bounds_that_cannot_be_proved_again(circuit: Path, tmp_path: Path) -> None:
    """A bound raised in the record, consistently with its gap, fails; so does one whose certificate is gone or broken."""
    out = tmp_path / "out"
    run("split", circuit, "--unit-areas", "--quiet", "-o", out)
    record = json.loads((out / "record.json").read_text())
    assert run("audit", circuit, "--assignment", out / "assignment.csv") == 0
    for kind in ("spectral", "spreading", "oracle"):
        forged = json.loads(json.dumps(record))
        forged["bounds"] = [{"kind": kind, "value": 2.0, "seconds": 0, "verified": True, "certificate": None}]
        forged |= {"best_bound": 2.0, "gap": 0.0}
        (out / "record.json").write_text(json.dumps(forged))
        proved = {bound["kind"]: bound["value"] for bound in record["bounds"]}
        assert run("audit", circuit, "--assignment", out / "assignment.csv") == (0 if proved.get(kind) == 2 else 1), kind
    (out / "record.json").write_text(json.dumps(record))
    content = (out / "certificate.npz").read_bytes()
    (out / "certificate.npz").write_bytes(content[:-30])
    assert run("audit", circuit, "--assignment", out / "assignment.csv") == 1
    (out / "certificate.npz").unlink()
    claimed = any(bound["kind"] == "spreading" for bound in record["bounds"])
    assert run("audit", circuit, "--assignment", out / "assignment.csv") == (1 if claimed else 0)


def test_audit_without_a_record_takes_the_rules_from_the_options(circuit: Path, tmp_path: Path) -> None:
    assignment = tmp_path / "mine.csv"
    assignment.write_text("cell,block\n" + "".join(f"a{i},{'B0' if i < 12 else 'B1'}\n" for i in range(24)))
    assert run("audit", circuit, "--unit-areas", "--assignment", assignment) == 0
    assert run("audit", circuit, "--unit-areas", "--assignment", assignment, "--shares", "40,60", "--tolerance", "5%") == 1


def test_bound_and_survey_print_figures(circuit: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("bound", circuit, "--unit-areas", "--json", "--quiet") == 0
    assert 0 <= json.loads(capsys.readouterr().out)["best_bound"] <= 2
    assert run("bound", circuit, "--unit-areas") == 0
    assert "No legal partition has a cost below" in capsys.readouterr().out
    assert run("survey", circuit, "--unit-areas") == 0
    assert "24 cells · 26 nets · 52 pins" in capsys.readouterr().out
    assert run("survey", circuit, "--unit-areas", "--json", "--quiet") == 0
    assert json.loads(capsys.readouterr().out)["survey"]["num_components"] == 1


@pytest.mark.parametrize("width", [60, 100])
def test_reports_keep_to_the_terminal_width(
    circuit: Path, width: int, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setenv("COLUMNS", str(width))
    for command in ("split", "bound", "survey"):
        run(command, circuit, "--unit-areas")
        for line in capsys.readouterr().out.splitlines():
            assert len(line.rstrip()) <= width


GOOD = "module t (a);\n input a;\n INV u (.A(a));\n INV v (.A(a));\nendmodule\n"
BROKEN = {
    "truncated": (b"0\n4\n2\n3\n2\na0 s 1\na1 l\na1 s 1\n", ".net:9:1: expected 4 pins"),
    "unknown net cell": (b"0\n4\n2\n3\n2\na0 s 1\na1 l\na1 s 1\na9 l\n", ".net:9:1: expected a module a0..a2, found a9"),
    "bad number": (b"0\n4\n2\n3\n2\na0 s 1\na1 l\na1 s 1\nax l\n", ".net:9:1: expected a module aN or pN"),
    "binary junk": (bytes(range(1, 255)) * 9, "broken.v:"),
    "empty": (b"", "an empty file"),
    "missing library": (GOOD.encode(), "INV (2 cells)"),
    "deep nesting": (b"module t (a);\n input a;\n INV u (.A(" + b"{" * 99 + b"a));\nendmodule\n", ":3:"),
    "huge vector": (b"module t (a);\n input [2000000000:0] a;\nendmodule\n", "a vector of at most"),
    "duplicate instance": (GOOD.replace("v (", "u (").encode(), ":4:"),
    "wrong gzip": (gzip.compress(GOOD.encode())[:-12], "damaged gzip data"),
    "wrong bzip2": (bz2.compress(GOOD.encode())[:-4], "damaged bzip2 data"),
    "undeclared vector": (b"module t (a);\n input a;\n INV u (.A(b[1]));\nendmodule\n", ":3:12: expected a declared vector"),
}  # fmt: skip


@pytest.mark.parametrize("kind", BROKEN)
def test_broken_input_is_one_clear_error_and_no_output(
    kind: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    content, message = BROKEN[kind]
    path = tmp_path / ("broken.net" if content[:2] == b"0\n" else "broken.v")
    path.write_bytes(content)
    options = [] if kind == "missing library" else ["--unit-areas"]
    assert run("split", path, *options, "-o", tmp_path / "out") == 2
    captured = capsys.readouterr()
    assert message in captured.err, captured.err
    assert str(path) in captured.err
    assert "Traceback" not in captured.err
    assert captured.out == ""
    assert not (tmp_path / "out").exists()


def test_usage_errors_exit_2(circuit: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    for options in (
        ["--tolerance", "200%"],
        ["--blocks", "0"],
        ["--shares", "1,x"],
        ["--shares", "50,50", "--blocks", "3"],
        ["--set", "pases=3"],
        ["--set", "passes=many"],
        ["--time-limit", "0s"],
        ["--effort", "heroic"],
    ):
        assert run("split", circuit, "--unit-areas", *options) == 2, options
    assert "nearest known one is 'passes'" in capsys.readouterr().err
    assert run("split", "nowhere.v") == 2
    monkeypatch.setenv("NETPART_SEED", "minus one")
    assert run("split", circuit, "--unit-areas") == 2
    assert "NETPART_SEED" in capsys.readouterr().err


def test_infeasible_rules_exit_3_and_say_why(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "c.net").write_text("0\n4\n2\n3\n2\na0 s 1\na1 l\na1 s 1\na2 l\n")
    (tmp_path / "c.are").write_text("a0 8\na1 1\na2 1\n")
    assert run("split", tmp_path / "c.net", tmp_path / "c.are", "--tolerance", "10%") == 3
    assert "a tolerance of 60 % would admit it" in capsys.readouterr().err
    assert run("split", tmp_path / "c.net", "--unit-areas", "--tolerance", "10%") == 3


def test_precedence_is_flag_then_variable_then_file(
    circuit: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "s.toml").write_text('effort = "quick"\nstarts = 3\npasses = 9\n')

    def starts(*options: object) -> tuple[int, int]:
        run("split", circuit, "--unit-areas", "--json", "--quiet", "--settings", tmp_path / "s.toml", *options)
        settings = json.loads(capsys.readouterr().out)["request"]["settings"]
        return settings["starts"], settings["passes"]

    assert starts() == (3, 9)
    monkeypatch.setenv("NETPART_STARTS", "4")
    assert starts() == (4, 9)
    assert starts("--starts", 5, "--set", "passes=2") == (5, 2)


def test_module_entry_point_and_interrupt(circuit: Path, tmp_path: Path) -> None:
    """`python -m netpart` works; SIGINT during the work writes the best so far and exits with 130."""
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])}
    command = [sys.executable, "-m", "netpart", "split", str(circuit), "--unit-areas", "--starts", "100000", "-v"]
    process = subprocess.Popen(
        [*command, "-o", str(tmp_path / "out")], env=environment, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    assert process.stderr is not None
    for line in process.stderr:
        if "best" in line:
            break
    process.send_signal(2)
    out, _ = process.communicate(timeout=120)
    assert process.returncode == 130
    assert "interrupted" in out or "stopped" in out
    record = json.loads((tmp_path / "out" / "record.json").read_text())
    assert record["result"]["status"] == "interrupted"
    assert not record["result"]["reproducible"]
