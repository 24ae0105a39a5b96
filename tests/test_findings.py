"""What is said about raw realisations: in `inspect`, among the warnings of an analysis, and not for averaged data."""

from __future__ import annotations

import numpy as np
import pytest
from analyses import LABELS, case, made_curves

from driftline.cautions import Caution, cautions
from driftline.curves import Curves
from driftline.readers.findings import FEW, raw_findings
from driftline.readers.inspection import inspect_text, what_looks_wrong
from driftline.readers.samples import Block, SampleOptions, sampled

GRID = np.arange(1.0, 7.0)


def curves(make, *, n=100, labels=False, options=None, sizes=(8.0, 12.0)):
    """Curves from `make(n, rng)`, shape (n, 6) or (n, 6, states), for each size."""
    rng = np.random.default_rng(3)
    blocks = []
    for size in sizes:
        table = make(n, rng)
        each = np.arange(n) if labels else None
        blocks += [Block(size, w, table[:, k], each, f"L{size:g}.dat") for k, w in enumerate(GRID)]
    found = sampled(blocks, options or SampleOptions())
    origin = {"path": "runs", "realisations": found.record(), "notes": list(found.notes)}
    return Curves(found.curves, LABELS, origin)


def independent(n, rng):
    """Nothing to say about these."""
    return rng.normal(size=(n, GRID.size))


def shared(n, rng):
    """Correlated by 1/2 at any two disorders."""
    return rng.normal(size=(n, 1)) + rng.normal(size=(n, GRID.size))


def heavy(n, rng):
    """Log-normal values whose largest decide the mean."""
    return rng.lognormal(0.0, 2.5, size=(n, GRID.size))


def restarted(n, rng):
    """The last twenty rows are written twice."""
    table = rng.normal(size=(n, GRID.size))
    return np.concatenate([table, table[-20:]])


def states(n, rng):
    """Five values of each realisation one below the other, which share half of their variance."""
    return (rng.normal(size=(n, 1, GRID.size)) + rng.normal(size=(n, 5, GRID.size))).reshape(5 * n, GRID.size)


CASES = {
    "VALUES_NOT_INDEPENDENT": (states, {}),
    "CORRELATION_UNDECLARED": (shared, {}),
    "REALISATIONS_REPEATED": (restarted, {}),
    "HEAVY_TAILS": (heavy, {}),
    "FEW_REALISATIONS": (shared, {"n": int(FEW * GRID.size) - 1, "labels": True}),
}
REMEDIED = {
    "VALUES_NOT_INDEPENDENT": (
        lambda n, rng: states(n, rng).reshape(n, 5, GRID.size).transpose(0, 2, 1),
        {},
    ),
    "CORRELATION_UNDECLARED": (shared, {"options": SampleOptions(paired=True)}),
    "REALISATIONS_REPEATED": (independent, {}),
    "HEAVY_TAILS": (heavy, {"options": SampleOptions(average="log-mean")}),
    "FEW_REALISATIONS": (shared, {"n": int(FEW * GRID.size), "labels": True}),
}


@pytest.mark.parametrize("code", CASES)
def test_findings(code):
    """Each is found where it is, and is gone once its remedy was taken."""
    make, options = CASES[code]
    assert [finding.code for finding in raw_findings(curves(make, **options))] == [code]
    make, options = REMEDIED[code]
    assert raw_findings(curves(make, **options)) == ()


def test_independent_values_raise_nothing():
    """No correlation is found in 15 sets of independent values; 30 sizes at 4 errors: a chance of 1 in 500."""
    for seed in range(15):
        rng = np.random.default_rng(seed)
        assert raw_findings(curves(lambda n, _, rng=rng: independent(n, rng))) == ()


def test_sentences():
    """Numbers, sizes and remedies stand in the sentence."""
    (finding,) = raw_findings(curves(restarted))
    assert finding.sentence == (  # twenty rows at six disorders of two sizes
        "240 values of size 8, 12 stood in the data twice and were counted once: their places stand in the notes "
        "of `inspect`; check how the runs were restarted, and that other realisations got seeds of their own."
    )
    (finding,) = raw_findings(curves(shared))
    assert "the points of size 8, 12 count as independent: give realisation labels" in finding.sentence
    assert 0.3 < finding.numbers["correlation"] < 0.7  # one half; 100 realisations know it to 0.08, over five pairs


def test_sizes_left_out_raise_nothing():
    """A finding about a size that the analysis leaves out is not among its warnings."""
    found = curves(shared, sizes=(8.0, 12.0, 16.0))
    assert "8, 12, 16" in raw_findings(found)[0].message
    assert "of size 12, 16 count" in raw_findings(found.select(smallest_size=10))[0].message


def test_they_are_warnings_of_an_analysis():
    """They follow the other warnings, with their action and numbers; averaged data have none."""
    plain = made_curves(sizes=(6, 8, 10, 12, 14))
    assert raw_findings(plain) == ()
    record = sampled([Block(6.0, w, np.random.default_rng(5).normal(size=20), None, "r") for w in range(13)]).record()
    record[0].update(shared=True, correlation=0.5, correlation_z=9.0)
    made = Curves(plain.curves, plain.labels, {**plain.origin, "realisations": record})
    assert cautions(case(curves=made))[-1] == Caution(
        "FEW_REALISATIONS",
        "the covariance of the 13 points of size 6 rests on 20 realisations (size 6 in all)",
        "run at least 4 realisations a point; until then the intervals of a collapse may be too narrow",
        {"realisations": 20.0, "points": 13.0},
    )


def test_inspect_shows_them():
    """The table of realisations holds inflation, correlation and repetitions, and only raw data have one."""
    rng = np.random.default_rng(4)
    level = rng.normal(size=(100, GRID.size, 1))
    found = curves(lambda n, _: level + rng.normal(size=(n, GRID.size, 20)), labels=True)
    text = inspect_text(found)
    row = next(line for line in text.splitlines() if "correlated" in line and line.split()[0] == "8")
    # Variance of a mean of 20 states: 1 + 1/20 over realisations, against (1 + 1)/20 for independent ones: 10.5
    assert float(row.split()[-2]) == pytest.approx(10.5, rel=0.2)
    assert "Variance inflation" in text
    assert not any("twice" in sentence for sentence in what_looks_wrong(found))
    assert "Variance inflation" not in inspect_text(curves(independent))
    assert "stood twice" not in inspect_text(made_curves())
