"""The page on `result.json`: every field is explained, and nothing is explained that is not there."""

import json
import re

import numpy as np
import pytest
from analyses import made_analysis

import driftline as dl
from driftline.cli import main
from driftline.drift import LAWS
from driftline.report.fields import result_fields
from driftline.report.record import to_json
from driftline.simulate import PowerLawTruth, simulate

FIVE = ("median", "low68", "high68", "low95", "high95")
ROW = re.compile(r"^\| `([^`]+)` \| ([^|]+) \| ([^|]+) \| ([^|]+) \|$", re.MULTILINE)
TYPES = {
    "text": lambda value: isinstance(value, str),
    "number": lambda value: isinstance(value, int | float) and not isinstance(value, bool),
    "whole number": lambda value: isinstance(value, int) and not isinstance(value, bool),
    "true or false": lambda value: isinstance(value, bool),
    "null": lambda value: value is None,
    "interval": lambda value: isinstance(value, dict) and set(FIVE) <= set(value),
    "list of text": lambda value: isinstance(value, list) and all(map(TYPES["text"], value)),
    "list of number": lambda value: isinstance(value, list) and all(map(TYPES["number"], value)),
}

#: Every option of reading, though no file would need them all.
INPUT = dl.InputOptions(
    layout="table", columns="size=L", sizes=[8, 12], pattern="L{size}", axes=["size"], separator="tab", header=False,
    samples_each=3, error_each=0.1, skip_cut_lines=True, average="median", kind="counts", paired=False,
)  # fmt: skip
OWN_FORM = {
    "mine": {
        "x": "(W - W_c) * L",
        "hypothesis": "transition",
        "parameters": {"W_c": {"prior": "uniform", "low": 3.0, "high": 5.0}},
    }
}


def documented():
    """Type of each field by its path."""
    return {path: kind for path, kind, _, _ in ROW.findall(result_fields())}


def allowed(kind):
    """The simple types that a type in words stands for."""
    if kind == "true or false":
        return [kind]
    return re.split(r", | or ", kind)


def leaves(value, rules, path=""):
    """Every documented field in `value` with what it holds, and everything that no rule explains."""
    if path in rules:
        yield path, value
        extra = {key: part for key, part in value.items() if key not in FIVE} if isinstance(value, dict) else {}
        for key, part in extra.items():
            yield from leaves(part, rules, f"{path}.{key}")
    elif isinstance(value, list):
        for part in value:
            yield from leaves(part, rules, f"{path}[]")
    elif isinstance(value, dict):
        free = any(rule.startswith(f"{path}.<name>") for rule in rules)
        for key, part in value.items():
            yield from leaves(part, rules, f"{path}.<name>" if free else f"{path}.{key}".lstrip("."))
    else:
        yield path, value


def faults(results, rules):
    """Fields without a row, rows without a field, and values that are not of the type their row says."""
    found = [leaf for result in results for leaf in leaves(result, rules)]
    missing = {path for path, _ in found} - set(rules)
    wrong = [
        f"{path} = {value!r} is no {rules[path]}"
        for path, value in found
        if path in rules and not any(TYPES[kind](value) for kind in allowed(rules[path]))
    ]
    unused = set(rules) - {path for path, _ in found}
    return sorted(missing) + sorted(unused) + wrong


@pytest.fixture(scope="module")
def real():
    """The result of a real run that uses as many settings as there are."""
    curves = simulate([6, 8, 12, 16], np.linspace(1.5, 6.5, 11), PowerLawTruth(W_c=4.0), 0.003, 1)
    settings = dl.Settings(
        ansatze=["power-law", "mine"], forms=OWN_FORM, quick=True, draws=200, smallest_size=8, window=(2, 6),
        labels={"disorder_unit": "J", "ergodic_value": 0.53, "localised_value": None},
        input=INPUT,
    )  # fmt: skip
    return json.loads(to_json(dl.analyse(curves, settings=settings)))


@pytest.fixture(scope="module")
def made():
    """Results built by hand, for what the short real run does not have."""
    nothing = made_analysis(crossover=False, probability=0.01, note="No pair of sizes crosses.")
    full = made_analysis(code="drifting")
    return [json.loads(to_json(each)) for each in (nothing, full)]


def test_every_field_is_explained_and_every_explanation_has_its_field(real, made):
    """Rows and fields are the same set, and each value has the type its row gives."""
    assert faults([real, *made], documented()) == []


def test_the_check_can_fail(real, made):
    """Negative control: a row too few, a row too many and a wrong type are all noticed."""
    rules = documented()
    kept = {path: kind for path, kind in rules.items() if path != "collapse[].fit.p_value"}
    assert faults([real, *made], kept) == ["collapse[].fit.p_value"]
    assert faults([real, *made], {**rules, "verdict.mood": "text"}) == ["verdict.mood"]
    assert faults([real], {**rules, "seed": "text"})[-1] == "seed = 0 is no text"


def test_rows_are_in_the_order_of_the_file(real):
    """Whoever reads the file from top to bottom finds its rows in the same order."""
    rules = documented()
    met = list(dict.fromkeys(path for path, _ in leaves(real, rules)))
    assert met == [path for path in rules if path in met]


def test_every_row_has_unit_and_meaning():
    """No cell is empty, and no path stands twice."""
    rows = ROW.findall(result_fields())
    assert len({path for path, *_ in rows}) == len(rows)
    assert all(cell.strip() for row in rows for cell in row)
    table_lines = [line for line in result_fields().splitlines() if line.startswith("| `")]
    assert len(table_lines) == len(rows) + len(LAWS)


def test_laws_are_those_of_the_program():
    """The table of laws at the end holds every law with its formula."""
    for law in LAWS.values():
        assert f"| `{law.name}` | {law.formula} | {'yes' if law.bounded else 'no'} |" in result_fields()


def test_the_command_prints_the_page(capsys):
    """`driftline fields` prints it as it is."""
    assert main(["fields"]) == 0
    assert capsys.readouterr().out == result_fields()
