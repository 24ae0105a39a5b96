"""The summary that is read in ten seconds."""

import pytest
from analyses import CAUTION, OPENING, made_analysis, made_curves

from driftline.blocks import WIDTH, lines
from driftline.drift import LAWS
from driftline.report import rows
from driftline.report.summary import blocks, summary
from driftline.scaling.ansatz import available


@pytest.mark.parametrize("code", ["drifting", "undecided", "insufficient-data", "size-independent"])
def test_the_warning_sentence_stands_first(code):
    """Whatever the verdict short of a transition, the first words say that there is no evidence of one."""
    assert summary(made_analysis(code=code)).startswith(OPENING)


def test_a_supported_transition_opens_without_the_warning():
    """Negative control of the test above."""
    text = summary(made_analysis())
    assert OPENING not in text
    assert text.startswith("The data support a transition.\nVerdict: transition-supported\n")


def test_headline_numbers():
    """Value with error in brackets, both intervals and the systematic part, on one line each."""
    # the quantiles of a normal distribution at 16 % and 2.5 % are 0.994 and 1.960 standard deviations away
    text = summary(made_analysis())
    assert "  W_c (t)   16.53(12)   [16.41, 16.65]  [16.29, 16.77]  +-0.05\n" in text
    assert "  nu         1.570(50)  [1.520, 1.620]  [1.472, 1.668]    -\n" in text
    assert "Crossover, from power-law:corrected\n" in text


def test_collapse_table_has_the_best_first():
    """Ansätze are ordered by evidence, which is given relative to the best."""
    text = summary(made_analysis())
    # e / (1 + e) = 0.731 from a difference of one in ln Z
    assert "  power-law:corrected   0.0  0.73 " in text
    assert "  power-law            -1.0  0.27 " in text
    assert text.index("  power-law:corrected   0.0") < text.index("  power-law            -1.0")


def test_warnings_say_what_to_do():
    """Each warning has its code, its finding, and its remedy behind an arrow; a reason does not repeat it."""
    text = summary(made_analysis(code="drifting"))
    assert f"\n  {CAUTION.code}\n    {CAUTION.message}\n    -> {CAUTION.action}\n" in text
    assert f"  - 2 of 4 pairs cross\n  - see below: {CAUTION.code}\n" in text
    assert text.count(CAUTION.message) == 1


def test_width_and_plainness():
    """Eighty columns, no escape codes, no trailing blanks, even with every ansatz and eight sizes."""
    curves = made_curves((6, 8, 10, 12, 14, 16, 18, 20))
    for code in ("transition-supported", "undecided"):
        text = summary(made_analysis(curves, code=code, names=available()))
        assert "\x1b" not in text
        for line in text.splitlines():
            assert len(line) <= WIDTH, line
            assert line == line.rstrip()


def test_no_crossing_at_all():
    """Without crossings there are dashes and the sentence that says why nothing was fitted."""
    note = "No pair of neighbouring sizes crosses."
    text = summary(made_analysis(code="undecided", crossover=False, probability=0.01, note=note))
    assert "  6, 8    0.01   0.99       -  -     -\n" in text
    assert f"  {note}\n" in text
    assert "Crossover, from" not in text


def test_lines_and_text_agree():
    """What is coloured in the terminal is the same text as the file."""
    analysis = made_analysis()
    assert "\n".join(line for _, line in lines(blocks(analysis))) + "\n" == summary(analysis)


def test_symbols_as_plain_text():
    """Mathtext is turned into what a terminal can show."""
    assert rows.symbol(r"\langle r\rangle") == "<r>"
    assert rows.symbol(r"S_{\mathrm{half}}") == "S_half"
    assert rows.symbol(r"$\Delta$") == "Delta"


def test_all_laws_fit_the_width():
    """The table of drift laws stays within the page for every law there is."""
    table = rows.Table("x", ("law", "formula"), tuple((law.name, law.formula) for law in LAWS.values()))
    assert max(len(cell) for row in table.rows for cell in row) < 40
