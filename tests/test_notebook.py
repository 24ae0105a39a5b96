"""Results in a notebook and in a script: small escaped HTML, a summary, and plain data."""

import json
from html.parser import HTMLParser

import pytest
from analyses import CAUTION, made_analysis, made_curves

from driftline.display import NO_MATHEMATICS

HOSTILE = "<script>alert(1)</script> & $x$"


class Outline(HTMLParser):
    """Tags and text of a piece of HTML; every tag that opens must close."""

    def __init__(self, html):
        super().__init__()
        self.tags, self.text, self.open = set(), "", []
        self.feed(html)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.tags.add(tag)
        self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.text += data


def results():
    """Every kind of result of one analysis whose labels are as hostile as labels can be."""
    curves = made_curves().relabel(observable=HOSTILE, disorder_symbol="<b>W</b>", disorder_unit="<i>")
    analysis = made_analysis(curves, code="drifting")
    return {
        "Curves": analysis.curves,
        "Crossings": analysis.crossings,
        "Drift": analysis.drift,
        "CollapseFit": analysis.comparison.fits[1],
        "Comparison": analysis.comparison,
        "Verdict": analysis.verdict,
        "Analysis": analysis,
    }


@pytest.mark.parametrize("name", list(results()))
class TestEveryResult:
    """What all results have in common."""

    def test_html_is_small_sound_and_escaped(self, name):
        """Tags are those of tables and sentences, all close, nothing of the data file becomes markup or mathematics."""
        html = results()[name]._repr_html_()
        # the tables have at most a dozen rows of some 100 characters, each cell with its tags
        assert len(html) < 10_000
        assert html.startswith(f'<div class="{NO_MATHEMATICS}">')
        assert Outline(html).tags <= {"div", "p", "table", "caption", "thead", "tbody", "tr", "th", "td"}

    def test_summary_is_text_of_80_columns(self, name):
        """It has lines, and none is wider than a terminal."""
        lines = results()[name].summary().splitlines()
        assert lines
        assert max(map(len, lines)) <= 80

    def test_to_dict_is_plain_data(self, name):
        """It survives JSON unchanged, so it holds no array, no tuple and no NaN."""
        made = results()[name].to_dict()
        assert json.loads(json.dumps(made, allow_nan=False)) == made


def test_the_numbers_are_those_of_the_result():
    """Values stand in the cells as they do in the terminal; the verdict comes with its warnings."""
    found = {name: Outline(result._repr_html_()).text for name, result in results().items()}
    assert HOSTILE in found["Curves"]
    assert "16.53(12)" in found["Analysis"]
    # medians and 68 % ends of a normal distribution, so upper and lower error agree
    assert "nu1.570(50)[1.520, 1.620][1.472, 1.668]log-uniform from 0.2 to 10" in found["CollapseFit"]
    assert f"{CAUTION.code}: {CAUTION.message}. What to do: {CAUTION.action}." in found["Verdict"]
    assert "16.07(12)" in found["Crossings"]  # 16.5 - 6 / 14


def test_results_and_result_file_say_the_same():
    """The parts of `result.json` are what the results give by themselves."""
    analysis = made_analysis()
    whole = analysis.to_dict()
    assert whole["crossings"] == analysis.crossings.to_dict()
    assert whole["drift"] == analysis.drift.to_dict()
    assert whole["verdict"] == analysis.verdict.to_dict()
    assert whole["crossover"] == analysis.crossover.to_dict()
    assert whole["collapse"] == analysis.comparison.to_dict(analysis.costs)
    fit, probability = analysis.comparison.fits[1], analysis.comparison.probabilities[1]
    costs = analysis.costs[fit.ansatz.name]
    assert whole["collapse"][1] == fit.to_dict(probability=probability, costs=costs)
    alone = fit.to_dict()
    assert list(alone) == list(whole["collapse"][1])
    assert (alone["probability"], alone["costs"]) == (None, [])


def test_an_analysis_without_crossover_has_no_empty_table():
    """Where nothing is quoted, no heading announces it."""
    html = made_analysis(code="undecided", crossover=False)._repr_html_()
    assert "Crossover" not in Outline(html).text
