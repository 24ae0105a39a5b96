"""The machine-readable result and the files beside it."""

import csv
import io
import json
import math

import h5py
import numpy as np
import pytest
from analyses import made_analysis

from driftline.costs import COST_FUNCTIONS, Cost
from driftline.errors import ConfigurationError
from driftline.inference.intervals import Interval
from driftline.report.configuration import to_toml
from driftline.report.figure_tables import figure_tables
from driftline.report.folder import MARK, check_folder, default_folder, output_folder
from driftline.report.page import page
from driftline.report.record import record, tables, to_json
from driftline.report.writers import WRITERS, write_report
from driftline.settings import Settings

NUMBER, TEXT, FLAG, MAYBE = "number", "text", "flag", "number or null"
INTERVAL = dict.fromkeys(("median", "low68", "high68", "low95", "high95"), NUMBER)
NO_INTERVAL = dict.fromkeys(INTERVAL, MAYBE)

#: The contract, key by key in order; a list of one element means any number of such, `...` means keys are free.
SCHEMA = {
    "schema": TEXT,
    "software": {"name": TEXT, "version": TEXT, "python": TEXT, "packages": {...: TEXT}},
    "input": {
        "path": TEXT, "sha256": TEXT, "sizes": [NUMBER], "points": NUMBER, "disorder_range": [NUMBER],
        "observable": TEXT,
    },
    "seed": NUMBER,
    "config": {
        "ansatze": [TEXT], "window": None, "smallest_size": MAYBE, "quick": FLAG, "labels": {...: TEXT},
        "draws": NUMBER, "forms": {...: {"x": TEXT, "hypothesis": TEXT, "parameters": {...: {...: TEXT}}}},
        "input": {...: TEXT},
    },
    "crossings": [
        {
            "sizes": [NUMBER], "probability": NUMBER, "separated": NUMBER, "disorder": INTERVAL, "value": INTERVAL,
            "inverse_nu": INTERVAL,
        }
    ],
    "drift": {
        "source": TEXT,
        "laws": [
            {
                "name": TEXT, "bounded": FLAG, "log_evidence": NUMBER, "probability": NUMBER,
                "parameters": {...: INTERVAL}, "limit": [INTERVAL, None], "limit_one_sided": [TEXT, None],
            }
        ],
        "probability_bounded": MAYBE,
        "rate_per_site": INTERVAL,
        "deciding_size": MAYBE,
    },
    "collapse": [
        {
            "ansatz": TEXT, "hypothesis": TEXT, "log_evidence": NUMBER, "log_evidence_error": NUMBER,
            "probability": NUMBER, "parameters": {...: INTERVAL},
            "fit": {"chi2_per_dof": NUMBER, "p_value": NUMBER, "noise_scale": NUMBER, "max_residual": NUMBER},
            "held_out": {"log_score": MAYBE, "chi2_per_point": MAYBE},
            "sampler": {"effective_samples": NUMBER, "autocorrelation": MAYBE, "converged": FLAG},
            "costs": [{"name": TEXT, "value": NUMBER, "floor": INTERVAL}],
        }
    ],
    "crossover": {"disorder": {**INTERVAL, "systematic": MAYBE}, "nu": INTERVAL, "basis": [TEXT]},
    "stability": [
        {"ansatz": TEXT, "smallest_size": NUMBER, "window": [NUMBER], "disorder": INTERVAL, "p_value": NUMBER}
    ],
    "verdict": {
        "code": TEXT, "statement": TEXT, "probability_transition": MAYBE, "probability_drift": MAYBE,
        "warnings": [{"code": TEXT, "message": TEXT, "numbers": {...: NUMBER}}],
        "false_alarm": {...: NUMBER},
    },
    "timing": {...: NUMBER},
}  # fmt: skip


def differences(value, rule, place="result"):
    """Every place where `value` breaks `rule`, as sentences."""
    if isinstance(rule, dict):
        if not isinstance(value, dict):
            return [f"{place} is no object"]
        if ... in rule:
            return [each for key in value for each in differences(value[key], rule[...], f"{place}.{key}")]
        if list(value) != list(rule):
            return [f"{place} has the keys {list(value)} and not {list(rule)}"]
        return [each for key in rule for each in differences(value[key], rule[key], f"{place}.{key}")]
    if isinstance(rule, list) and rule[-1] is None:
        return [] if value is None else differences(value, rule[0], place)
    if isinstance(rule, list):
        if not isinstance(value, list):
            return [f"{place} is no list"]
        return [each for i, item in enumerate(value) for each in differences(item, rule[0], f"{place}[{i}]")]
    if rule is None:
        return [] if value is None else [f"{place} is not null"]
    number = isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
    fits = {
        NUMBER: number, MAYBE: number or value is None, TEXT: isinstance(value, str), FLAG: isinstance(value, bool),
    }  # fmt: skip
    return [] if fits[rule] else [f"{place} = {value!r} is no {rule}"]


def test_result_keeps_the_contract():
    """Every key of the contract is there, in order, with its type, and nothing else is."""
    result = json.loads(to_json(made_analysis()))
    assert differences(result, SCHEMA) == []
    assert result["schema"] == "driftline-result/1"
    assert list(result["software"]["packages"]) == ["numpy", "scipy", "lmfit", "emcee", "numba"]


def test_the_contract_check_can_fail():
    """Negative control: a missing key, a wrong order, a wrong type and a NaN are all noticed."""
    result = record(made_analysis())
    assert differences({**result, "seed": "3"}, SCHEMA) == ["result.seed = '3' is no number"]
    assert len(differences({key: result[key] for key in reversed(result)}, SCHEMA)) == 1
    assert len(differences({**result, "seed": math.nan}, SCHEMA)) == 1
    del result["stability"][0]["p_value"]
    assert len(differences(result, SCHEMA)) == 1


def test_without_crossover_its_fields_are_null_and_not_missing():
    """Nothing found is written as null under the same keys."""
    result = record(made_analysis(crossover=False, probability=0.01, note="No pair of sizes crosses."))
    assert result["crossover"] == {"disorder": {**dict.fromkeys(INTERVAL), "systematic": None},
                                   "nu": dict.fromkeys(INTERVAL), "basis": []}  # fmt: skip
    assert result["crossings"][0]["disorder"] is None
    assert result["drift"]["laws"] == []
    assert result["drift"]["probability_bounded"] is None


def test_numbers_that_are_not_finite_become_null():
    """JSON knows no NaN, so none is written."""
    analysis = made_analysis()
    analysis.timing["nothing"] = math.nan
    analysis.timing["forever"] = math.inf
    result = json.loads(to_json(analysis), parse_constant=pytest.fail)
    assert result["timing"]["nothing"] is None
    assert result["timing"]["forever"] is None


def test_numbers_survive_the_file_exactly():
    """Full precision is written: what is read back equals what was computed."""
    analysis = made_analysis()
    entry = json.loads(to_json(analysis))["collapse"][1]
    assert entry["parameters"]["W_c"] == analysis.comparison.fits[1].parameters["W_c"].to_dict()
    assert entry["probability"] == analysis.comparison.probabilities[1]


def test_a_warning_carries_what_to_do():
    """The message of a warning is finding and remedy in one."""
    (warning,) = record(made_analysis())["verdict"]["warnings"]
    assert warning["message"] == (
        "the crossings alone give laws with a limit a probability of 0.80. What to do: the two best laws differ by "
        "three errors from size 31 on."
    )
    assert warning["numbers"] == {"probability_bounded": 0.8}


def test_tables_hold_the_same_numbers_as_the_result():
    """Each table has a row for each entry, intervals and lists spread over columns."""
    analysis = made_analysis()
    made = tables(analysis)
    numbers = {"crossings", "drift", "ansatze", "stability", "costs", "collapsed-points"}
    assert set(made) == numbers | set(figure_tables(analysis))
    assert made["crossings"][0]["size_1"] == 6.0
    assert made["crossings"][0]["disorder_median"] == analysis.crossings.pairs[0].disorder.median
    assert made["ansatze"][1]["parameters_W_c_low95"] == analysis.comparison.fits[1].parameters["W_c"].low95
    assert len(made["collapsed-points"]) == 2 * analysis.curves.points
    assert not any(name.startswith("costs") for name in made["ansatze"][0])
    assert len(made["costs"]) == 2 * len(COST_FUNCTIONS)
    (cost, *_) = analysis.costs["power-law"]
    assert made["costs"][0] == {
        "ansatz": "power-law", "cost": cost.name, "value": cost.value, "ratio": cost.ratio,
        **{f"floor_{name}": limit for name, limit in cost.floor.to_dict().items()},
    }  # fmt: skip


def test_tables_hold_what_the_figures_show():
    """Points, smoothers, bands, scaling functions and posterior draws, number by number."""
    analysis = made_analysis()
    made = tables(analysis)
    last = analysis.curves.curves[-1]
    assert made["points"][-1] == {"size": 14.0, "disorder": 20.0, "mean": last.mean[-1], "error": last.error[-1]}
    smooth, law, fit = analysis.crossings.smooth[0], analysis.drift.laws[1], analysis.comparison.fits[-1]
    assert made["smoothers"][3] == {"size": 6.0, "disorder": smooth.grid[3], "mean": smooth.mean[3], "sd": smooth.sd[3]}
    assert [row["disorder"] for row in made["drift-points"]] == analysis.drift.positions.tolist()
    band = [row for row in made["drift-bands"] if row["law"] == law.name]
    np.testing.assert_allclose(
        [[row[name] for row in band] for name in ("median", "low68", "high68")],
        law.predict(np.array([row["size"] for row in band])),
        rtol=1e-12,  # the same formula on the same numbers
    )
    assert [
        row["x"] for row in made["scaling-functions"] if row["ansatz"] == fit.ansatz.name
    ] == fit.function_x.tolist()
    assert made["posterior"][0] == {"ansatz": fit.ansatz.name, **dict(zip(fit.names, fit.samples[0], strict=True))}
    assert [row["probability"] for row in made["comparison"]] == list(analysis.comparison.probabilities)
    whole, (row,) = analysis.comparison["power-law:corrected"].parameters["W_c"], analysis.stability
    assert made["stability"][0]["shift_in_sd"] == row.significance(whole)


def test_costs_that_are_not_defined_are_null_and_shown_as_a_dash(tmp_path):
    """Sizes that do not overlap leave null in the result, an empty cell in the table and a dash on the page."""
    analysis = made_analysis()
    nothing = Interval(*[math.nan] * 5)
    analysis.costs["power-law"] = (Cost("houdayer-hartmann", math.nan, nothing, math.nan),)
    empty = {"name": "houdayer-hartmann", "value": None, "floor": dict.fromkeys(INTERVAL)}
    assert json.loads(to_json(analysis))["collapse"][0]["costs"] == [empty]
    assert tables(analysis)["costs"][0]["value"] is None
    assert '<tr><th scope="row">power-law</th><td>- (-)</td></tr>' in page(analysis, tmp_path)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """One complete output folder."""
    target = tmp_path_factory.mktemp("report") / "out"
    write_report(made_analysis(), target)
    return target


def test_the_folder_is_complete(folder):
    """Every file of the contract is there, none is empty, and no temporary one is left beside it."""
    names = {str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file()}
    drawn = {"curves", "drift", "collapse", "posterior", "comparison", "stability", "misfit"}  # no size was held out
    figures = {f"figures/{name}.{kind}" for name in drawn for kind in ("pdf", "png", "svg")}
    stems = (
        "crossings", "drift", "ansatze", "stability", "costs", "collapsed-points", "points", "smoothers",
        "drift-points", "drift-bands", "scaling-functions", "comparison", "posterior", "held-out",
    )  # fmt: skip
    sheets = {f"tables/{name}.csv" for name in stems}
    tex = {f"tables/{name}.tex" for name in ("crossover", "ansatze", "crossings", "drift")}
    assert names == figures | sheets | tex | {
        "result.json", "summary.txt", "report.html", "analysis.toml", "posterior.h5", "methods.txt", "methods.bib",
    }  # fmt: skip
    assert all((folder / name).stat().st_size > 0 for name in names)
    assert [path.name for path in folder.parent.iterdir()] == ["out"]
    assert len({writer.title for writer in WRITERS}) == len(WRITERS)


def test_two_runs_write_equal_files(folder, tmp_path):
    """Byte for byte, figures and posterior included: nothing carries a date or an address."""
    write_report(made_analysis(), tmp_path / "again")
    for path in folder.rglob("*"):
        if path.is_file():
            assert path.read_bytes() == (tmp_path / "again" / path.relative_to(folder)).read_bytes(), path.name


def test_csv_files_are_rectangular_and_read_back(folder):
    """Every row has as many cells as the header, and numbers are in full precision."""
    for path in (folder / "tables").glob("*.csv"):
        header, *body = list(csv.reader(io.StringIO(path.read_text(encoding="utf-8"))))
        assert body or path.name == "held-out.csv", path.name  # no size was held out
        assert all(len(row) == len(header) for row in body)
    text = (folder / "tables" / "crossings.csv").read_text(encoding="utf-8")
    first = next(csv.DictReader(io.StringIO(text)))
    assert float(first["disorder_median"]) == made_analysis().crossings.pairs[0].disorder.median


def test_posterior_file(folder):
    """Each ansatz has its draws with the names of the columns."""
    analysis = made_analysis()
    with h5py.File(folder / "posterior.h5") as file:
        for fit in analysis.comparison.fits:
            samples = file[fit.ansatz.name]["samples"]
            np.testing.assert_array_equal(samples[...], fit.samples)
            assert tuple(samples.attrs["names"]) == fit.names


def test_configuration_file_reproduces_the_settings(folder):
    """`analysis.toml` beside the result holds the resolved settings."""
    analysis = made_analysis()
    assert Settings.resolve(folder / "analysis.toml") == analysis.settings
    assert (folder / "analysis.toml").read_text(encoding="utf-8").endswith(to_toml(analysis.settings))


def write_half(folder, kind):
    """Begin an output folder and fail."""
    with output_folder(folder) as place:
        (place / MARK).write_text("{}")
        raise kind


class TestFolder:
    """The output folder: all or nothing, and nobody's files are deleted."""

    def test_default_name(self, tmp_path):
        """It is named after the data file and lies in the current directory."""
        assert str(default_folder(tmp_path / "run.7.csv")) == "run.7-driftline"

    def test_an_error_leaves_nothing(self, tmp_path):
        """A failure halfway removes what was written, interruption included."""
        for kind in (RuntimeError, KeyboardInterrupt):
            with pytest.raises(kind):
                write_half(tmp_path / "out", kind)
            assert list(tmp_path.iterdir()) == []

    def test_nothing_has_the_final_name_before_the_end(self, tmp_path):
        """While writing goes on the folder of that name does not exist."""
        with output_folder(tmp_path / "out") as place:
            assert not (tmp_path / "out").exists()
            (place / MARK).write_text("{}")
        assert (tmp_path / "out" / MARK).read_text() == "{}"

    def test_the_old_result_stays_until_the_new_one_is_complete(self, tmp_path):
        """With force an earlier output is replaced at the end, and kept if the new one fails."""
        old = tmp_path / "out"
        old.mkdir()
        (old / MARK).write_text("old")
        with pytest.raises(RuntimeError), output_folder(old, force=True):
            raise RuntimeError
        assert (old / MARK).read_text() == "old"
        with output_folder(old, force=True) as place:
            (place / MARK).write_text("new")
            assert (old / MARK).read_text() == "old"
        assert (old / MARK).read_text() == "new"
        assert [path.name for path in tmp_path.iterdir()] == ["out"]

    def test_what_is_in_the_way_is_refused(self, tmp_path):
        """A used folder without force, a stranger's folder even with it, a file, and a missing parent."""
        used = tmp_path / "used"
        used.mkdir()
        check_folder(used)
        (used / "thesis.tex").write_text("years of work")
        with pytest.raises(ConfigurationError, match=r"used: is not empty; give --force to replace it or choose"):
            check_folder(used)
        with pytest.raises(ConfigurationError, match=r"used: holds no result\.json, so it is not an output folder"):
            check_folder(used, force=True)
        with pytest.raises(ConfigurationError, match=r"thesis\.tex: exists and is not a folder"):
            check_folder(used / "thesis.tex", force=True)
        with pytest.raises(ConfigurationError, match=r"none: is not a folder, so the output cannot be put there"):
            check_folder(tmp_path / "none" / "out")
        link = tmp_path / "link"
        link.symlink_to(used)
        with pytest.raises(ConfigurationError, match=r"link: exists and is not a folder"):
            check_folder(link, force=True)
