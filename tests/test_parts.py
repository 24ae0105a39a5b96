"""Parts of the job on the command line: `simulate`, `crossings` and `collapse`."""

import json
import re

import h5py
import numpy as np
import pytest
from terminals import run_on_terminal

from driftline import ConfigurationError, Settings, read, study_crossings
from driftline.cli import main
from driftline.simulate import Gompertz, LinearDriftTruth, Logistic, PowerLawTruth, simulate
from driftline.truths import FUNCTIONS, TRUTHS, described, make_truth, name_of, synthetic

SIZES = (8, 12, 18)
GRID = np.linspace(2.0, 6.0, 13)


@pytest.fixture
def here(tmp_path, monkeypatch):
    """A working folder of its own."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def data(here):
    """Curves that cross at 4 with nu = 1."""
    assert main(["simulate", "made.csv", "--sizes", "8,12,18", "--disorder", "2", "6", "13", "-q"]) == 0
    return here / "made.csv"


def facts_of_csv(path):
    """Comments of the form name = value."""
    return dict(re.findall(r"^# (\w+) = (.*)$", path.read_text(), re.MULTILINE))


@pytest.mark.parametrize("name", ["made.csv", "made.h5"])
def test_simulated_files_hold_the_curves_of_the_library(here, name, capsys):
    """The file reads back as what `simulate` makes from the same truth and seed, number by number."""
    options = ["--set", "nu=1.6", "--set", "W_c=4.1", "--error", "0.002", "--seed", "7"]
    assert main(["simulate", name, "--sizes", "8,12,18", "--disorder", "2", "6", "13", *options]) == 0
    made = read(here / name)
    expected = simulate(SIZES, GRID, PowerLawTruth(W_c=4.1, nu=1.6), 0.002, 7)
    for ours, theirs in zip(made.flat(), expected.flat(), strict=True):
        np.testing.assert_array_equal(ours, theirs)
    assert (made.labels.ergodic_value, made.labels.localised_value) == (0.53, 0.39)
    assert not [note for note in made.origin["notes"] if "not" in note]  # the reader has nothing to complain of
    assert capsys.readouterr().out.endswith(f"39 points of 3 sizes written to {name}\n")


def test_the_truth_stands_in_the_file(here):
    """As comments of the CSV and as attributes in HDF5, enough to make the truth again."""
    options = ["--truth", "linear-drift", "--set", "rate=0.2", "--set", "correction=0.1,0.02", "--set", "scale=3",
               "--function", "gompertz", "--seed", "5", "-q"]  # fmt: skip
    assert main(["simulate", "made.csv", *options]) == 0
    assert main(["simulate", "made.h5", *options]) == 0
    text = facts_of_csv(here / "made.csv")
    with h5py.File(here / "made.h5") as file:
        stored = dict(file["curves"].attrs)
    assert {name: v.decode() if isinstance(v, bytes) else str(v) for name, v in stored.items()} == text
    assert text["seed"] == "5"
    truth = LinearDriftTruth(rate=0.2, correction=(0.1, 0.02), scaling=Gompertz(scale=3.0))
    parameters = {name: text[name] for name in described(truth)}
    assert make_truth(text["truth"], parameters, text["function"]) == truth


def test_simulation_repeats_itself(here):
    """The same options make the same bytes, another seed makes others."""
    for name, seed in (("a.csv", 1), ("b.csv", 1), ("c.csv", 2), ("a.h5", 1), ("b.h5", 1), ("c.h5", 2)):
        assert main(["simulate", name, "--seed", str(seed), "-q"]) == 0
    for kind in ("csv", "h5"):
        first, second, other = ((here / f"{name}.{kind}").read_bytes() for name in "abc")
        assert first == second
        assert first != other


def test_correlated_points_carry_their_covariance(here):
    """With a correlation R the covariance of two points of a size is R times the product of their errors."""
    assert main(["simulate", "made.h5", "--correlation", "0.25", "--error", "0.004", "-q"]) == 0
    covariance = read(here / "made.h5").curves[0].covariance
    # products of the same doubles in another order: a few units of rounding, 1e-16 each
    np.testing.assert_allclose(covariance, 0.004**2 * (0.25 + 0.75 * np.eye(21)), rtol=1e-14)


def test_nothing_is_overwritten_unasked(here, capsys):
    """An existing file stays as it is and stops the command; --force replaces it."""
    path = here / "mine.csv"
    path.write_text("mine")
    assert main(["simulate", "mine.csv"]) == 1
    expected = "driftline: mine.csv: exists already; give --force to replace it or choose another name\n"
    assert capsys.readouterr() == ("", expected)
    assert path.read_text() == "mine"
    assert main(["simulate", "mine.csv", "--force", "-q"]) == 0
    assert read(path).points == 126


@pytest.mark.parametrize(
    ("options", "sentence"),
    [
        (["--truth", "linear-draft"], "there is no truth 'linear-draft'; did you mean linear-drift or inverse-drift?"),
        (["--function", "logistik"], "there is no scaling function 'logistik'; did you mean logistic?"),
        (["--set", "mu=1"], "truth 'power-law' has no parameter 'mu'; known are: W_c, nu, correction, omega, high, "
                            "low, scale"),
        (["--set", "nu"], "option --set: 'nu' is not of the form NAME=VALUE, for example nu=1.6"),
        (["--set", "nu=1", "--set", "nu=2"], "option --set: nu is given twice; give it once"),
        (["--set", "nu=0"], "parameter nu: must be positive, not 0"),
        (["--set", "nu=one"], "parameter nu: must be a finite number, not 'one'"),
        (["--set", "nu=1,2"], "parameter nu: must be one number, not '1,2'"),
        (["--set", "correction="], "parameter correction: must be a finite number, not ''"),
        (["--set", "nu=1e-9"], "the truth is too large to be computed; choose less extreme parameters"),
        (["--sizes", "8,x"], "option --sizes: must be numbers joined by commas, for example 8,12,16, not '8,x'"),
        (["--sizes", "8,-2"], "curves: a size must be positive, not -2"),
        (["--sizes", "8"], "only size 8 was found and at least 2 sizes are needed to see a size dependence"),
        (["--disorder", "3", "2", "9"], "the disorder must run from a lower to a higher value, not from 3 to 2"),
        (["--disorder", "1", "2", "3"], "the disorder grid must have 4 to 10000 points, not 3"),
        (["--error", "0"], "size 8: the error at disorder 1 is 0; a standard error must be positive"),
        (["--correlation", "1"], "simulate: correlation must be at least 0 and below 1, not 1"),
        (["--correlation", "0.5"], "a summary CSV has no place for the covariance of the points; write HDF5 instead"),
        (["--seed", "-1"], "the seed must be at least 0, not -1"),
    ],
)  # fmt: skip
def test_bad_simulations(here, capsys, options, sentence):
    """Exit code 1, one sentence, and no file."""
    assert main(["simulate", "made.csv", *options]) == 1
    assert capsys.readouterr() == ("", f"driftline: {sentence}\n")
    assert list(here.iterdir()) == []


@pytest.mark.parametrize(("name", "problem"), [
    ("made.dat", "the name decides the format, so let it end in .csv or .h5"),
    ("none/made.csv", "the file cannot be written (there is no such folder)"),
    ("folder.csv", "is a folder; give the name of a file"),
])  # fmt: skip
def test_bad_places_for_a_simulation(here, capsys, name, problem):
    """The name of the file is checked before anything is computed or written."""
    (here / "folder.csv").mkdir()
    assert main(["simulate", name]) == 1
    assert capsys.readouterr() == ("", f"driftline: {name}: {problem}\n")
    assert [path.name for path in here.iterdir()] == ["folder.csv"]


@pytest.mark.parametrize("name", TRUTHS)
def test_every_truth_can_be_made_and_is_explained(name, capsys):
    """Its curves are finite on the default grid, its name survives, and the help names it with its parameters."""
    truth = make_truth(name)
    assert name_of(truth) == name
    assert np.isfinite(synthetic(truth, (8, 12)).curves.flat()[2]).all()
    assert main(["simulate", "--help"]) == 0
    text = capsys.readouterr().out
    line = re.search(rf"^ +{name} +(.*)$", text, re.MULTILINE)[1]
    inherited = set(described(PowerLawTruth())) if "as power-law" in line else {"high", "low", "scale"}
    assert [each for each in described(truth) if each not in inherited and each not in line] == []


def test_scaling_functions_by_name():
    """A function by name takes over height and scale of the one before it."""
    for name, kind in FUNCTIONS.items():
        truth = make_truth("size-ratio", {"high": "1"}, name)
        assert truth.scaling == kind(high=1.0, low=0.39, scale=0.08)
    assert make_truth("power-law").scaling == Logistic()
    with pytest.raises(ConfigurationError, match=r"^there is no scaling function 'nosuch'; known are: logistic, "):
        make_truth("power-law", function="nosuch")


def test_crossings_on_the_terminal(data, capsys):
    """Adjacent pairs with their laws by default, every pair if asked; the truth is inside; nothing is written."""
    assert main(["crossings", "made.csv", "--seed", "3"]) == 0
    text, err = capsys.readouterr()
    assert err == ""
    assert re.findall(r"^  (\d+, \d+) ", text, re.MULTILINE) == ["8, 12", "12, 18"]
    assert "Crossings of adjacent sizes\n" in text
    assert "\n  constant " in text
    assert text.endswith("Data: synthetic observable at sizes 8, 12, 18: 39 points, W from 2 to 6; seed 3.\n")
    assert main(["crossings", "made.csv", "--all-pairs", "--law", "linear"]) == 0
    text, _ = capsys.readouterr()
    assert re.findall(r"^  (\d+, \d+) ", text, re.MULTILINE) == ["8, 12", "8, 18", "12, 18"]
    assert "\n  linear " in text
    assert "\n  constant " not in text
    assert list(data.parent.iterdir()) == [data]


def test_crossings_find_the_truth(data, capsys):
    """The curves cross at 4 whatever the sizes; five posterior standard deviations miss it once in two million."""
    assert main(["crossings", "made.csv", "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    for pair in document["crossings"]:
        i = pair["disorder"]
        assert abs(i["median"] - 4.0) < 5 * (i["high68"] - i["low68"]) / 2
    assert document["schema"] == "driftline-crossings/1"
    assert [law["name"] for law in document["drift"]["laws"]][:1] == ["constant"]


def test_crossings_from_python(data):
    """What the command does, Python can."""
    study = study_crossings(read(data), settings=Settings(seed=2), laws=["inverse", "linear"])
    assert [law.name for law in study.drift.laws] == ["inverse", "linear"]


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (["crossings", "--law", "linaer"], "unknown drift law 'linaer'; did you mean linear or inverse?"),
        (["crossings", "--law", "kt", "--law", "kt"], "drift law 'kt' is named twice; name it once"),
        (["crossings", "--window", "3", "2"], "option --window: the low end 3 must lie below the high end 2"),
        (["crossings", "--out", "full"], "full: is not empty; give --force to replace it or choose another with --out"),
        (["collapse", "--out", "full"], "full: is not empty; give --force to replace it or choose another with --out"),
        (["collapse", "--ansatz", "kt:linear"], "option --ansatz: ansatz 'kt:linear' has a part 'linear' that kt does "
         "not take; it takes fixed, inverse-drift, log-drift, linear-drift, corrected, amplitude; did you mean "
         "'linear-drift'?"),
    ],
)  # fmt: skip
def test_bad_parts(data, capsys, arguments, sentence):
    """Exit code 1 and one sentence with a suggestion; nothing is written."""
    full = data.parent / "full"
    full.mkdir()
    (full / "mine.txt").write_text("mine")
    command, *options = arguments
    assert main([command, "made.csv", *options]) == 1
    assert capsys.readouterr() == ("", f"driftline: {sentence}\n")
    assert sorted(path.name for path in data.parent.rglob("*")) == ["full", "made.csv", "mine.txt"]


def test_json_in_a_pipe_while_somebody_watches(data):
    """The pipe gets the document and nothing else; the terminal sees progress, and is left clean."""
    result, screen = run_on_terminal("crossings", data, "--json", piped=("stdout",))
    assert result.returncode == 0
    assert json.loads(result.stdout)["input"]["points"] == 39
    assert "finding crossings" in screen.plain
    assert screen.text.endswith("\x1b[2K")  # the line of the progress bar is erased
    assert "schema" not in screen.plain
