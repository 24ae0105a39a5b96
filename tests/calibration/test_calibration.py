"""Short form of the calibration study, and checks of its published rows: ``pytest -m calibration`` (some minutes)."""

from __future__ import annotations

import numpy as np
import pytest
import ranks
import rejudge
import study
import tables
from families import DISORDER, FAMILIES, GRIDS, LARGE_GRID, MIDDLE_NOISE, Cell

import driftline

pytestmark = pytest.mark.calibration

#: Seeds of the short form, beyond those of the published rows.
FRESH = (1000, 1001)
#: A drift too slow to be resolved has no verdict that would be wrong.
JUDGED = [name for name, family in FAMILIES.items() if family.kind != "slow"]
#: Below this number of sets a rate is too vague to be held against a target.
ENOUGH = 40


@pytest.fixture(scope="module")
def fresh() -> list[dict[str, str]]:
    """Two new data sets of every family that is judged, at the middle noise on the large grid."""
    return [study.row(Cell(family, MIDDLE_NOISE, LARGE_GRID), seed) for family in JUDGED for seed in FRESH]


@pytest.fixture(scope="module")
def published() -> list[dict[str, str]]:
    """The raw rows of the repository."""
    return study.read_rows()


def test_rows_hold_all_that_the_verdict_rests_on(fresh: list[dict[str, str]]) -> None:
    """Judging a row again at the thresholds in use gives the verdict of the analysis."""
    assert [rejudge.rejudge(row) for row in fresh] == [row["verdict"] for row in fresh]


def test_parts_left_out_change_nothing_in_a_row() -> None:
    """The same set analysed in full gives the same evidences, headline and verdict to the last digit."""
    cell = Cell("nu-1", MIDDLE_NOISE, LARGE_GRID)
    short, full = study.analysed(cell, 0), driftline.analyse(cell.curves(0), settings=study.SETTINGS)
    assert [f.log_evidence for f in short.comparison.fits] == [f.log_evidence for f in full.comparison.fits]
    assert short.crossover == full.crossover
    assert short.verdict == full.verdict


def wrong(rows: list[dict[str, str]]) -> int:
    """Verdicts that contradict the truth."""
    return sum(tables.mistakes(study.identity(row)[0], [row]) for row in rows)


def test_wrong_verdicts_are_rare(fresh: list[dict[str, str]]) -> None:
    """At most 3 of 32 verdicts contradict the truth: at the target of 2 % four or more have probability 0.4 %."""
    assert len(fresh) == 32
    assert wrong(fresh) <= 3


def test_wrong_verdicts_are_seen(fresh: list[dict[str, str]]) -> None:
    """Negative control: with every obstacle and probability waived, truths without transition are called one."""
    waived = [
        dict(
            row, p_transition="1", p_none="0", p_drift="0", warnings="", z_below="9", z_above="-9", crossing="5",
            pairs="5", p_bounded="", p_value="1", size_z="0",
        )
        for row in fresh
    ]  # fmt: skip
    assert wrong(waived) == sum(FAMILIES[row["family"]].kind != "transition" for row in fresh)


def missed(rows: list[dict[str, str]]) -> int:
    """Headline 95 % intervals of W_c that do not hold the truth."""
    inside, total = tables.coverage(rows, "wc", "wc_true", 95)
    return total - inside


def test_headline_interval_covers(fresh: list[dict[str, str]]) -> None:
    """At most 5 of 20 intervals miss: at a coverage of 93 % six or more have probability 0.2 %."""
    assert tables.coverage(fresh, "wc", "wc_true", 95)[1] == 20
    assert missed(fresh) <= 5


def test_short_intervals_are_seen_not_to_cover(fresh: list[dict[str, str]]) -> None:
    """Negative control: intervals a quarter as wide hold the truth in 38 %; of 20 they miss 5 or less in 0.4 %."""
    narrow = []
    for row in fresh:
        low, middle, high = (rejudge.number(row, f"wc_{end}") for end in ("low95", "median", "high95"))
        if low is not None and middle is not None and high is not None:
            ends = {"wc_low95": str(middle + (low - middle) / 4), "wc_high95": str(middle + (high - middle) / 4)}
            narrow.append(row | ends)
    assert missed(narrow) > 5


def test_published_rates_meet_their_targets(published: list[dict[str, str]]) -> None:
    """Every target with enough sets is met within its binomial error, or the table gives the reason why not."""
    bad = [
        text
        for text, count, limit, least in tables.targets(tables.by_cell(published))
        if count[1] >= ENOUGH and tables.verdict_on(count, limit, least=least) == "missed"
    ]
    assert [text for text in bad if tables.reason(text) == ""] == []


def test_tables_are_those_of_the_rows(published: list[dict[str, str]]) -> None:
    """The page in the repository is what the rows give today."""
    assert (tables.FOLDER / "results.md").read_text(encoding="utf-8") == tables.results(published)


def test_no_set_is_counted_twice(published: list[dict[str, str]]) -> None:
    """Cell and seed are unique, and every row belongs to a cell of the study."""
    found = [study.identity(row) for row in published]
    assert len(set(found)) == len(found)
    assert {cell for cell, _ in found} <= set(tables.cells())


@pytest.mark.parametrize("grid", GRIDS)
@pytest.mark.parametrize("family", FAMILIES)
def test_curves_run_through_most_of_their_range(family: str, grid: str) -> None:
    """Without noise the curves of a cell span nearly all of the height between the two plateaus.

    By hand: a logistic of width 1 cut at three and a half widths on both sides spans tanh(3.5 / 2) = 94 % of it; a
    correction shifts one end of the smallest size's curve by 7 + 5 % and the other by 7 - 5 %, at most 10 % less.
    """
    sizes = np.array(GRIDS[grid], dtype=np.float64)
    truth = FAMILIES[family].build(sizes)
    values = np.array([truth.value(size, DISORDER) for size in sizes])
    least = 0.84 if family.endswith("-corrected") else 0.94
    assert np.ptp(values) >= least * 0.14 - 1e-4  # tanh(3.5 / 2) is 0.9414


def test_ranks_of_the_exact_posterior_are_uniform() -> None:
    """With the roughness at its true value no histogram is improbable at one in a thousand over all parameters."""
    groups: dict[tuple[str, str], list[int]] = {}
    for row in ranks.read():
        if row["answer"] == "held":
            groups.setdefault((row["ansatz"], row["parameter"]), []).append(int(row["rank"]))
    assert len(groups) == 7  # W_c, nu, s of the plain form and omega besides of the corrected one
    assert min(ranks.uniformity(group)[1] for group in groups.values()) > 0.001 / 7  # Bonferroni


def test_ranks_of_a_narrow_posterior_are_not_uniform() -> None:
    """Negative control: draws with 0.7 of the right standard deviation give a histogram with p below 1e-4.

    Expected chi-squared from the bins of Phi(0.7^-1 z): the outer two of ten hold 18 % instead of 10 % each, so for
    200 sets about 2 * 16^2 / 20 = 26 from them alone, beside 9 from chance.
    """
    rng = np.random.default_rng(5)
    found = [int(np.sum(0.7 * rng.standard_normal(ranks.DRAWS) < rng.standard_normal())) for _ in range(200)]
    assert ranks.uniformity(found)[1] < 1e-4
