"""Scaling forms of the user's own: the arithmetic, the form, its tables, and what is refused."""

from __future__ import annotations

import ast
import json
import math
import pickle
import re
import time
from dataclasses import replace
from pathlib import Path

import asteval
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import driftline as dl
from driftline.analysis import headline_basis
from driftline.cli import main
from driftline.collapse import Comparison, fit_collapse
from driftline.errors import ConfigurationError
from driftline.report.configuration import to_toml
from driftline.report.record import record
from driftline.scaling.ansatz import parse_ansatz
from driftline.scaling.arithmetic import FUNCTIONS, MOST_CHARACTERS, WHERE, parse_formula
from driftline.scaling.expression import ExpressionForm, symbol
from driftline.scaling.likelihood import Posterior
from driftline.scaling.priors import LogNormal, LogUniform, Normal, Uniform
from driftline.scaling.tables import form_table, read_forms
from driftline.simulate import PowerLawTruth, simulate

SIZES, GRID = (8, 10, 12, 16), np.linspace(2.0, 6.0, 13)
NAMES = ("W", "L", "W_c", "nu")
POWER_LAW = "(W - W_c) * L**(1/nu)"
#: The priors that `power-law` has on `GRID`: W_c a quarter of the range beyond it on each side.
PRIORS = {"W_c": Uniform(1.0, 7.0), "nu": LogUniform.between(0.2, 10.0)}
TABLE = {
    "x": POWER_LAW,
    "hypothesis": "transition",
    "parameters": {
        "W_c": {"prior": "uniform", "low": 1, "high": 7},
        "nu": {"prior": "log-uniform", "low": 0.2, "high": 10},
    },
}


#: The same examples every time, and no judgement by the wall clock, which on a busy machine means nothing.
QUIET = settings(deadline=None, derandomize=True, database=None, suppress_health_check=[HealthCheck.too_slow])


def curves(correlation: float = 0.0) -> dl.Curves:
    """Four sizes with a transition at 4."""
    return simulate(SIZES, GRID, PowerLawTruth(4.0), 0.003, 5, correlation=correlation)


def form(x: str = POWER_LAW, hypothesis: str = "transition", **priors: object) -> ExpressionForm:
    """A form called my-form; the priors of the power law unless others are given."""
    return ExpressionForm("my-form", x, hypothesis, priors or PRIORS)


def refusal(text: str) -> pytest.RaisesExc:
    """Match the whole of an error message."""
    return pytest.raises(ConfigurationError, match=f"^{re.escape(text)}$")


# --- the same as a form of the program ----------------------------------------------------------------------------


@pytest.mark.parametrize("tail", ["", ":corrected", ":amplitude", ":corrected:amplitude=0.3"])
@pytest.mark.parametrize("correlation", [0.0, 0.5])
def test_a_power_law_as_text_has_the_density_of_the_power_law(tail: str, correlation: float) -> None:
    """The same form with the same priors gives the same log posterior density at every parameter vector."""
    data = curves(correlation)
    own = Posterior(data, parse_ansatz(f"my-form{tail}", data, [form()]))
    built_in = Posterior(data, parse_ansatz(f"power-law{tail}", data))
    z = built_in.from_unit(np.random.default_rng(1).uniform(0.05, 0.95, (200, built_in.dimension)))
    expected = built_in(z)
    assert np.isfinite(expected).all()
    # Sizes are in other units, so L**(1/nu) is rounded differently, by up to ln(16)/0.2 = 14 eps on each side; x - low
    # doubles that and the span divides by as much again: below 100 eps of the axis
    np.testing.assert_allclose(own.positions(z), built_in.positions(z), rtol=0, atol=100 * np.finfo(float).eps)
    # cancelling y^T C^-1 y ~ 1e5 down to Q ~ 1e2 amplifies 100 roundings to 1e-11, a correlation with condition ~ 30 to
    # less than 1e-9, of terms of which those independent of Q are about 52 points times ln(1/0.003) / 2 ~ 200
    np.testing.assert_allclose(own(z), expected, rtol=1e-9, atol=1e-9 * 200)
    assert np.max(np.abs(own(z + 1e-6) - expected)) > 1e-4  # negative control


def test_evidence_agrees_within_monte_carlo_error() -> None:
    """With another seed the evidence and the parameters are those of the built-in form, and another prior is seen."""
    data = curves()
    built_in = fit_collapse(data, "power-law", seed=1, quick=True, extras=False)
    own = fit_collapse(data, "my-form", forms=[form()], seed=2, quick=True, extras=False)
    error = math.hypot(own.log_evidence_error, built_in.log_evidence_error)
    assert abs(own.log_evidence - built_in.log_evidence) < 4 * error  # false alarm 6e-5
    assert own.ansatz.hypothesis == "transition"
    # negative control: W_c uniform over twice the range costs ln 2 = 0.69 and no more than its error hides that
    wide = form(W_c=Uniform(-2.0, 10.0), nu=PRIORS["nu"])
    other = fit_collapse(data, "my-form", forms=[wide], seed=2, quick=True, extras=False)
    assert built_in.log_evidence - other.log_evidence == pytest.approx(math.log(2), abs=4 * error)
    assert 4 * error < math.log(2)


def test_a_falling_variable_serves_as_well() -> None:
    """x and -x are the same form, since the scaling function is free."""
    data = curves()
    z = Posterior(data, parse_ansatz("power-law:corrected", data)).from_unit(
        np.random.default_rng(3).uniform(0.1, 0.9, (50, 5))
    )
    rising, falling = (
        Posterior(data, parse_ansatz("my-form:corrected", data, [form(x)]))(z) for x in (POWER_LAW, f"-{POWER_LAW}")
    )
    np.testing.assert_allclose(falling, rising, rtol=1e-9)  # positions 1 - u: rounding as in the first test


# --- zero likelihood ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("correlation", [0.0, 0.5])
@pytest.mark.parametrize(
    ("x", "p"),
    [
        ("W * L**p + 0*sqrt(1 - p)", 2.0),  # NaN
        ("W * L**p * exp(500*p)", 2.0),  # infinite
        ("W * maximum(2 - p, 0) * L", 3.0),  # the same at all points
        ("(W - 4) * (1e308 * p) * L", 0.05),  # finite, but wider than numbers go
    ],
)
def test_undefined_vectors_are_impossible_and_leave_their_neighbours_alone(
    x: str, p: float, correlation: float
) -> None:
    """Where x is not finite or constant the likelihood is zero, silently, and the other rows keep their numbers."""
    data = curves(correlation)
    target = Posterior(data, parse_ansatz("my-form", data, [form(x, "drift", p=Normal(0.0, 1e-3))]))
    good, bad = np.array([0.001, -3.0, 0.0]), np.array([p, -3.0, 0.0])
    together = target.log_likelihood(np.array([good, bad, good]))
    assert together[1] == -np.inf
    assert np.isfinite(together[0])
    assert together[0] == together[2] == target.log_likelihood(good[None])[0]


def test_a_fit_beside_an_undefined_region_is_quiet() -> None:
    """A form undefined in the tail of its prior is fitted without a warning, to finite numbers."""
    data = curves()
    own = form("arcsinh((W - W_c) * L**p / sqrt(2.5 - p))", W_c=Uniform(1, 7), p=Normal(1.0, 0.8))
    fit = fit_collapse(data, "my-form", forms=[own], seed=1, quick=True)
    assert np.isfinite(fit.points.x).all()
    assert math.isfinite(fit.log_evidence)
    assert fit.parameters["W_c"].contains(4.0, level=95)
    assert fit.draws("p").max() < 2.5


# --- what a form must be ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("x", "sentence"),
    [
        (
            "log(W - W_c) * L",
            "form 'my-form': x = log(W - W_c) * L is not a finite number at 213 of 256 draws of its priors, for "
            "example at W = 2, L = 8, W_c = 4.012; change x or narrow the priors",
        ),
        (
            "0*W + L**W_c",
            "form 'my-form': x = 0*W + L**W_c is the same for all disorders of a size; let it rise or fall with W",
        ),
    ],
)
def test_forms_that_make_no_sense_on_the_data_are_refused(x: str, sentence: str) -> None:
    """x must be defined at draws of the prior and depend on W."""
    own = form(x, W_c=Uniform(1, 7))
    with refusal(sentence):
        fit_collapse(curves(), "my-form", forms=[own])


@pytest.mark.parametrize(
    ("change", "sentence"),
    [
        ({"x": "L**(1/nu) - W_c"}, "x does not depend on the disorder W; put W into it"),
        (
            {"x": "(W - W_c) / nu"},
            "x does not depend on the size L, so it cannot stand for a transition; put L into it, or set hypothesis = "
            '"none"',
        ),
        ({"x": "(W - W_c) * L"}, "x does not use the parameter 'nu'; put it into x or take its prior away"),
        ({"x": 3}, "x must be text, not 3"),
        ({"hypothesis": "maybe"}, "hypothesis must be one of transition, drift, none, not 'maybe'"),
        ({"prior": {}}, "unknown key 'prior'; known are x, hypothesis, parameters"),
        ({"hypothsis": 1}, "unknown key 'hypothsis', did you mean 'hypothesis'?; known are x, hypothesis, parameters"),
        ({"parameters": []}, "parameters must be a table of priors by name, not []"),
    ],
)
def test_bad_tables_are_refused(change: dict[str, object], sentence: str) -> None:
    """Each mistake in a table has one sentence with place, rule and remedy."""
    with refusal(f"run.toml, ansatz: form 'my-form': {sentence}"):
        read_forms({"my-form": {**TABLE, **change}}, "run.toml, ansatz")


@pytest.mark.parametrize(
    ("name", "prior", "sentence"),
    [
        ("W_c", 3, 'must be a prior such as { prior = "uniform", low = 2, high = 6 }, not 3'),
        (
            "W_c",
            {"prior": "unifrom", "low": 1, "high": 2},
            "prior must be one of uniform, log-uniform, normal, log-normal, not 'unifrom', did you mean 'uniform'?",
        ),
        ("W_c", {"prior": "uniform", "low": 6, "high": 2}, "low = 6 must lie below high = 2"),
        ("W_c", {"prior": "uniform", "low": 1}, "high is missing; give low and high"),
        (
            "W_c",
            {"prior": "uniform", "low": 1, "high": 10**400},
            "high must be a finite number, not a whole number of 1329 bits",
        ),
        ("W_c", {"prior": "uniform", "low": True, "high": 2}, "low must be a finite number, not True"),
        ("nu", {"prior": "log-uniform", "low": 0, "high": 2}, "low must be positive in a logarithmic prior, not 0"),
        ("nu", {"prior": "normal", "mean": 0, "sd": 0}, "sd must be positive, not 0"),
        (
            "nu",
            {"prior": "log-normal", "median": -1, "sd": 1},
            "median must be positive in a logarithmic prior, not -1",
        ),
        (
            "nu",
            {"prior": "normal", "median": 1, "sd": 1},
            "unknown key 'median', did you mean 'mean'?; known are prior, mean, sd",
        ),
        ("exp", TABLE["parameters"]["nu"], "this is the name of a function or constant; choose another name"),
        ("pi", TABLE["parameters"]["nu"], "this is the name of a function or constant; choose another name"),
        ("L", TABLE["parameters"]["nu"], "W is the disorder and L the size; choose another name"),
        ("omega", TABLE["parameters"]["nu"], "the program has a parameter of this name itself; choose another name"),
        ("lambda", TABLE["parameters"]["nu"], "this is a word of the Python language; choose another name"),
        (
            "__class__",
            TABLE["parameters"]["nu"],
            "the name must be up to 24 letters, digits and _, and begin with a letter; choose another name",
        ),
    ],
)
def test_bad_priors_are_refused(name: str, prior: object, sentence: str) -> None:
    """Each mistake in a prior or in the name of a parameter has one sentence."""
    table = {**TABLE, "parameters": {**TABLE["parameters"], name: prior}}
    with refusal(f"ansatz: form 'my-form': parameter {name!r}: {sentence}"):
        read_forms({"my-form": table}, "ansatz")


@pytest.mark.parametrize("name", ["power-law", "size-ratio", "log-drift", "corrected", "amplitude"])
def test_names_of_the_program_are_taken(name: str) -> None:
    """A form cannot replace a part of the program."""
    with refusal(f"ansatz: form {name!r}: the program has a part of this name itself; choose another name"):
        read_forms({name: TABLE}, "ansatz")


@pytest.mark.parametrize("name", ["a:b", "amplitude=2", "../x", "", "n\u00fc", "a" * 41, 3])
def test_odd_names_of_forms_are_refused(name: object) -> None:
    """A name holds letters, digits, - and _, as it goes into ansatz names and files."""
    with pytest.raises(ConfigurationError, match="the name must be up to 40 letters, digits, - and _"):
        ExpressionForm(name, POWER_LAW, "transition", PRIORS)


def test_priors_without_width_are_refused() -> None:
    """From Python, too, a prior must be one of the four and have some width."""
    with pytest.raises(ConfigurationError, match=r"the prior \(uniform from 7 to 1\) has no width"):
        form(W_c=Uniform(7, 1), nu=PRIORS["nu"])
    with pytest.raises(ConfigurationError, match="the prior must be one of Uniform, LogUniform, Normal, LogNormal"):
        form(W_c=4.0, nu=PRIORS["nu"])


# --- arithmetic ---------------------------------------------------------------------------------------------------

HOSTILE = (
    "__import__('os').system('true')", "W.__class__.__mro__", "().__class__", "open(W)", "eval(W)", "exec(W)",
    "W[0]", "[W][0]", "{W: L}", "f'{W}'", "'W'", 'b"W"', "lambda: W", "(lambda W: W)(W)", "(W := 3)",
    "[W for W in L]", "sum(W for W in L)", "W if L else 2", "exp(*W)", "exp(**W)", "exp(x=W)", "exp", "exp(W)(L)",
    "__builtins__", "getattr(W, L)", "globals()", "np.exp(W)", "exp.__call__(W)", "pi.real", "1j * W", "True * W",
    "None", "...", "9**9**9 * W", "W * 9**9**9**9**9", "W**(10**10**10)", "1e999 * W", "9" * 400 + "*W", "1/0*W",
    "log(-1) * W", "W // 2", "W % 2", "W @ L", "W << 64", "~W", "W and L", "not W", "W < L < 2", "W == L", "W is L",
    "W, L", "W; L", "W\nimport os", "import os", "del W", "yield W", "await W", "W L", "(W", "W +", "", " ",
    "\u0435\u0445\u0440(W)", "\uff45xp(W)", "W\u00a0+ L", "\u212f**W", "W\x00", "W\\\nL", "#W", "W # L", "0x1G", "2W",
    "-" * 400 + "W", "(" * 240 + "W" + ")" * 240, "not " * 100 + "W", "exp(" * 90 + "W" + ")" * 90,
    "W + " * 120 + "W", "W" * 499, "W" * 10**6, "exp()", "exp(W, L)", "where(W, L)", "Wc", "W_c.", "W..L", "print(W)",
)  # fmt: skip


@pytest.mark.parametrize("text", HOSTILE, ids=range(len(HOSTILE)))
def test_hostile_text_is_refused(text: str) -> None:
    """Whatever is not arithmetic of W, L and the parameters is refused with one short line."""
    with pytest.raises(ConfigurationError) as caught:
        parse_formula(text, NAMES)
    assert "\n" not in str(caught.value)
    assert len(str(caught.value)) < 500


def test_whole_sentences() -> None:
    """The commonest mistakes are explained with the remedy."""
    for text, sentence in {
        "(W - Wc) * L": "uses 'Wc', which is none of W, L, W_c, nu; did you mean 'W_c'?",
        "W ^ 2": "holds the character '^', which has no place in arithmetic; powers are written **",
        "exp * W": "holds the function exp without its argument; write exp(...)",
        "W + 9**9**9": "holds 9 ** 9 ** 9, which is not a finite number",
        "exp(W": "is not complete arithmetic near column 4; check brackets and operators",
    }.items():
        with refusal(sentence):
            parse_formula(text, NAMES)
    with refusal("form 'my-form': x is empty; write the scaled variable as arithmetic of W, L and the parameters"):
        form("")


def test_nothing_but_the_listed_nodes_passes() -> None:
    """Of all kinds of node that Python has, an accepted formula holds only these."""
    allowed = {
        ast.Constant, ast.Name, ast.Load, ast.UnaryOp, ast.UAdd, ast.USub, ast.BinOp, ast.Add, ast.Sub, ast.Mult,
        ast.Div, ast.Pow, ast.Compare, ast.Lt, ast.Gt, ast.Call,
    }  # fmt: skip
    text = "where(W < W_c, -(W - W_c), +hypot(W, pi) / 2) * L**(1/nu) + minimum(W, 3) * (L > 9)"
    formula = parse_formula(text, NAMES)
    assert {type(node) for node in ast.walk(formula._tree)} == allowed
    assert formula.names == set(NAMES)


VALUES = {"W": np.linspace(2.0, 6.0, 7), "L": np.linspace(8.0, 14.0, 7), "W_c": np.array([[3.1], [4.2]]),
          "nu": np.array([[0.7], [1.9]])}  # fmt: skip


@pytest.mark.parametrize(
    "text",
    [
        "(W - W_c) * L**(1/nu)", "sign(W - W_c) * L * exp(-nu/sqrt(abs(W - W_c)))", "W**2 - -L + 3e-2*nu",
        "where(W > W_c, 1/W, tanh(W))", "arctan2(W, L) - hypot(W_c, nu) * pi", "2**-W**0.5",
        "log(W)/log10(L) - exp(-W)",
    ],
)  # fmt: skip
def test_values_are_those_of_another_interpreter(text: str) -> None:
    """asteval computes the same numbers, row by row."""
    other = asteval.Interpreter(minimal=True)
    formula = parse_formula(text, NAMES)
    found = np.broadcast_to(formula(VALUES), (2, 7))
    for row in range(2):
        other.symtable.update({name: value[row] if value.ndim == 2 else value for name, value in VALUES.items()})
        # the same numpy functions in the same order: equal to the last bit but for vectorised loops, 4 ulp
        np.testing.assert_allclose(found[row], other(text, raise_errors=True), rtol=4 * np.finfo(float).eps)


def names_and_numbers() -> st.SearchStrategy[str]:
    """Well-formed arithmetic of growing depth."""
    leaves = st.sampled_from([*NAMES, "2", "0.5", "1e-3", "pi", "0"])

    def grow(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
        unary = [name for name, function in FUNCTIONS.items() if function.nin == 1]
        return st.one_of(
            st.builds("({} {} {})".format, inner, st.sampled_from(["+", "-", "*", "/", "**", "<"]), inner),
            st.builds("{}({})".format, st.sampled_from(["-", *unary]), inner),
            st.builds("where({}, {}, {})".format, inner, inner, inner),
        )

    return st.recursive(leaves, grow, max_leaves=12)


#: Seconds for one text: it takes below 0.01 s as a rule, and what is to be excluded takes minutes or does not end.
LONGEST = 1.0
PIECES = [*NAMES, *FUNCTIONS, "where", "**", "(", ")", ",", "<", ".", "9", "e", "_", "import", "lambda", ":", "[", "]",
          "'", "=", " ", "\n", "__class__", "if", "for", "0x", "j", "\u0435", "*"]  # fmt: skip


@settings(QUIET, max_examples=250)
@given(
    st.one_of(
        st.text(max_size=60),
        st.text(alphabet="WLnu_c0159.+-*/()<>, e", max_size=40),
        st.lists(st.sampled_from(PIECES), max_size=25).map("".join),
        names_and_numbers(),
    )
)
def test_any_text_is_refused_or_gives_numbers(text: str) -> None:
    """Random text either is refused with a sentence or gives floats of the right shape, nothing else, and soon."""
    start = time.process_time()  # of the processor, so that a busy machine does not count
    try:
        formula = parse_formula(text, NAMES)
    except ConfigurationError:
        assert time.process_time() - start < LONGEST
        return
    value = formula(VALUES)
    assert time.process_time() - start < LONGEST
    assert value.dtype == np.float64
    assert np.broadcast_shapes(value.shape, (2, 7)) == (2, 7)
    assert parse_formula(formula.text, NAMES) == formula


def test_most_random_arithmetic_is_accepted() -> None:
    """Negative control of the fuzzing: well-formed arithmetic without constant infinities is not refused wholesale."""
    refused = []

    @settings(QUIET, max_examples=100)
    @given(names_and_numbers())
    def count(text: str) -> None:
        try:
            parse_formula(text, NAMES)
        except ConfigurationError as reason:
            refused.append(str(reason))

    count()
    assert len(refused) < 50
    assert all(re.search("not a finite number|characters", reason) for reason in refused)


def test_long_text_is_refused_before_it_is_parsed() -> None:
    """The limit of the length is exact."""
    text = "W" + " + W" * 30
    parse_formula(text + " " * (MOST_CHARACTERS - len(text)), NAMES)
    with refusal(f"has {MOST_CHARACTERS + 1} characters; shorten it to at most {MOST_CHARACTERS}"):
        parse_formula(text + " " * (MOST_CHARACTERS + 1 - len(text)), NAMES)


# --- there and back -----------------------------------------------------------------------------------------------

positive = st.floats(1e-6, 1e6)


@settings(QUIET, max_examples=60)
@given(low=positive, factor=st.floats(1.01, 100), mean=st.floats(-1e6, 1e6), sd=st.floats(1e-3, 20))
def test_forms_survive_the_configuration_file(low: float, factor: float, mean: float, sd: float) -> None:
    """A form written as TOML is read back as an equal one, its priors to the last bit."""
    own = ExpressionForm(
        "my-form", "a*W + b*L + c + d", "drift",
        {
            "a": LogUniform.between(low, low * factor), "b": LogNormal.around(low, sd), "c": Normal(mean, sd),
            "d": Uniform(mean, mean + low),
        },
    )  # fmt: skip
    assert read_forms({"my-form": form_table(own)}, "") == (own,)
    assert pickle.loads(pickle.dumps(own)) == own


def test_numbers_stay_as_they_were_typed() -> None:
    """A bound of 0.2 is written as 0.2, though the program keeps its logarithm."""
    table = form_table(form())
    assert json.dumps(table["parameters"]["nu"]) == '{"prior": "log-uniform", "low": 0.2, "high": 10.0}'


def test_symbols() -> None:
    """Greek letters are set as such, what follows an underscore as an index."""
    assert [symbol(name) for name in ("nu", "W_c", "a_below", "slope")] == [
        r"\nu", "W_{c}", r"a_{\mathrm{below}}", r"\mathrm{slope}",
    ]  # fmt: skip


TOML = """
ansatze = ["my-form", "my-form:corrected"]
quick = true
draws = 500
[ansatz.my-form]
x = '''(W - W_c)
       * L**(1/nu) * exp(-a*L)'''
hypothesis = "transition"
[ansatz.my-form.parameters]
W_c = { prior = "uniform", low = 2, high = 6 }
nu = { prior = "log-uniform", low = 0.2, high = 10 }
a = { prior = "normal", mean = 0, sd = 0.1 }
[ansatz.bare]
x = "W"
hypothesis = "none"
"""


def resolved(folder: Path, text: str) -> dl.Settings:
    """The settings in this text."""
    file = folder / "run.toml"
    file.write_text(text, encoding="utf-8")
    return dl.Settings.resolve(file)


def test_analysis_with_an_own_form_is_repeatable_from_its_configuration(tmp_path: Path) -> None:
    """The written configuration gives equal settings, and an own form goes through the whole job on two processes."""
    data = simulate((8, 12, 16), GRID, PowerLawTruth(4.0), 0.003, 5)
    asked = resolved(tmp_path, TOML)
    again = resolved(tmp_path, to_toml(asked))
    assert again == asked  # priors to the last bit, so the same seed gives the same numbers
    result = record(dl.analyse(data, settings=replace(again, jobs=2)))
    assert result["config"]["forms"]["my-form"]["x"] == "(W - W_c) * L**(1/nu) * exp(-a*L)"
    assert [entry["ansatz"] for entry in result["collapse"]] == ["my-form", "my-form:corrected"]
    assert result["crossover"]["basis"] == ["my-form:corrected"]
    assert {row["ansatz"] for row in result["stability"]} == {"my-form:corrected"}


def test_own_forms_are_listed(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """`driftline ansatze --config` shows them with formula, hypothesis and priors."""
    resolved(tmp_path, TOML)
    assert main(["ansatze", "--config", str(tmp_path / "run.toml")]) == 0
    out = capsys.readouterr().out
    assert "\nmy-form:corrected  (transition)\n" in out
    assert "x = (W - W_c) * L**(1/nu) * exp(-a*L)\n" in out
    assert "log-uniform from 0.2 to 10 (the user's own)" in out
    assert max(map(len, out.splitlines())) <= 80


def test_the_example_of_the_readme_is_understood(tmp_path: Path) -> None:
    """The README's table resolves to a form, and the functions it names are those there are."""
    text = (Path(__file__).parent.parent / "README.md").read_text(encoding="utf-8")
    block = re.search(r"<!-- own form -->\n```toml\n(.*?)```", text, re.DOTALL).group(1)
    assert [own.name for own in resolved(tmp_path, block).forms] == ["my-form"]
    listed = re.search(r"the numpy functions `([^`]*)`", text).group(1).split()
    assert sorted(listed) == sorted([*FUNCTIONS, WHERE])


def test_settings_know_the_forms(tmp_path: Path) -> None:
    """A form is found by its name with its parts, from a file, from Python, and from the command line."""
    with refusal("run.toml, ansatze: ansatz 'my-form:kt' has a part 'kt' that my-form does not take; it takes "
                 "corrected, amplitude"), pytest.MonkeyPatch.context() as patch:  # fmt: skip
        patch.chdir(tmp_path)
        (tmp_path / "run.toml").write_text(TOML.replace("my-form:corrected", "my-form:kt"))
        dl.Settings.resolve("run.toml")
    resolved(tmp_path, TOML)
    chosen = dl.Settings.resolve(tmp_path / "run.toml", {"ansatze": ("bare:amplitude",)})
    assert chosen.ansatze == ("bare:amplitude",)
    made = dl.Settings(ansatze=("my-form",), forms={"my-form": TABLE})
    assert made == dl.Settings(ansatze=("my-form",), forms=[form()])
    with pytest.raises(ConfigurationError, match=r"^ansatze: ansatz 'my-from' must begin .*did you mean 'my-form'\?$"):
        dl.Settings(ansatze=("my-from",), forms=[form()])
    with refusal("forms: form 'my-form' is given twice; give each form a name of its own"):
        dl.Settings(forms=[form(), form()])
    with pytest.raises(ConfigurationError, match=r"the list of ansätze to run is called ansatze$"):
        resolved(tmp_path, 'ansatz = ["power-law"]')


def test_a_transition_without_critical_disorder_is_not_in_the_headline() -> None:
    """The headline averages W_c, so a form without a parameter of that name stays out of it."""
    data = curves()
    nameless = form("(W - m) * L**(1/nu)", m=PRIORS["W_c"], nu=PRIORS["nu"])
    own = ExpressionForm("named", POWER_LAW, "transition", PRIORS)
    fits = tuple(
        fit_collapse(data, name, forms=[nameless, own], quick=True, extras=False) for name in ("my-form", "named")
    )
    assert [fit.ansatz.name for fit in headline_basis(Comparison(fits, (0.5, 0.5)))] == ["named"]
    assert headline_basis(Comparison(fits[:1], (1.0,))) == ()
