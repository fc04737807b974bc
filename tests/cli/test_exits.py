"""Exit codes and streams: what went wrong is on stderr in words, and stdout stays empty."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from scanmass.errors import Declined, PipelineFault, ScanFault, UserFault
from scanmass.report.schema import InvalidResult

COMMAND = ("measure", "cube.ply", "--pipeline", "cube.yaml", "--json")

ENDINGS: list[tuple[BaseException, int, str]] = [
    (UserFault("no unit", file="a/cube.ply", allowed="--unit mm"), 2, "cube.ply: no unit; --unit mm\n"),
    (ScanFault("is cut short", file="cube.ply"), 2, "cube.ply: is cut short\n"),
    (Declined("one-sided scan", allowed="scan the back"), 2, "one-sided scan; scan the back\n"),
    (PipelineFault(["c.yaml:1: a: bad; good", "c.yaml:2: b: bad; good"]), 2, "c.yaml:1: a: bad; good\nc.yaml:2: b"),
    (FileNotFoundError(2, "No such file or directory", "a/cube.ply"), 2, "cube.ply: no such file or directory\n"),
    (ImportError("libGL.so.1: cannot open shared object file: No such file"), 2, "the system library libGL.so.1"),
    (OSError(28, "No space left on device"), 2, "the result cannot be written: no space left on device; make room"),
    (KeyboardInterrupt(), 130, "interrupted\n"),
    (ValueError("shape (3, 2)"), 3, "scanmass failed by a fault of its own: ValueError: shape (3, 2)\nPlease report"),
    (InvalidResult(("mass_kg: bad",)), 3, "scanmass failed by a fault of its own: InvalidResult"),
    (OSError(5, "Input/output error"), 3, "scanmass failed by a fault of its own: OSError"),
]


@pytest.mark.parametrize(("fault", "code", "said"), ENDINGS, ids=[type(f).__name__ for f, _, _ in ENDINGS])
def test_each_fault_has_its_code(run: Any, measuring: Any, fault: BaseException, code: int, said: str) -> None:
    def fail(*_: Any, **__: Any) -> Any:
        raise fault

    measuring(fail)
    ended = run(*COMMAND)
    assert ended.exit_code == code
    assert ended.stderr.startswith(said)
    assert "Traceback" not in ended.stderr
    assert ended.stdout == ""


def test_a_traceback_only_on_request(run: Any, measuring: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: Any, **__: Any) -> Any:
        raise ValueError("shape")

    measuring(fail)
    monkeypatch.setenv("SCANMASS_TRACEBACK", "1")
    ended = run(*COMMAND)
    assert ended.exit_code == 3
    assert "Traceback" in ended.stderr


def _shell(*arguments: str, cwd: Path | None = None) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, *arguments], capture_output=True, text=True, cwd=cwd, encoding="utf-8")


def test_the_real_program_keeps_its_streams_apart(tmp_path: Path) -> None:
    (tmp_path / "bad.yaml").write_text("scan: {unit: mm}\ninside: {body: {density: 7100}}\nsurfaces: {}\n")
    ended = _shell("-m", "scanmass", "check", "bad.yaml", "--json", cwd=tmp_path)
    assert ended.returncode == 2
    assert ended.stdout == ""
    assert [line.split(" ")[0] for line in ended.stderr.splitlines()] == ["bad.yaml:2:", "bad.yaml:3:"]


def test_help_loads_nothing_heavy() -> None:
    # What keeps `scanmass --help` under 0.4 s; a clock would fail on a busy machine.
    heavy = "{'numpy', 'scipy', 'open3d', 'numba', 'rich', 'pyarrow', 'jsonschema', 'ruamel'}"
    code = f"""
import sys
from scanmass.cli.main import app
try:
    app(['measure', '--help'])
except SystemExit as end:
    assert end.code == 0
print(sorted({heavy} & set(sys.modules)))
"""
    ended = _shell("-c", code)
    assert "--pipeline FILE" in ended.stdout
    assert ended.stdout.splitlines()[-1] == "[]"


def test_what_libraries_print_goes_to_stderr() -> None:
    code = """
import os, subprocess, sys
from scanmass.cli.streams import stdout_kept_clean
print('before')
with stdout_kept_clean():
    print('python')
    os.write(1, b'from C\\n')
    subprocess.run([sys.executable, '-c', 'print("a child")'])
print('after')
"""
    ended = _shell("-c", code)
    assert ended.stdout == "before\nafter\n"
    assert sorted(ended.stderr.splitlines()) == ["a child", "from C", "python"]


@pytest.mark.skipif(os.name == "nt", reason="needs a POSIX shell")
def test_a_reader_that_leaves_early_is_no_fault() -> None:
    command = f"set -o pipefail; {sys.executable} -m scanmass check --keys | head -n 1"
    ended = subprocess.run(["bash", "-c", command], capture_output=True, text=True)
    assert (ended.returncode, ended.stderr) == (0, "")


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="needs a device that is always full")
def test_a_full_disk_is_said_in_words() -> None:
    with open("/dev/full", "w") as full:
        asked = [sys.executable, "-m", "scanmass", "check", "--keys"]
        ended = subprocess.run(asked, stdout=full, stderr=subprocess.PIPE, text=True)
    said = "the result cannot be written: no space left on device; make room for it\n"
    assert (ended.returncode, ended.stderr) == (2, said)


def test_version() -> None:
    from importlib.metadata import version

    ended = _shell("-m", "scanmass", "--version")
    assert (ended.returncode, ended.stdout) == (0, f"scanmass {version('scanmass')}\n")
