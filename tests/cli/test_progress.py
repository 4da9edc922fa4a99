"""The bar of long work: on a terminal, with rate and time left, and silent elsewhere."""

from __future__ import annotations

import io
import sys

import pytest

from ocean_sound.cli._progress import progress


class Terminal(io.StringIO):
    def isatty(self):
        return True


@pytest.mark.parametrize(("stream", "quiet"), [(Terminal(), True), (io.StringIO(), False)])
def test_nothing_is_drawn_where_nobody_looks(monkeypatch, stream, quiet):
    monkeypatch.setattr(sys, "stderr", stream)
    with progress(quiet=quiet) as told:
        told("reading casts", 1, 2, count=5, unit="casts")
    assert stream.getvalue() == ""


def test_a_terminal_sees_each_part_of_the_work_and_what_there_is_of_it(monkeypatch):
    stream = Terminal()
    monkeypatch.setattr(sys, "stderr", stream)
    monkeypatch.setenv("COLUMNS", "120")
    with progress(quiet=False) as told:
        told("reading casts", 1, 2, count=1200, unit="casts")
        told("reading casts", 2, 2, count=2400, unit="casts")
    assert "reading casts" in stream.getvalue()
    assert "2,400 casts" in stream.getvalue()
    with progress(quiet=False) as told:
        told("reading casts", 2, 2)
        told("writing the archive", 0, 1)
    _, _, after = stream.getvalue().partition("writing the archive")
    assert after
    assert "reading casts" not in after
