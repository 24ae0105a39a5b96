"""Text, symbols, numbers and tables as LaTeX: it compiles, whatever stands in a data file."""

import shutil
import subprocess

import pytest
from analyses import made_analysis, made_curves
from hypothesis import given, settings
from hypothesis import strategies as st
from latexcheck import faults
from test_methods import everything

from driftline.drift import LAWS
from driftline.inference.intervals import Interval
from driftline.numerals import Quoted
from driftline.report import latex
from driftline.report.bibliography import bibtex
from driftline.report.methods import methods
from driftline.report.tex_tables import tex_tables
from driftline.scaling.ansatz import available

SPECIAL = "\\{}$&#_%~^<>|\"'`-ΔνµßŠé²₂ÅłĐ↑语 abW0=[],"
LABELS = {
    "observable": r"50% of \input{x} & #1_ ~^<|>\\ $x$ Šuntajs' Δ²",
    "observable_symbol": r"a_b_c^d^e \undefined{",
    "disorder_symbol": r"h^x_\mathrm{eff}",
    "disorder_unit": r"J_{\max} %",
}


@pytest.mark.parametrize(
    ("piece", "fault"),
    [
        ("a_b", "_ outside of mathematics"),
        ("$a_b_c$", "two _ at one atom"),
        ("50% of it", "bare %"),
        ("#1", "bare #"),
        ("{a}}", "{ is closed out of turn"),
        ("{a", "{ is not closed"),
        ("$a", "$ is not closed"),
        (r"\input{x}", r"unknown command \input"),
        (r"$\undefined$", r"unknown command \undefined"),
    ],
)
def test_the_check_of_latex_can_fail(piece, fault):
    """Negative control: each kind of fault is found."""
    assert faults(piece) == [fault]
    assert faults(r"$W_c$ \& $\nu_{a}^{2}x_{b}$ \mbox{50\% $<$ 1} 16.53(12)") == []


@settings(max_examples=40)
@given(st.one_of(st.text(SPECIAL, max_size=20), st.text(st.characters(exclude_categories=["C", "Zl", "Zp"]))))
def test_any_text_can_be_written(text):
    """Escaped text has no fault, and plain letters and digits stay as they are."""
    assert faults(latex.escape(text)) == []
    kept = [each for each in text if each.isascii() and each.isalnum()]
    written = iter(latex.escape(text))
    assert all(each in written for each in kept)


@given(
    st.one_of(
        st.text(SPECIAL, max_size=12),
        st.lists(
            st.sampled_from(
                [r"\alpha", r"\mathrm", r"\frac", r"\sqrt", r"\langle", r"\foo", "{", "}", "_", "^", "x", " "]
            ),
            max_size=9,
        ).map("".join),
    )
)
def test_any_symbol_can_be_written(symbol):
    """A symbol has no fault in mathematics, and can carry an index of its own."""
    assert faults(f"${latex.mathematics(symbol)}_{{c}}$") == []


@pytest.mark.parametrize(
    ("symbol", "written"),
    [
        ("W", "W"),
        (r"\langle r\rangle", r"\langle r\rangle"),
        ("Δ", r"\Delta "),
        (r"$\sigma$", r"\sigma"),
        (r"S_{\mathrm{half}}", r"{S_{\mathrm{half}}}"),
        (r"\overline{S}_{L/2}", r"{\overline{S}_{L/2}}"),
        ("x_a^2", "{x_{a}^{2}}"),
        (r"\frac{S}{L}", r"\frac{S}{L}"),
        (r"\left(h/J\right)", "(h/J)"),
        (r"\text{gap}", r"\mathrm{gap}"),
        ("a_b_c", r"\mbox{a\_b\_c}"),  # two indices of one kind: an error in LaTeX
        (r"\write18{rm}", r"\mbox{write18rm}"),
        ("{", r"\mbox{\{}"),
    ],
)
def test_symbols(symbol, written):
    """Mathtext that LaTeX knows stays, indices get braces, anything else becomes text."""
    assert latex.mathematics(symbol) == written


@pytest.mark.parametrize(
    ("text", "written"),
    [
        ("50% of J_z & more", r"50\% of J\_z \& more"),
        (r"a\b{c}~^", r"a\textbackslash{}b\{c\}\textasciitilde{}\textasciicircum{}"),
        ("Šuntajs, Cappé, Rømer", r"\v{S}untajs, Capp\'{e}, R\o{}mer"),
        ("Δ = 2 µm², ⟨r⟩", r"$\Delta$ = 2 $\mu$m$^{2}$, $\langle$r$\rangle$"),
    ],
)
def test_text(text, written):
    """Special characters, accents and Greek letters are commands."""
    assert latex.escape(text) == written
    assert latex.beyond_latex(latex.escape(text)) == ""


def test_other_scripts_stay_and_are_named():
    """What LaTeX alone has no command for is kept, and the text says which engine knows it."""
    assert latex.escape("纠缠 a") == "纠缠 a"
    text = methods(made_analysis(made_curves().relabel(observable="纠缠 entropy")))
    assert "% pdfLaTeX does not know 纠缠: use XeLaTeX or LuaLaTeX" in text
    assert "pdfLaTeX" not in methods(made_analysis())


@pytest.mark.parametrize(
    ("found", "written"),
    [
        (Quoted("16.53", ("12",)), "$16.53(12)$"),
        (Quoted("1.47", ("36", "26")), "$1.47(^{+36}_{-26})$"),
        (Quoted("3.200", ("41",), -9), r"$3.200(41)\times 10^{-9}$"),
        (Quoted("-"), "--"),
        (Quoted("2.5"), "$2.5$"),
    ],
)
def test_numbers(found, written):
    """The rounded number in the notation of papers, worked out by hand."""
    assert latex.number(found) == written


def test_limits_and_gaps():
    """Ends are rounded like the value; what is missing is a dash."""
    assert latex.limits(Interval(16.53, 16.41, 16.65, 16.31, 16.78)) == "[$16.31$, $16.78$]"
    assert latex.limits(Interval(16.53, 16.41, 16.65, 16.31, 16.78), 68) == "[$16.41$, $16.65$]"
    assert (latex.limits(None), latex.value(None)) == ("--", "--")
    assert [latex.plain_number(each) for each in ("<0.01", "1e+30", "-1.5")] == [
        "$<0.01$",
        r"$1\times 10^{30}$",
        "$-1.5$",
    ]


def analyses():
    """Kinds of analyses, plain and with hostile labels: everything, hardly anything, every form there is."""
    hostile = made_curves().relabel(**LABELS)
    nothing = {"code": "undecided", "crossover": False, "probability": 0.01, "note": "No pair of 50% crosses."}
    names = tuple(f"{each}:amplitude" for each in available())
    return [
        everything(), made_analysis(hostile), made_analysis(hostile, **nothing), made_analysis(hostile, names=names),
    ]  # fmt: skip


@pytest.mark.parametrize("number", range(4))
def test_everything_written_has_no_fault(number):
    """Methods and tables of every kind of analysis can be compiled as far as the check sees."""
    analysis = analyses()[number]
    assert faults(methods(analysis)) == []
    for table in tex_tables(analysis).values():
        assert faults(table.text()) == []


class TestTables:
    """The tables of the paper."""

    def test_rows_have_a_cell_for_each_column(self):
        """Each line has as many cells as the tabular has columns, in every table of every analysis."""
        for analysis in analyses():
            for table in tex_tables(analysis).values():
                assert all(len(row) == len(table.columns) for row in table.rows)
                assert f"\\begin{{tabular}}{{{'l' * len(table.columns)}}}" in table.text()
                assert table.text().count(r"\\") >= 1 + len(table.rows)

    def test_headline(self):
        """Value, intervals and systematic error, with the unit."""
        lines = tex_tables(made_analysis())["crossover"].text().splitlines()
        assert r"$W_{c}$ (t) & $16.53(12)$ & [$16.41$, $16.65$] & [$16.29$, $16.77$] & $0.05$ \\" in lines
        assert r"$\nu$ & $1.570(50)$ & [$1.520$, $1.620$] & [$1.472$, $1.668$] & -- \\" in lines

    def test_ansatze_are_ranked(self):
        """The best form stands first with zero, the others with the difference and its Monte Carlo error."""
        rows = tex_tables(made_analysis())["ansatze"].rows
        # errors of 0.05 each: 0.05 sqrt 2 = 0.0707
        assert [row[:2] for row in rows] == [
            (r"\texttt{power-law:corrected}", "$0$"), (r"\texttt{power-law}", "$-1.000(71)$"),
        ]  # fmt: skip

    def test_crossings_list_every_pair(self):
        """Ten pairs of five sizes, each with its position."""
        rows = tex_tables(made_analysis())["crossings"].rows
        assert len(rows) == 10
        assert rows[0][:5] == ("$6$", "$8$", "$1.00$", "$0.99$", "$16.07(12)$")

    def test_a_one_sided_limit_is_a_bound(self):
        """A limit that the data constrain on one side is written as a bound, and an unbounded law has none."""
        analysis = made_analysis()
        lopsided = Interval(6.3, 5.0, 8.8, 4.9, 14.0)
        laws = [law for law in analysis.drift.laws if law.name == "inverse"]
        object.__setattr__(laws[0], "limit", lopsided)
        rows = {row[0]: row for row in tex_tables(analysis)["drift"].rows}
        assert rows["$a + b/L$"][4:6] == (r"$>4.9$ (97.5\,\%)", "--")
        assert rows["$a + b L$"][4:6] == ("--", "--")
        assert rows["$a$"][4] == "$16.18(10)$"

    def test_nothing_to_show_is_said(self):
        """Without headline or laws the tables hold a sentence in place of rows."""
        made = tex_tables(made_analysis(code="undecided", crossover=False, note="Too few pairs, 50%."))
        assert r"\multicolumn{5}{l}{no form with a critical disorder was fitted} \\" in made["crossover"].text()
        assert r"\multicolumn{7}{l}{Too few pairs, 50\%.} \\" in made["drift"].text()

    def test_every_law_is_written(self):
        """All laws of the drift are in the table of a run that fits them, with formulas that compile."""
        assert all(faults(f"${law.tex}$") == [] for law in LAWS.values())


@pytest.mark.latex
def test_pdflatex_and_bibtex_accept_everything(tmp_path):
    """The files of every kind of analysis, in an article with booktabs, compile without an error."""
    programs = [shutil.which(name) for name in ("pdflatex", "bibtex")]
    assert all(programs), "pdflatex and bibtex are missing: apt-get install texlive-latex-recommended"
    body = []
    for i, analysis in enumerate(analyses()):
        text = methods(analysis)
        (tmp_path / f"methods{i}.tex").write_text(text, encoding="utf-8")
        body.append(f"\\input{{methods{i}}}")
        for stem, table in tex_tables(analysis).items():
            (tmp_path / f"{stem}{i}.tex").write_text(table.text(), encoding="utf-8")
            body.append(f"\n\n\\input{{{stem}{i}}}\n\n")
    body += [f"\n\n${latex.mathematics(each)}_{{c}}$ {latex.escape(each)}" for each in (*SPECIAL[:-1], *LABELS.values())
             if not latex.beyond_latex(latex.escape(each))]  # fmt: skip
    (tmp_path / "methods.bib").write_text(bibtex(methods(everything())), encoding="utf-8")
    paper = [r"\documentclass{article}\usepackage{booktabs}\begin{document}", *body,
             r"\bibliographystyle{plain}\bibliography{methods}\end{document}"]  # fmt: skip
    (tmp_path / "paper.tex").write_text("\n".join(paper), encoding="utf-8")
    for command in (["pdflatex", "-halt-on-error", "-interaction=nonstopmode", "paper"], ["bibtex", "paper"]):
        done = subprocess.run(command, cwd=tmp_path, capture_output=True, text=True, errors="replace", timeout=120)
        assert done.returncode == 0, done.stdout[-3000:]
    # a title that was not sure is left out of an entry, and nothing else is
    assert {line.split(" in ")[0] for line in done.stdout.splitlines() if "Warning" in line} == {"Warning--empty title"}
