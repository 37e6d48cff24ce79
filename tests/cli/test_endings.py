"""How a process ends when it is interrupted, its reader leaves, memory or sfcpart itself fails."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
MESH = str(ROOT / "meshes" / "channel_mixed.vtu")


# a suite that a shell runs in the background inherits that interrupts are ignored
INTERRUPTIBLE = "import signal\nsignal.signal(signal.SIGINT, signal.default_int_handler)\n"


def _start(code: str, *arguments: str, **how) -> subprocess.Popen:
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    return subprocess.Popen(
        [sys.executable, "-c", code, *arguments], env=environment, text=True, **how
    )


def _break(where: str, what: str) -> str:
    """Return a program that runs the command line with one function failing."""
    return (
        f"{INTERRUPTIBLE}import sys\nimport sfcpart.api as api\ndef fail(*a, **k):\n    {what}\n"
        f"api.{where} = fail\nfrom sfcpart.cli import main\nmain(sys.argv[1:])\n"
    )


def _end(child: subprocess.Popen) -> tuple[int, str, str]:
    out, err = child.communicate(timeout=300)
    return child.returncode, out, err


PIPES = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}


def test_interrupted_work_ends_with_one_line_and_130(tmp_path):
    wait = "print('here', flush=True); import time; time.sleep(120)"
    child = _start(
        _break("write_split", wait), "split", MESH, "-n", "2", "-o", "parts", cwd=tmp_path, **PIPES
    )
    assert child.stdout.readline() == "here\n"
    child.send_signal(signal.SIGINT)
    code, out, err = _end(child)
    assert code == 130, err
    assert out == ""
    assert err.splitlines()[-1] == "sfcpart: interrupted; nothing was left half-written"
    assert "Traceback" not in err
    assert list(tmp_path.iterdir()) == []


def test_kill_while_writing_leaves_no_result_and_the_next_run_succeeds(tmp_path):
    code = (
        "import sys, time\nimport sfcpart.deliver as d\ndef slow(*a, **k):\n"
        "    print('here', flush=True); time.sleep(120)\n"
        "d.write_summary = slow\nfrom sfcpart.cli import main\nmain(sys.argv[1:])\n"
    )
    line = ["split", MESH, "-n", "2", "-o", "parts", "-q"]
    child = _start(code, *line, cwd=tmp_path, **PIPES)
    assert child.stdout.readline() == "here\n"
    child.kill()
    _end(child)
    assert not (tmp_path / "parts").exists()
    again = _start("from sfcpart.cli import main; main()", *line, cwd=tmp_path, **PIPES)
    code, _, err = _end(again)
    assert code == 0, err
    assert [entry.name for entry in tmp_path.iterdir()] == ["parts"]


def test_a_reader_that_leaves_is_no_error_to_talk_about():
    child = _start(
        "from sfcpart.cli import main; main()", "split", MESH, "-n", "300", "--json", **PIPES
    )
    child.stdout.close()
    err = child.stderr.read()
    assert child.wait(300) == 141
    assert [line for line in err.splitlines() if "first run" not in line] == []


def test_a_defect_asks_to_be_reported_and_shows_its_traceback_on_demand(monkeypatch):
    code = _break("split", "raise ZeroDivisionError('three')")
    code_, out, err = _end(_start(code, "split", MESH, "-n", "2", **PIPES))
    assert (code_, out) == (70, "")
    last = err.splitlines()[-1]
    assert last.startswith("sfcpart: error: unexpected ZeroDivisionError: three; ")
    assert "report" in last
    assert "Traceback" not in err
    monkeypatch.setenv("SFCPART_DEBUG", "1")
    _, _, err = _end(_start(code, "split", MESH, "-n", "2", **PIPES))
    assert "Traceback" in err
    assert "ZeroDivisionError: three" in err


def test_no_memory_is_said_in_one_line():
    code = _break("split", "import numpy; numpy.empty(1 << 48)")
    code_, out, err = _end(_start(code, "split", MESH, "-n", "2", **PIPES))
    assert (code_, out) == (6, "")
    assert "not enough memory: Unable to allocate" in err.splitlines()[-1]
    assert "Traceback" not in err


def test_a_full_disk_is_said_in_one_line(tmp_path):
    if not Path("/dev/full").exists():
        pytest.skip("no /dev/full here")
    with Path("/dev/full").open("w") as full:
        child = _start(
            "from sfcpart.cli import main; main()",
            "split", MESH, "-n", "2",
            stdout=full, stderr=subprocess.PIPE,
        )  # fmt: skip
        _, err = child.communicate(timeout=300)
    assert child.returncode == 4
    assert "No space left on device" in err.splitlines()[-1]
    assert "Traceback" not in err


def test_notes_of_the_library_become_single_lines(sfcpart, monkeypatch):
    import warnings

    from sfcpart.files.meshes import read

    whole = read.read_mesh

    def noisy(path):
        warnings.warn("the file is\nodd", stacklevel=2)
        return whole(path)

    monkeypatch.setattr(read, "read_mesh", noisy)
    ended = sfcpart("split meshes/turbine.vtu -n 2 -q")
    assert (ended.code, ended.err) == (0, "sfcpart: note: the file is odd\n")


def test_first_run_says_that_it_compiles(tmp_path, monkeypatch, capsys):
    from sfcpart.cli import console

    monkeypatch.setenv("SFCPART_COMPILE", "1")
    monkeypatch.setenv("NUMBA_CACHE_DIR", str(tmp_path))
    console.Stages(quiet=False)
    assert capsys.readouterr().err == "sfcpart: first run: compiling (up to 20 s, once)\n"
    console.Stages(quiet=True)
    console.Stages(quiet=False, methods=["multilevel"])
    assert "up to 40 s" in capsys.readouterr().err
    (tmp_path / "curve_0").mkdir()
    index = tmp_path / "curve_0" / "hilbert.count-1.py311.nbi"
    index.touch()
    console.Stages(quiet=False)
    assert capsys.readouterr().err == ""
    os.utime(index, (0, 0))  # left behind by an older version
    console.Stages(quiet=False)
    assert "first run" in capsys.readouterr().err


def test_a_terminal_sees_stages_and_a_pipe_does_not():
    ours, theirs = os.openpty()
    child = _start(
        "from sfcpart.cli import main; main()",
        "split", MESH, "-n", "2",
        stdout=subprocess.PIPE, stderr=theirs,
    )  # fmt: skip
    os.close(theirs)
    out = child.stdout.read()
    seen = b""
    while True:
        try:
            block = os.read(ours, 4096)
        except OSError:  # the other end is closed
            break
        if not block:
            break
        seen += block
    os.close(ours)
    assert child.wait(300) == 0
    assert b"reading" in seen
    assert b"splitting" in seen
    assert b"measuring" in seen
    assert re.search(rb"\d:\d\d:\d\d", seen)  # for how long
    assert "reading" not in out
    assert "\x1b" not in out


def test_the_command_line_loads_no_linear_algebra_and_leaves_it_usable():
    code = (
        "import sys\nfrom sfcpart.cli.run import run\nrun(sys.argv[1:])\n"
        "print('scipy.linalg' in sys.modules)\nimport scipy.linalg.cython_blas\n"
    )
    code_, out, err = _end(_start(code, "split", MESH, "-n", "2", "-q", **PIPES))
    assert (code_, out) == (0, "False\n"), err
