"""The methods paragraph: true for every kind of run, and citing what was used and nothing else."""

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from analyses import OPENING, made_analysis, made_curves

from driftline.collapse import Comparison, HeldOut, SamplerHealth, weigh
from driftline.curves import Curve, Curves
from driftline.drift import LAWS
from driftline.rates import nearest
from driftline.report.bibliography import REMEMBERED, bibtex, cited, references
from driftline.report.methods import methods
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.scaling.expression import ExpressionForm
from driftline.scaling.forms import FORMS
from driftline.scaling.lengths import LENGTHS
from driftline.scaling.likelihood import NUISANCE
from driftline.scaling.priors import Uniform
from driftline.sensitivity import PriorShift
from driftline.settings import Settings
from driftline.verdict import SUPPORTED

SOURCE = Path(__file__).parent.parent / "src" / "driftline"


def with_fits(analysis, change):
    """The analysis with every fit changed."""
    fits = tuple(change(fit) for fit in analysis.comparison.fits)
    return replace(analysis, comparison=Comparison(fits, weigh(fits)))


def sampled_by(method, *, converged=True):
    """A change of fits: how they were sampled."""
    return lambda fit: replace(fit, sampler=SamplerHealth(method, 1500.0, 40.0, converged, "a note"))


def counted(curves, samples, *, covariance=False, **origin):
    """The curves with numbers of realisations, or with a covariance, or both."""
    made = [
        Curve(c.size, c.disorder, c.mean, c.error, c.noise if covariance else None, samples and samples[i])
        for i, c in enumerate(curves.curves)
    ]
    return Curves(made, curves.labels, {**curves.origin, **origin})


def raw(*, realisations, points=13, error_ratio=1.3, shared=True):
    """What the reader of realisations records of one size."""
    return {"realisations": realisations, "points": points, "error_ratio": error_ratio, "shared": shared}


def everything(method="chain"):
    """An analysis with all default forms, sampled by a chain, with held-out size, costs and prior sets."""
    settings = Settings(ansatze=DEFAULT_ANSATZE, seed=7, quick=method != "chain")
    analysis = made_analysis(names=DEFAULT_ANSATZE, settings=settings)
    held = HeldOut(14.0, 40.0, 0.1, 1.1, *[np.zeros(3)] * 3)
    shift = PriorShift("wide", 0.1, None, 1000.0)
    health = SamplerHealth(method, 1500.0, 40.0, True)
    return with_fits(analysis, lambda fit: replace(fit, sampler=health, held_out=held, prior_sensitivity=(shift,)))


def test_what_was_measured_stands_in_it():
    """Sizes, disorders, unit, points, seed and versions are those of the run."""
    text = methods(made_analysis(settings=Settings(seed=123, ansatze=("power-law",))))
    assert (
        "We analyse the gap ratio $\\langle r\\rangle$ against the disorder strength $W$ (in units of t) for\n"
        "sizes $L$ = $6$, $8$, $10$, $12$ and $14$, each at 13 disorders between $13$ and $20$, 65 points in\nall."
    ) in text
    assert text.endswith("seed 123.\n")
    assert "numba" not in text.replace("Numba", "")
    assert re.search(r"NumPy \d+\.\d+", text)


def test_a_run_with_chains_and_a_quick_one():
    """Chains, their moves and emcee are named where there were chains; a quick run says that there was none."""
    full, quick = methods(everything()), methods(everything("importance"))
    assert "sampled by 64\nwalkers~\\cite{foremanmackey2013}" in full
    assert "50 autocorrelation times" in full.replace("\n", " ")
    assert "There is no Markov chain" not in full
    assert "emcee" in full
    assert "There is no Markov chain" in quick.replace("\n", " ")
    assert "in its quick mode" in quick.replace("\n", " ")
    assert "emcee" not in quick
    assert {"goodman2010", "terbraak2006", "foremanmackey2013"} & set(cited(quick)) == set()


def test_fits_that_did_not_converge_are_named():
    """The reader of the paper learns which numbers are not reliable."""
    assert "did not converge" not in methods(made_analysis())
    text = methods(with_fits(made_analysis(names=("power-law",)), sampled_by("chain", converged=False)))
    assert "the fits of \\texttt{power-law} did not converge" in text.replace("\n", " ")


def test_headline_with_both_errors():
    """Value with statistical and systematic error in brackets, unit, and the interval."""
    text = methods(made_analysis()).replace("\n", " ")
    assert (
        "the data support a transition, with $W_{c}$ = $16.53(12)(5)$\\,t (statistical and systematic error; " in text
    )
    # ends of the 95 % interval of a normal distribution are 1.960 standard deviations away
    assert "95\\,\\% interval [$16.29$, $16.77$]) and $\\nu$ = $1.570(50)$" in text
    assert "no evidence" not in text


def test_without_systematic_error_or_exponent():
    """What was not found is not mentioned."""
    analysis = made_analysis()
    text = methods(replace(analysis, crossover=replace(analysis.crossover, systematic=None, nu=None), stability=()))
    text = text.replace("\n", " ")
    assert "with $W_{c}$ = $16.53(12)$\\,t (statistical error; 95\\,\\% interval [$16.29$, $16.77$]). Finite" in text
    assert "$\\nu$ that we quote" not in text
    assert "Stability rests" not in text
    assert {"chayes1986", "hausman1978"} & set(cited(text)) == set()


@pytest.mark.parametrize("code", ["drifting", "undecided", "size-independent", "insufficient-data"])
def test_no_transition_is_claimed_where_there_is_none(code):
    """The warning comes with the verdict, and the number of the transition forms is said to be no evidence."""
    text = methods(made_analysis(code=code)).replace("\n", " ")
    assert f"Outcome (\\texttt{{{code}}}): {OPENING}" in text
    assert "would give $W_{c}$ = $16.53(12)(5)$" in text
    assert "which is no evidence that there is one" in text
    assert "the data support a transition, with" not in text


def test_measured_rates_and_what_is_not_excluded():
    """The rates of wrong verdicts on simulated data and the drift left open stand with the outcome."""
    analysis = made_analysis(names=("power-law:corrected", "power-law:linear-drift"))
    rates = replace(analysis.verdict, false_alarm=nearest(analysis.curves))
    text = methods(replace(analysis, verdict=rates)).replace("\n", " ")
    assert f"the forms with a critical disorder hold a probability of {SUPPORTED:g} or more" in text
    assert "A critical disorder that moves by less than" in text
    assert "Measured on simulated data of known truth" in text
    assert "Measured on simulated data" not in methods(made_analysis()).replace("\n", " ")


def test_nothing_to_quote():
    """Without a form that has a critical disorder no number is given, and the drift says why it has no law."""
    note = "Only 1 pair of neighbouring sizes can be used, and at least two are needed to see a drift."
    text = methods(made_analysis(code="undecided", crossover=False, note=note)).replace("\n", " ")
    assert "None of the forms has a critical disorder, so none is quoted." in text
    assert "16.53" not in text
    assert f"No law of the drift is fitted. {note}" in text
    assert "lmfit" not in text
    assert {"binder1981", "luck1985", "chayes1986"} & set(cited(text)) == set()


class TestErrors:
    """What is said of the errors and of correlations."""

    def said(self, curves):
        return methods(made_analysis(curves)).replace("\n", " ")

    def test_counts(self):
        """The least and the largest number of realisations, or a reminder to add them."""
        counts = [np.full(13, n) for n in (4000, 2000, 1000, 500, 140)]
        assert "of which there are 140 to 4000 a point." in self.said(counted(made_curves(), counts))
        assert "of which there are 500 a point." in self.said(counted(made_curves(), [np.full(13, 500)] * 5))
        assert "The data do not say how many" in self.said(made_curves())
        assert "The data do not say how many" not in self.said(counted(made_curves(), counts))

    def test_independent_and_correlated_points(self):
        """A covariance is named with the sizes it belongs to, and what is made of it."""
        text = self.said(made_curves())
        assert "All points are treated as independent." in text
        assert {"weigel2010", "dodelson2013"} & set(cited(text)) == set()
        text = self.said(counted(made_curves(), None, covariance=True))
        assert "The covariance of the points that share disorder realisations enters every fit" in text
        assert "weigel2010" in cited(text)
        assert "dodelson2013" not in cited(text)  # without a count there is nothing to doubt it by
        text = self.said(counted(made_curves(), [np.full(13, 500)] * 5, covariance=True))
        assert "multiplied by $1 + k/n$" in text
        assert "ledoit2020" not in cited(text)  # the covariance came with the data

    @pytest.mark.parametrize(("n", "key"), [(500, "ledoit2020"), (15, "chen2010")])
    def test_realisations(self, n, key):
        """From raw values: what is averaged first, over what, and which shrinkage the covariance has."""
        origin = {"realisations": [raw(realisations=n)] * 5, "input": {"average": "median"}}
        text = self.said(counted(made_curves(), [np.full(13, n)] * 5, covariance=True, **origin))
        assert "averaged first; then the median over disorder realisations is taken" in text
        assert {"ledoit2020", "chen2010"} & set(cited(text)) == {key}
        single = {"realisations": [raw(realisations=n, error_ratio=None, shared=False)] * 5}
        text = self.said(counted(made_curves(), [np.full(13, n)] * 5, **single))
        assert "For every point the mean over disorder realisations is taken." in text

    def test_without_disorder(self):
        """A model without disorder has samples, no realisations, and no bound on the exponent."""
        text = self.said(made_curves().relabel(disorder_kind="none"))
        assert "standard errors over independent samples." in text
        assert "realisations." not in text
        assert "chayes1986" not in cited(text)


def test_selection():
    """A window and a smallest size are said, and nothing where none was given."""
    text = methods(made_analysis(settings=Settings(window=(13, 19), smallest_size=8, ansatze=("power-law",))))
    text = text.replace("\n", " ")
    assert "Sizes below $8$ were left out. Disorders outside the window from $13$ to $19$ were left out." in text
    assert "left out" not in methods(made_analysis()).split("Every curve")[0]


def test_every_default_form_has_formula_source_and_prior():
    """The three hypotheses with their forms, and each prior once."""
    text = methods(everything()).replace("\n", " ")
    assert (
        "Forms with a critical disorder: $\\xi = |W - W_c|^{-\\nu}$~\\cite{fisher1972} (\\texttt{power-law} and" in text
    )
    assert "Forms whose crossover moves on with size: " in text
    assert "$\\xi = |W - W_c|^{-\\nu},\\ W_c(L) = a + b L$" in text
    assert "Forms without a critical disorder: $x = L/\\xi(W)" in text
    assert "$x = W$ (\\texttt{size-independent})" in text
    assert text.count("$\\nu$ log-uniform from $0.2$ to $10$") == 1
    assert "$W_\\mathrm{mid}$ uniform from $11.25$ to $21.75$" in text
    assert "$D$ normal around $0$ with sd $1.75$" in text
    assert "The 3 hypotheses have equal prior probability" in text
    assert "The means of the largest size, $L$ = $14$, are predicted" in text
    assert "no rival is compared" in methods(made_analysis()).replace("\n", " ")


def test_forms_that_do_not_suit_the_data_are_named():
    """A default form that was left out is not passed over in silence."""
    analysis = made_analysis(settings=Settings(ansatze=("power-law", "power-law:corrected", "size-ratio")))
    assert "do not suit these data: \\texttt{size-ratio}." in methods(analysis).replace("\n", " ")


def test_a_form_of_the_users_own_and_an_amplitude():
    """The user's formula stands as typed, escaped, and its parameters keep their names and priors."""
    own = ExpressionForm("my_form", "(W - W_c) * L**a_1", "transition",
                         {"W_c": Uniform(14, 19), "a_1": Uniform(0, 2)})  # fmt: skip
    analysis = made_analysis(names=("power-law:amplitude",))
    fit = analysis.comparison.fits[0]
    mine = replace(fit, ansatz=replace(fit.ansatz, name="my_form", form=own, has_amplitude=False,
                                       parameters=own.parameters(fit.curves)))  # fmt: skip
    both = Comparison((fit, mine), weigh((fit, mine)))
    text = methods(replace(analysis, comparison=both)).replace("\n", " ")
    assert "\\texttt{x = (W - W\\_c) * L**a\\_1} of our own (\\texttt{my\\_form})" in text
    assert "\\texttt{a\\_1} uniform from $0$ to $2$" in text
    assert "(L/L_0)^{\\kappa_A}[F(x)]" in text
    assert "G(x)" not in text
    assert "slevin1999" not in cited(text)


def test_labels_of_the_data_are_escaped():
    """Text of the data file cannot end a comment, open a group or run a command."""
    hostile = made_curves().relabel(
        observable=r"50% of \input{x} & #1_", observable_symbol="a_b_c", disorder_symbol=r"h_x", disorder_unit="J_{"
    )
    text = methods(made_analysis(hostile)).replace("\n", " ")
    assert r"50\% of \textbackslash{}input\{x\} \& \#1\_ $\mbox{a\_b\_c}$" in text
    assert r"(in units of J\_\{)" in text
    assert "${h_{x}}_{c}$ = " in text


def branches():
    """Texts of runs that together use every method."""
    kinds = [everything(), everything("importance")]
    counts = [np.full(13, 500)] * 5
    for n in (500, 15):
        origin = {"realisations": [raw(realisations=n)] * 5}
        kinds.append(made_analysis(counted(made_curves(), counts, covariance=True, **origin)))
    kinds.append(made_analysis(made_curves().relabel(disorder_kind="quasiperiodic")))
    return [methods(each) for each in kinds]


class TestBibliography:
    """The references beside the text."""

    def test_the_file_holds_what_is_cited_and_nothing_else(self):
        """Every key that a text cites has its entry in its `.bib` file, and only those do."""
        for text in branches():
            entries = set(re.findall(r"^@\w+\{(\w+),$", bibtex(text), re.MULTILINE))
            assert entries == set(cited(text))
            assert entries <= set(references())

    def test_no_reference_is_without_use(self):
        """Every reference is cited by some kind of run."""
        assert set(references()) - {key for text in branches() for key in cited(text)} == set()

    def test_entries_agree_with_the_sources_in_the_code(self):
        """Volume, page and year of an article stand so in a docstring or comment, or it is said to be from memory."""
        code = " ".join(path.read_text(encoding="utf-8") for path in SOURCE.rglob("*.py"))
        code = re.sub(r"\s*\n\s*(?:#:? )?", " ", code)
        for key, entry in references().items():
            found = dict(re.findall(r"(\w+) = \{([^{}]*)\}", entry))
            assert found["year"] == re.search(r"\d{4}$", key)[0]
            if entry.startswith("@article") and key not in REMEMBERED:
                assert f"{found['volume']}, {found['pages']} ({found['year']})" in code, key

    def test_what_is_from_memory_is_marked_in_the_file(self):
        """The head of the file names those of its entries that were written from memory."""
        text = bibtex(methods(everything()))
        head = text[: text.index("@")]
        assert all(line.startswith("%") or not line for line in head.splitlines())
        for key in cited(methods(everything())):
            assert (key in head) == (key in REMEMBERED)

    def test_forms_cite_the_papers_they_name(self):
        """Each key of a length or form belongs to a paper in its line of sources."""
        for form in (*LENGTHS.values(), *FORMS.values()):
            for key in form.citations:
                found = dict(re.findall(r"(\w+) = \{([^{}]*)\}", references()[key]))
                assert f"{found['volume']}, {found['pages']} ({found['year']})" in form.source

    def test_entries_are_sound(self):
        """Braces are balanced, and an article has author, journal, volume, pages and year."""
        for key, entry in references().items():
            assert entry.count("{") == entry.count("}"), key
            needed = ("author", "journal", "volume", "pages", "year") if entry.startswith("@article") else ("author",)
            assert all(f"{field} = " in entry for field in needed), key


def test_constants_are_read_from_the_code(monkeypatch):
    """Negative control: a changed threshold changes the text, so that no number is written down twice."""
    from driftline import cautions, separation as module  # noqa: I001

    monkeypatch.setattr(cautions, "ESTABLISHED", 0.987)
    monkeypatch.setattr(module, "THRESHOLD", 4.0)
    text = methods(made_analysis()).replace("\n", " ")
    assert "the laws of the drift with a limit hold a probability of 0.987 or more" in text  # one hypothesis alone
    assert text.count("resolved at 4 standard deviations") == 2


def test_every_law_and_nuisance_has_its_latex():
    """Laws and parameters that every run may use can be written."""
    assert all(law.tex for law in LAWS.values())
    assert all(parameter.symbol for parameter in NUISANCE)
