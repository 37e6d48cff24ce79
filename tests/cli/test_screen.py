"""What a terminal shows: tables within 80 columns, progress with time left, colour only there."""

from __future__ import annotations

import io

import pytest

from sfcpart.cli import console
from sfcpart.cli.console import Stages, print_table, print_written
from tests.run_files import write_runs


class Screen(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self) -> bool:
        return True


@pytest.fixture
def look(monkeypatch):
    """Give a function that puts a screen in place of the error stream (pytest does so before)."""

    def at(stream: io.StringIO) -> io.StringIO:
        monkeypatch.setattr("sys.stderr", stream)
        return stream

    monkeypatch.setenv("TERM", "xterm-256color")
    monkeypatch.setenv("COLUMNS", "90")
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setattr(console, "_is_compiled", lambda room: True)
    monkeypatch.setattr(console, "_hushed", [])
    return at


def test_a_stage_shows_what_is_done_and_is_gone_in_the_end(look):
    screen = look(Screen())
    with Stages(quiet=False)("reading [mesh]"):
        pass
    assert "reading [mesh]" in screen.getvalue()
    assert screen.getvalue().rstrip().endswith("\x1b[2K")


def test_counted_stages_show_how_many_are_left_and_for_how_long(look):
    screen = look(Screen())
    with Stages(quiet=False).counted("frames", 8) as progress:
        for done in range(9):
            progress(done)
    assert "frames" in screen.getvalue()
    assert "8/8" in screen.getvalue()
    assert "left" in screen.getvalue()


@pytest.mark.parametrize("why", ["quiet", "dumb", "pipe"])
def test_nothing_is_shown_where_nobody_looks(look, monkeypatch, why):
    screen = look(io.StringIO() if why == "pipe" else Screen())
    if why == "dumb":
        monkeypatch.setenv("TERM", "dumb")
    doing = Stages(quiet=why == "quiet")
    with doing("reading"), doing.counted("frames", 2) as progress:
        progress(1)
    assert screen.getvalue() == ""


@pytest.mark.parametrize("plain", [False, True])
def test_colour_and_bold_are_for_terminals_and_no_color_is_respected(monkeypatch, plain):
    shown = Screen()
    monkeypatch.setattr("sys.stdout", shown)
    monkeypatch.setenv("TERM", "xterm-256color")
    monkeypatch.delenv("NO_COLOR", raising=False)
    with console.console().capture() as captured:
        console.console()
    assert captured.get() == ""
    print_table(["part", "cells"], [["0", "7"]])
    assert "\x1b[1m" in shown.getvalue()
    if plain:
        monkeypatch.setenv("NO_COLOR", "1")
        shown.truncate(0)
        print_table(["part"], [["0"]])
        assert not any(f"\x1b[3{k}m" in shown.getvalue() for k in range(8))


def test_long_lists_of_files_are_broken_between_names(capsys):
    print_written("parts", [f"part-{k}.vtu" for k in range(20)])
    out = capsys.readouterr().out
    assert out.startswith("\nwritten to parts: part-0.vtu, ")
    assert max(map(len, out.splitlines())) <= 80


LINES = [
    "split meshes/channel_mixed.vtu -n 8 -o parts --report --picture",
    "assess meshes/turbine.vtu --field body",
    "compare meshes/channel_mixed.vtu -n 4 -m hilbert -m coordinate",
    "rebalance meshes/channel_mixed.vtu --from parts --weight work --way shift -o new",
    "replay front.h5 --parts 4 --rule never --rule every:1 --rule hindsight",
    "forecast meshes/channel_mixed.vtu --parts 1:16",
    "inspect meshes/channel_mixed.vtu",
    "demo",
]


def test_what_every_verb_prints_fits_80_columns(sfcpart):
    write_runs()
    for line in LINES:
        code, out, err = sfcpart(line)
        assert (code, err) == (0, ""), line
        assert [row for row in out.splitlines() if len(row) > 80] == [], line
