"""`driftline calibrate`: the data's own grid and errors with a fitted form as the truth."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import driftline as dl
from driftline.blocks import plain
from driftline.calibration import Calibration, assumed, calibrate, simulated
from driftline.cli import main
from driftline.errors import ConfigurationError
from driftline.rates import Count
from driftline.readers.write import write_csv
from driftline.report.reliability import blocks
from driftline.settings import Settings
from driftline.simulate import PowerLawTruth, simulate

FORMS = ("power-law", "power-law:linear-drift")
SETTINGS = Settings(ansatze=FORMS, draws=200, jobs=1)
CURVES = simulate((8, 12, 16, 24), np.linspace(2, 6, 11), PowerLawTruth(4.0), 0.003, 1)


@pytest.fixture(scope="module")
def found() -> Calibration:
    """Two sets for each of two truths."""
    return calibrate(CURVES, settings=SETTINGS, sets=2)


def test_every_hypothesis_is_the_truth_once(found: Calibration) -> None:
    """The best form of each hypothesis fitted, transitions first, with as many verdicts as sets."""
    assert [(truth.ansatz, truth.hypothesis) for truth in found.truths] == [
        ("power-law", "transition"), ("power-law:linear-drift", "drift"),
    ]  # fmt: skip
    assert all(sum(truth.verdicts.values()) == truth.sets == 2 for truth in found.truths)
    assert found.truths[0].values["W_c"] == found.analysis.comparison["power-law"].parameters["W_c"].median
    assert list(found.truths[0].covered) == ["W_c 68", "W_c 95", "nu 68", "nu 95"]
    assert list(found.truths[1].values) == ["D"]
    assert found.truths[1].covered == {}


def test_the_same_seed_gives_the_same_counts_on_two_processes(found: Calibration) -> None:
    """Counts do not depend on the number of jobs."""
    assert calibrate(CURVES, settings=replace(SETTINGS, jobs=2), sets=2).truths == found.truths


def test_simulated_curves_scatter_about_the_fit_by_the_errors(found: Calibration) -> None:
    """Chi-squared per point of 30 simulated sets about the fitted curves is one, and is not for halved errors."""
    (fit, *_) = assumed(found.analysis)
    rng = np.random.default_rng(2)
    error = CURVES.flat()[3]
    off = np.array([simulated(fit, rng).flat()[2] - fit.points.fitted for _ in range(30)]) / error
    # 30 x 44 squares of standard normals: mean 1, standard error sqrt(2 / 1320) = 0.039; four of those
    assert abs(np.mean(off**2) - 1) < 0.16
    assert not abs(np.mean((2 * off) ** 2) - 1) < 0.16
    assert simulated(fit, rng).curves[0].error is not None


def test_right_and_wrong_are_counted(found: Calibration) -> None:
    """For a drift the wrong verdict is a transition; for a transition it is a drift."""
    transition, drift = found.truths
    told = dict.fromkeys(transition.verdicts, 0) | {"transition-supported": 3, "drifting": 2}
    assert replace(transition, verdicts=told, sets=5).wrong == Count(2, 5)
    assert replace(transition, verdicts=told, sets=5).right == Count(3, 5)
    assert replace(drift, verdicts=told, sets=5).wrong == Count(3, 5)
    assert replace(drift, verdicts=told, sets=5).right == Count(2, 5)


def test_people_read_counts_with_their_ranges(found: Calibration) -> None:
    """Every truth is named with its values, probability and binomial ranges."""
    text = plain(blocks(found))
    assert "power-law:linear-drift, D = " in text
    assert str(found.truths[0].wrong) in text
    assert "cannot be told from a transition" in text.replace("\n", " ")


def test_command_writes_the_counts_and_refuses_to_replace_them(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The JSON on standard output and in the file are the same; a second run needs --force."""
    data, out = tmp_path / "curves.csv", tmp_path / "calibration.json"
    write_csv(CURVES, data)
    forms = [word for name in FORMS for word in ("--ansatz", name)]
    command = ["calibrate", str(data), "--sets", "1", "--jobs", "1", "--out", str(out), "--json", *forms]
    assert main(command) == 0
    told = json.loads(capsys.readouterr().out)
    assert told == json.loads(out.read_text(encoding="utf-8"))
    assert (told["schema"], [truth["sets"] for truth in told["truths"]]) == ("driftline-calibration/1", [1, 1])
    assert main(command) == 1
    assert capsys.readouterr().err == f"driftline: {out}: the file exists; choose another name or give --force\n"


def test_no_sets_are_refused() -> None:
    """A calibration of nothing is a mistake."""
    with pytest.raises(ConfigurationError, match=r"^the number of simulated sets must be at least 1, not 0$"):
        dl.calibrate(CURVES, sets=0)
