"""What a person sees: tables, colours and widths on a terminal, plain text in a pipe."""

import re
import sys
import time

import pytest
from analyses import OPENING, made_analysis, made_curves
from terminals import watched

from driftline.blocks import BAD, Paragraph, Table, plain
from driftline.cli.screen import WIDEST, show
from driftline.progress import left_text, part, terminal_progress, time_left
from driftline.report import rows
from driftline.report.summary import blocks, summary
from driftline.scaling.ansatz import available

TABLE = Table("Numbers", ("name", "value", "range"), (("a", "1.5(2)", "[1, 2]"), ("b", "12.25(1)", "[12, 13]")))


@pytest.fixture(scope="module")
def analysis():
    """One with every ansatz and a warning, so that every kind of line and the longest names are there."""
    return made_analysis(made_curves((6, 8, 10, 12, 14, 16, 18, 20)), code="undecided", names=available())


@pytest.mark.parametrize("columns", [40, 60, 80, 100, 120, 200])
def test_no_line_is_wider_than_the_terminal(analysis, monkeypatch, columns):
    """From 80 columns on as tables, below where they do not fit as records: nothing is cut, nothing wraps."""
    with watched(monkeypatch, columns) as screen:
        show(blocks(analysis))
    lines = screen.plain.splitlines()
    assert max(map(len, lines)) <= columns
    assert ("─" * 60 in screen.plain) == (columns >= 80)
    for name, *cells in rows.collapse(analysis).rows:
        assert [text for text in (*name.split(":"), *cells) if text not in screen.plain] == []
    prose = [line for line in lines if "  " not in line.strip() and "─" not in line]
    assert max(map(len, prose)) <= WIDEST


def test_colours_on_a_terminal(analysis, monkeypatch):
    """The verdict is bold red, headings are bold, codes of warnings yellow (codes of ECMA-48: 1, 31, 33)."""
    with watched(monkeypatch) as screen:
        show(blocks(analysis))
    assert screen.text.startswith(f"\x1b[1;31m{OPENING[:20]}")
    assert "\x1b[1mWarnings\x1b[0m\n" in screen.text
    assert "\x1b[33m  DRIFT_UNRESOLVED\x1b[0m\n" in screen.text


@pytest.mark.parametrize("environment", [{"NO_COLOR": "1"}, {"TERM": "dumb"}])
def test_no_colours_where_they_are_not_wanted(analysis, monkeypatch, environment):
    """NO_COLOR and a terminal without colours get the same tables without a single escape code."""
    with watched(monkeypatch) as coloured:
        show(blocks(analysis))
    with watched(monkeypatch, **environment) as screen:
        show(blocks(analysis))
    assert "\x1b" in coloured.text
    assert "\x1b" not in screen.text
    assert screen.text == coloured.plain


def test_an_empty_no_color_does_not_count(monkeypatch):
    """The convention asks for a variable that is present and not empty (https://no-color.org)."""
    with watched(monkeypatch, NO_COLOR="") as screen:
        show([Paragraph("no", BAD)])
    assert screen.text == "\x1b[1;31mno\x1b[0m\n"


def test_plain_text_in_a_pipe(analysis, capsys, monkeypatch):
    """What another program reads is `summary.txt`, whatever colours and width the environment asks for."""
    monkeypatch.setenv("FORCE_COLOR", "1")
    monkeypatch.setenv("COLUMNS", "200")
    show(blocks(analysis))
    assert capsys.readouterr().out == summary(analysis)


def test_table_on_a_terminal(monkeypatch):
    """Heading, names over a rule, and numbers with their points one below the other, as laid out by hand."""
    with watched(monkeypatch) as screen:
        show([TABLE])
    assert [line.rstrip() for line in screen.plain.splitlines()] == [
        "Numbers",
        "  name  value     range",
        "  ────────────────────────",
        "  a      1.5(2)   [1, 2]",
        "  b     12.25(1)  [12, 13]",
    ]


def test_table_in_a_pipe():
    """The same without the rule."""
    assert plain([TABLE]) == (
        "Numbers\n  name  value     range\n  a      1.5(2)   [1, 2]\n  b     12.25(1)  [12, 13]\n"
    )


def test_table_too_wide_becomes_records():
    """Where columns do not fit each row is a paragraph; a value is never parted from its name."""
    wide = Table("Wide", ("name", "first", "second"), (("power-law:corrected", "1 2", "[11, 12]"),))
    # the columns need 2 + 11 (for the continuation "  corrected") + 1 + 5 + 1 + 8 = 28 characters at least
    assert plain([wide], 28).splitlines()[1].split() == ["name", "first", "second"]
    assert plain([wide], 27) == "Wide\n  power-law:corrected\n    first 1 2;\n    second [11, 12]\n"


def test_control_characters_do_not_reach_the_terminal(monkeypatch):
    """An escape code in a name from a file is shown, not obeyed."""
    with watched(monkeypatch, NO_COLOR="1") as screen:
        show([Paragraph("\x1b[2J"), Table("\x1b[1m", ("\x07",), (("\x1b]0;x",),))])
    assert "\x1b" not in screen.text
    assert "\x07" not in screen.text


def test_time_left():
    """The pace so far goes on: a quarter in 10 s leaves 30 s then and 28 s two seconds later; what runs out says so."""
    assert time_left(0.25, 10.0, 10.0) == 30.0
    assert time_left(0.25, 10.0, 12.0) == 28.0
    assert left_text(time_left(0.25, 10.0, 50.0)) == "a little longer"
    assert left_text(time_left(0.0, 0.0, 50.0)) == ""
    assert left_text(3725.0) == "1:02:05 left"


def test_progress_only_on_a_terminal(monkeypatch, capsys):
    """Standard error stays empty when nobody watches or all is to be quiet; on a terminal it tells what is done."""
    with terminal_progress() as progress:
        assert progress is None
    assert part(progress, 0.0, 0.5) is None
    with watched(monkeypatch, 100, streams=("stderr",)) as screen:
        with terminal_progress(quiet=True) as progress:
            assert progress is None
        with terminal_progress() as progress:
            time.sleep(0.6)  # 0.6 s for 40 % leave 0.9 s, and more on a slow machine: never below the half second shown
            part(progress, 0.2, 0.6)("finding crossings", 0.5)
    assert "finding crossings" in screen.plain
    assert re.search(r"40% 0:00:\d\d left", screen.plain)
    assert capsys.readouterr() == ("", "")
    assert not sys.stderr.isatty()
