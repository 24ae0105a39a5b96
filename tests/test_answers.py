"""The whole job on the data sets whose answers are known from theory or from careful studies."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

import driftline as dl

DATASETS = Path(__file__).parent.parent / "datasets"
OPENING = "Warning: no evidence of a transition in these data."


@cache
def analysis(name: str, *, quick: bool = True, jobs: int = 1) -> dl.Analysis:
    """Default analysis of one data set."""
    return dl.analyse(dl.read(DATASETS / name / "curves.csv"), settings=dl.Settings(quick=quick, jobs=jobs))


def test_anderson_cube() -> None:
    """3D Anderson model, full analysis: W_c = 16.530 and nu = 1.57 to 1.59 lie in the 95 % intervals.

    Rodriguez, Vasquez, Slevin, Roemer, PRB 84, 134209 (2011): W_c = 16.530(6 at 95 %), nu = 1.590; Slevin, Ohtsuki,
    New J. Phys. 16, 015012 (2014), from memory: 16.543(2), 1.571(8).
    """
    crossover = analysis("anderson-cube", quick=False, jobs=2).crossover
    assert crossover is not None
    assert crossover.disorder.contains(16.53)
    assert crossover.nu is not None
    assert crossover.nu.contains(1.57)
    # the intervals say something: W_c is known to a seventh of the measured range, nu to half of itself
    assert crossover.disorder.sd < 1.0
    assert crossover.nu.sd < 0.8


def test_anderson_cube_form_is_right() -> None:
    """3D Anderson model: the corrected power law describes the data and the sampler is healthy."""
    fit = analysis("anderson-cube", quick=False, jobs=2).comparison["power-law:corrected"]
    assert fit.sampler.method == "chain"
    assert fit.sampler.converged
    assert fit.quality.p_value > 0.001
    assert 0.7 < fit.quality.noise_scale < 1.3


def test_quasiperiodic_chain() -> None:
    """Aubry-Andre chain: V_c = 2t, exact (Aubry, Andre, Ann. Israel Phys. Soc. 3, 133 (1980)), and nu = 1."""
    crossover = analysis("quasiperiodic-chain").crossover
    assert crossover is not None
    assert crossover.disorder.contains(2.0)
    assert crossover.disorder.sd < 0.01
    assert crossover.nu is not None
    assert crossover.nu.contains(1.0)


def test_anderson_square() -> None:
    """2D Anderson model: no transition exists (Abrahams et al., PRL 42, 673 (1979)), and none is claimed."""
    verdict = analysis("anderson-square").verdict
    assert verdict.code != "transition-supported"
    assert verdict.statement.startswith(OPENING)
    assert {"ONE_SIDED", "CROSSING_AT_REFERENCE", "NO_CROSSING"} & {caution.code for caution in verdict.warnings}


def test_warning_stands_first_in_the_summary() -> None:
    """The sentence that there is no evidence is the first thing a reader sees."""
    assert dl.summary(analysis("anderson-square")).startswith(OPENING)


@pytest.mark.parametrize("name", ["anderson-cube", "quasiperiodic-chain", "anderson-square", "demo-clock-wall"])
def test_both_files_of_a_data_set_give_the_same_curves(name: str) -> None:
    """CSV and HDF5 of one data set hold the same numbers and the same labels."""
    table, store = (dl.read(DATASETS / name / f"curves.{kind}") for kind in ("csv", "h5"))
    for a, b in zip(table.flat(), store.flat(), strict=True):
        assert a == pytest.approx(b, abs=1e-8)  # the CSV has eight decimals
    assert table.labels == store.labels


def test_numbers_do_not_depend_on_the_number_of_jobs() -> None:
    """One process or two: the same draws."""
    one, two = (analysis("demo-clock-wall", jobs=jobs) for jobs in (1, 2))
    assert [fit.log_evidence for fit in one.comparison.fits] == [fit.log_evidence for fit in two.comparison.fits]
    assert one.crossover == two.crossover
    assert one.stability == two.stability
    assert one.verdict == two.verdict


def test_demo_truth() -> None:
    """The demo's stated truth lies in the 95 % intervals; its numbers are invented, see its README."""
    crossover = analysis("demo-clock-wall").crossover
    assert crossover is not None
    assert crossover.disorder.contains(3.62)
    assert crossover.nu is not None
    assert crossover.nu.contains(1.25)
