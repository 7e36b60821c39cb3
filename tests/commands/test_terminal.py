"""Tables, progress and colour."""

import io

import pytest

from yieldsim.commands import _terminal
from yieldsim.commands._terminal import Progress, bold, cut, duration, table
from yieldsim.errors import plain


class Terminal(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self):
        return True


@pytest.fixture(autouse=True)
def surroundings(monkeypatch):
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.delenv("NO_COLOR", raising=False)


def test_bold_only_on_a_terminal_that_wants_it(monkeypatch):
    assert bold("x", io.StringIO()) == "x"
    assert bold("x", Terminal()) == "\x1b[1mx\x1b[0m"
    monkeypatch.setenv("NO_COLOR", "")
    assert bold("x", Terminal()) == "\x1b[1mx\x1b[0m"  # no-color.org: set and not empty
    monkeypatch.setenv("NO_COLOR", "1")
    assert bold("x", Terminal()) == "x"


@pytest.mark.parametrize("term", ["dumb"])
def test_a_dumb_terminal_gets_plain_text(monkeypatch, term):
    monkeypatch.setenv("TERM", term)
    assert bold("x", Terminal()) == "x"


def test_progress_says_how_far_and_how_long_on_a_terminal():
    stream, now = Terminal(), iter([0.0, 10.0, 100.0])
    progress = Progress(stream=stream, clock=lambda: next(now))
    progress("Saltmarsh Point", 1, 5)
    progress("Highmoor", 5, 5)
    progress.close()
    lines = stream.getvalue().split("\r\x1b[K")
    assert lines == ["", "1 of 5 done, about 40 s left  Saltmarsh Point", "5 of 5 done  Highmoor", ""]


def test_progress_at_the_start_has_no_estimate():
    stream = Terminal()
    Progress(stream=stream)("Highmoor", 0, 5)
    assert stream.getvalue().endswith("0 of 5 done  Highmoor")


def test_progress_is_quiet_elsewhere():
    for stream, quiet in ((io.StringIO(), False), (Terminal(), True)):
        progress = Progress(quiet, stream)
        progress("x", 1, 2)
        progress.close()
        assert stream.getvalue() == ""


@pytest.mark.parametrize(
    ("seconds", "said"),
    [
        (0.1, "1 s"),
        (40, "40 s"),
        (100, "2 min"),
        (3600, "60 min"),
        (5340, "89 min"),
        (5400, "1 h 30 min"),
        (7500, "2 h 5 min"),
    ],
)
def test_durations_as_people_say_them(seconds, said):
    assert duration(seconds) == said


def test_names_cannot_steer_the_terminal():
    assert plain("a\x1b[2Jb\u202ec\nd") == "a?[2Jb?c?d"
    assert "\x1b" not in cut("\x1b[31m" * 20, 30)


def test_columns_line_up_also_with_wide_and_combining_characters():
    text = table(["name", "n"], [["漢字", "1"], ["e\u0301", "22"], ["plain", "333"]])
    ends = {_terminal.width(line) for line in text.splitlines()}
    assert ends == {_terminal.width("  plain  333")}


def test_long_names_are_cut_with_a_mark():
    assert cut("x" * 50, 40) == "x" * 37 + "..."
    assert _terminal.width(cut("漢" * 50, 40)) <= 40
