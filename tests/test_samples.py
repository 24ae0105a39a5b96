"""Raw realisations to curves: averages, errors, repetitions, and what is refused, by hand and against resampling."""

from __future__ import annotations

import re

import h5py
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from driftline.curves import Curves
from driftline.errors import ConfigurationError, InputError
from driftline.readers.averages import LogMean, Mean, Median, Rate, Share
from driftline.readers.repeats import agreement, repeated, repeated_within
from driftline.readers.samples import Block, SampleOptions, sampled

GRID = (1.0, 2.0, 3.0, 4.0)
CHAIN = "datasets/random-field-chain/realisations.h5"


def blocks_of(tables, *, size=8.0, labels=None, grid=GRID, source="r.dat"):
    """A block for each disorder from a list of arrays."""
    return [
        Block(size, w, np.asarray(values, dtype=float), None if labels is None else np.asarray(labels), source)
        for w, values in zip(grid, tables, strict=True)
    ]


def noise(n=50, *, seed=1, columns=4):
    """Independent normal values, a column for each disorder."""
    return list(np.random.default_rng(seed).normal(size=(columns, n)))


def chain_blocks(name, *, states=False, rows=None):
    """Blocks of the random-field chain as its file holds them."""
    with h5py.File(CHAIN) as file:
        grid = file["disorder"][()]
        for size, group in file["sizes"].items():
            table = group[f"state_{name}" if states else name][:rows].astype(float)
            for column, disorder in enumerate(grid):
                yield Block(float(size), disorder, table[:, column], group["number"][: len(table)], CHAIN)


# ---------------------------------------------------------------- averages


def test_states_of_a_realisation_are_averaged_first():
    """Two realisations of two states each, by hand: means 2 and 6, so 4 with standard error sqrt(8)/sqrt(2) = 2."""
    tables = [np.array([[1.0, 3.0], [5.0, 7.0]]) + shift for shift in range(4)]
    found = sampled(blocks_of(tables))
    curve = found.curves[0]
    assert curve.mean.tolist() == [4.0, 5.0, 6.0, 7.0]
    assert curve.error.tolist() == pytest.approx([2.0] * 4, rel=1e-15)
    assert curve.samples.tolist() == [2] * 4
    assert found.rows == 16
    # Counted as independent: standard deviation sqrt(20/3) of four values, divided by 2
    assert found.diagnostics[0].error_ratio == pytest.approx(2 / np.sqrt(20 / 3 / 4), rel=1e-14)


def test_a_table_and_its_long_form_agree():
    """Rows of states, and the same states one under the other with the label of their realisation, give one curve."""
    rng = np.random.default_rng(2)
    tables = list(rng.normal(size=(4, 30, 7)))
    labels = rng.permutation(30)
    wide = sampled(blocks_of(tables, labels=labels)).curves[0]
    long = sampled(blocks_of([table.ravel() for table in tables], labels=np.repeat(labels, 7))).curves[0]
    # Sums of seven and thirty terms in another order
    np.testing.assert_allclose(long.mean, wide.mean, rtol=0, atol=1e-14)
    np.testing.assert_allclose(long.noise, wide.noise, rtol=1e-12)


@pytest.mark.parametrize("average", [Mean(), Median(), LogMean()], ids=lambda average: average.name)
@pytest.mark.parametrize("n", [9, 60])
def test_errors_are_those_of_resampling(average, n):
    """Closed-form bootstrap errors agree with resampled ones."""
    rng = np.random.default_rng(n)
    x = rng.lognormal(0.0, 0.6, n)
    found = average.estimate(average.scale(x))
    draws = 20_000
    table = x[rng.integers(0, n, (draws, n))]
    function = {"mean": np.mean, "median": np.median, "log-mean": stats.gmean}[average.name]
    resampled = function(table, axis=1)
    assert found.value == pytest.approx(function(x), rel=1e-13)
    # Mean and log-mean carry the factor n/(n-1). A resampled standard deviation scatters by sqrt((K + 2)/(4 draws)).
    kurtosis = stats.kurtosis(resampled)
    scale = 1.0 if average.name == "median" else n / (n - 1)
    tolerance = 4 * np.sqrt((kurtosis + 2) / (4 * draws))
    if average.name == "median" and n % 2 == 0:
        tolerance += 0.02  # the two middle values are taken as one beta interval, an approximation of order 1/n
    assert found.error == pytest.approx(resampled.std() * np.sqrt(scale), rel=tolerance)


@pytest.mark.parametrize(("average", "yes"), [(Share(), 0), (Share(), 1), (Share(), 12), (Rate(), 0), (Rate(), 12)])
def test_binomial_errors(average, yes):
    """Counted by hand from Jeffreys' prior, for none, some and all of twelve."""
    n = 12
    x = np.zeros(n)
    x[:yes] = 1
    found = average.estimate(x)
    assert found.value == yes / n
    if isinstance(average, Share):
        # beta(yes + 1/2, no + 1/2) (Brown, Cai, DasGupta 2001)
        expected = stats.beta(yes + 0.5, n - yes + 0.5).std()
    else:
        # gamma(events + 1/2) over n; all of twelve realisations have one event, so the counts do not scatter
        spread = 1.0 if yes == 0 else x.var(ddof=1) / x.mean()
        expected = np.sqrt(spread) * stats.gamma(yes + 0.5, scale=1 / n).std()
    assert found.error == pytest.approx(expected, rel=1e-12)


def test_many_counts_have_the_error_of_a_binomial():
    """The error of counts out of 50 trials is that of the binomial distribution, whatever the code assumes of it."""
    n, trials, p = 4000, 50, 0.3
    x = np.random.default_rng(3).binomial(trials, p, n).astype(float)
    # A standard deviation of n nearly normal values scatters by 1/sqrt(2n) = 1.1 %; four of these
    assert Rate().estimate(x).error == pytest.approx(np.sqrt(trials * p * (1 - p) / n), rel=0.045)


def test_several_answers_a_realisation_shrink_the_error():
    """With fifty independent answers in each realisation, the share's error is that of all answers together."""
    x = np.random.default_rng(4).binomial(1, 0.4, (200, 50)).astype(float)
    found = sampled(blocks_of([x, x, x, x] + 0 * x), SampleOptions(kind="yes-no")).curves[0]
    # 10^4 answers: sqrt(0.24/10^4); a standard deviation from 200 values scatters by 5 %, four of these
    assert found.error[0] == pytest.approx(np.sqrt(0.24 / 1e4), rel=0.2)


@pytest.mark.parametrize("options", [("mode", "numbers"), ("mean", "letters"), ("median", "yes-no")])
def test_averages_that_do_not_exist(options):
    """Unknown names and a median of yes/no values are refused when the options are made."""
    with pytest.raises(ConfigurationError, match=r"must be .* or .*, not|is not defined; take the mean"):
        SampleOptions(average=options[0], kind=options[1])


# ---------------------------------------------------------------- the chain's realisations


@pytest.mark.parametrize(("name", "published"), [("gap_ratio", (1.20, 1.18, 1.20)), ("entanglement", (3.1, 3.9, 5.1))])
def test_states_counted_as_independent(name, published):
    """The error ratios are those that the data set's own README gives for 20, 30 and 50 states."""
    found = {each.size: each.error_ratio for each in sampled(chain_blocks(name, states=True)).diagnostics}
    # README: two or three digits, so half a unit of 3.1 at most
    assert [found[size] for size in (8.0, 10.0, 12.0)] == pytest.approx(published, rel=0.05 / 3.1)


@pytest.mark.parametrize("name", ["gap_ratio", "entanglement"])
def test_covariance_of_the_chain(name):
    """The covariance is that of an independent bootstrap over realisations."""
    found = sampled(chain_blocks(name)).curves[0]
    with h5py.File(CHAIN) as file:
        table = file[f"sizes/8/{name}"][()]
    rng = np.random.default_rng(6)
    means = np.stack([table[rng.integers(0, len(table), len(table))].mean(axis=0) for _ in range(1000)])
    resampled = np.corrcoef(means, rowvar=False)
    own = found.covariance / np.outer(found.error, found.error)
    # A correlation from 1000 draws scatters by 1/sqrt(1000) = 0.032 (largest of 78: 0.1); shrinkage moves each by less
    # than the 1/sqrt(2000) that it is uncertain by
    np.testing.assert_allclose(own, resampled, rtol=0, atol=0.12)
    np.testing.assert_allclose(found.error, means.std(axis=0), rtol=4 / np.sqrt(2 * 1000))
    assert np.mean(np.diag(own, 1)) == pytest.approx(np.mean(np.diag(resampled, 1)), abs=0.04)


# ---------------------------------------------------------------- pairing


def test_labels_pair_and_their_order_does_not_matter():
    """Shuffled rows with their labels give the same covariance; without labels the points count as independent."""
    rng = np.random.default_rng(7)
    shared = rng.normal(size=200)
    tables = [shared + rng.normal(size=200) for _ in GRID]
    plain = sampled(blocks_of(tables, labels=np.arange(200))).curves[0]
    shuffled = []
    for w, values in zip(GRID, tables, strict=True):
        order = rng.permutation(200)
        shuffled.append(Block(8.0, w, values[order], order, "r.dat"))
    np.testing.assert_allclose(sampled(shuffled).curves[0].noise, plain.noise, rtol=1e-12)
    # correlation 1/2 of the sums; 200 realisations know it to 0.05, four of these
    assert (plain.covariance / np.outer(plain.error, plain.error))[0, 1] == pytest.approx(0.5, abs=0.2)
    bare = sampled(blocks_of(tables))
    assert bare.curves[0].covariance is None
    assert not bare.diagnostics[0].shared
    assert bare.diagnostics[0].correlation_z > 8
    np.testing.assert_array_equal(
        sampled(blocks_of(tables), SampleOptions(paired=True)).curves[0].covariance, plain.covariance
    )
    assert sampled(blocks_of(tables, labels=np.arange(200)), SampleOptions(paired=False)).curves[0].covariance is None


def test_missing_realisations():
    """With half the realisations missing at one point, the covariance of the means is that of repeated experiments."""
    rng = np.random.default_rng(8)
    n, sets = 100, 2000
    kept = np.arange(50, 100)
    values = np.sqrt(0.8) * rng.normal(size=(sets, n, 1)) + np.sqrt(0.2) * rng.normal(size=(sets, n, 4))
    means = values.mean(axis=1)
    means[:, 3] = values[:, kept, 3].mean(axis=1)
    truth = np.corrcoef(means, rowvar=False)
    found = []
    for table in values[:60]:
        blocks = blocks_of(table.T, labels=np.arange(n))
        blocks[3] = Block(8.0, 4.0, table[kept, 3], kept, "r.dat")
        curve = sampled(blocks).curves[0]
        found.append(curve.covariance / np.outer(curve.error, curve.error))
    # by hand: 0.8 n_ab / sqrt(n_a n_b) = 0.8 sqrt(50/100); a correlation from 2000 sets scatters by 0.022, the mean of
    # 60 estimates from 100 realisations by 0.013, and shrinkage takes off up to a few per cent
    assert truth[0, 3] == pytest.approx(0.8 * np.sqrt(0.5), abs=0.05)
    np.testing.assert_allclose(np.mean(found, axis=0), truth, rtol=0, atol=0.07)


def test_labels_that_never_meet():
    """Labels that occur at one disorder each mean independent points, and no way to pair them."""
    blocks = [Block(8.0, w, v, np.arange(50) + 50 * i, "r") for i, (w, v) in enumerate(zip(GRID, noise(), strict=True))]
    assert sampled(blocks).curves[0].covariance is None
    with pytest.raises(InputError, match="no realisation label occurs at two disorders"):
        sampled(blocks, SampleOptions(paired=True))


def test_unlabelled_counts_that_differ_cannot_be_paired():
    """Rows are matched by order only if every disorder has as many of them."""
    tables = noise()
    tables[2] = tables[2][:-1]
    assert sampled(blocks_of(tables)).curves[0].samples.tolist() == [50, 50, 49, 50]
    with pytest.raises(
        InputError,
        match=r"^r.dat, size 8, disorder 3: the values are said .* there are 49 realisations at disorder 3 and 50 at 1",
    ):
        sampled(blocks_of(tables), SampleOptions(paired=True))


# ---------------------------------------------------------------- repetitions


def test_a_restart_is_counted_once():
    """Values written again after a restart change neither mean nor error, and are named with place and number."""
    tables = noise(100)
    plain = sampled(blocks_of(tables)).curves[0]
    doubled = [tables[0], np.concatenate([tables[1], tables[1][40:70]]), *tables[2:]]
    found = sampled(blocks_of(doubled))
    np.testing.assert_array_equal(found.curves[0].mean, plain.mean)
    np.testing.assert_array_equal(found.curves[0].error, plain.error)
    assert found.diagnostics[0].repeats == 30
    assert found.notes == (
        "r.dat, size 8, disorder 2: 30 of 130 realisations repeat values that stand before them (a restart, or a file "
        "copied?); they were counted once",
    )


def test_repeated_labels():
    """A label with the same value again is dropped, one with another value is averaged; both are named."""
    tables = noise(20)
    labels = np.arange(20)
    blocks = blocks_of(tables, labels=labels)
    blocks[1] = Block(8.0, 2.0, np.append(tables[1], [tables[1][3], 0.25]), np.append(labels, [3, 7]), "b.dat")
    found = sampled(blocks)
    expected = tables[1].copy()
    expected[7] = (expected[7] + 0.25) / 2
    assert found.curves[0].samples.tolist() == [20] * 4
    assert found.curves[0].mean[1] == pytest.approx(expected.mean(), rel=1e-13)
    assert found.notes == (
        "b.dat, size 8, disorder 2: 1 row stands twice, of realisation 3 (a restart?); counted once",
        "b.dat, size 8, disorder 2: realisation 7 occurs more than once with different values; each was averaged and "
        "counted once",
    )


def test_a_realisation_begun_twice():
    """Eigenstates written again after a restart do not count double in the average of their realisation."""
    rng = np.random.default_rng(9)
    tables = list(rng.normal(size=(4, 10, 50)))
    plain = sampled(blocks_of(tables, labels=np.arange(10))).curves[0]
    blocks = blocks_of([table.ravel() for table in tables], labels=np.repeat(np.arange(10), 50))
    cut = Block(8.0, 1.0, tables[0][9, :17], np.full(17, 9), "before.dat")
    found = sampled([cut, *blocks])
    np.testing.assert_allclose(found.curves[0].mean, plain.mean, rtol=0, atol=1e-14)
    assert found.notes[0].startswith("before.dat and 1 more, size 8, disorder 1: 17 rows stand twice, of realisation 9")


def test_a_copied_disorder_is_named():
    """The same values at two disorders are told."""
    tables = noise()
    found = sampled(blocks_of([tables[0], tables[1], tables[1], tables[3]]))
    assert found.notes == (
        "size 8: all 50 values at disorder 3 are those at disorder 2, number for number; one may be a copy of the "
        "other",
    )


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize(
    "make",
    [
        lambda rng: rng.normal(size=3000),
        lambda rng: rng.normal(size=3000).astype(np.float32).astype(float),
        lambda rng: rng.uniform(size=3000).round(4),
        lambda rng: np.sort(rng.uniform(size=3000).round(2)),
        lambda rng: rng.integers(0, 2, 3000).astype(float),
        lambda rng: rng.poisson(0.3, 3000).astype(float),
        lambda rng: np.where(rng.random(3000) < 0.3, 0.0, rng.normal(size=3000)),
        lambda rng: np.full(3000, 0.5),
        lambda rng: np.float64([f"{v:.3e}" for v in rng.lognormal(0, 3, 3000)]),
    ],
    ids=["double", "single", "four digits", "sorted", "yes-no", "counts", "some zeros", "constant", "scientific"],
)
def test_no_repetitions_in_honest_values(make, seed):
    """Agreement by chance, whatever the values are written like, is no repetition (negative control below)."""
    assert not repeated(make(np.random.default_rng(seed))).any()


@pytest.mark.parametrize(
    ("make", "again"),
    [
        (lambda rng: rng.normal(size=3000), 1),
        (lambda rng: rng.normal(size=3000).astype(np.float32).astype(float), 4),
        (lambda rng: rng.uniform(size=3000).round(4), 8),
        (lambda rng: rng.integers(0, 2, 3000).astype(float), 60),
        (lambda rng: np.where(rng.random(3000) < 0.3, 0.0, rng.normal(size=3000)), 40),
    ],
    ids=["double", "single", "four digits", "yes-no", "some zeros"],
)
def test_repetitions_are_found(make, again):
    """A run long enough to be no chance is found, and nothing but it and what stands beside it."""
    values = make(np.random.default_rng(11))
    found = repeated(np.concatenate([values, values[100 : 100 + again]]))
    assert found[3000:].all()
    assert not found[:2990].any()


@given(st.integers(0, 2**32 - 1), st.integers(1, 5))
def test_a_file_read_several_times(seed, times):
    """However often a file is repeated, its values count once."""
    values = np.random.default_rng(seed).normal(size=40)
    assert int(repeated(np.tile(values, times)).sum()) == 40 * (times - 1)


def test_agreement_by_chance():
    """The probability that two values agree, for printed digits and for yes/no values, by hand."""
    rng = np.random.default_rng(12)
    assert agreement(rng.uniform(size=2000).round(3)) == pytest.approx(1e-3, rel=0.2)
    assert agreement(rng.integers(0, 2, 2000).astype(float)) == pytest.approx(0.5, rel=0.01)
    assert agreement(rng.uniform(size=2000)) < 1e-15


def test_rows_within_a_realisation():
    """Equal four-digit values within one realisation are chance; a second copy of its rows is not."""
    rng = np.random.default_rng(13)
    values = rng.uniform(size=2000).round(4)
    group = np.repeat(np.arange(20), 100)
    assert not repeated_within(values, group).any()
    again = repeated_within(np.concatenate([values, values[:50]]), np.concatenate([group, group[:50]]))
    assert again[2000:].all()


# ---------------------------------------------------------------- what is refused


@pytest.mark.parametrize(
    ("change", "options", "text"),
    [
        (lambda b: Block(8.0, 1.0, np.array([1.0, np.nan]), None, "a.dat"), {},
         "a.dat, size 8, disorder 1: row 2 holds nan; correct it or remove the row"),
        (lambda b: Block(8.0, 1.0, np.empty(0), None, "a.dat"), {},
         "a.dat, size 8, disorder 1: the values must be a list or a table with at least one entry, not of shape (0,)"),
        (lambda b: Block(8.0, 1.0, np.ones((2, 2, 2)), None, "a.dat"), {},
         "a.dat, size 8, disorder 1: the values must be a list or a table with at least one entry, not of shape (2, 2, "
         "2)"),
        (lambda b: Block(8.0, 1.0, b.values, np.arange(3), "a.dat"), {},
         "a.dat, size 8, disorder 1: there are 3 realisation labels for 50 rows; give one for each"),
        (lambda b: Block(8.0, 1.0, np.array([0.5]), None, "a.dat"), {},
         "a.dat, size 8, disorder 1: there is one realisation only, so no error can be found; run at least two or drop "
         "this point"),
        (lambda b: Block(8.0, 1.0, np.full(9, 0.5), None, "a.dat"), {},
         "a.dat, size 8, disorder 1: the mean of 9 realisations has no error, because they have the same value; drop "
         "this point"),
        (lambda b: Block(8.0, 1.0, b.values, None, "a.dat"), {"kind": "yes-no"},
         "row 1 holds 0.345584, which is not 0 (no) or 1 (yes); correct it, or say that these are numbers"),
        (lambda b: Block(8.0, 1.0, b.values, None, "a.dat"), {"kind": "counts"},
         "row 1 holds 0.345584, which is not a count (a whole number from 0 on); correct it, or say that these are "
         "numbers"),
        (lambda b: Block(8.0, 1.0, b.values, None, "a.dat"), {"average": "log-mean"},
         "row 4 holds -1.30316, but a log-mean needs positive values; take the mean or the median"),
    ],
)  # fmt: skip
def test_refused(change, options, text):
    """Each fault is one sentence with its place."""
    blocks = blocks_of(noise())
    blocks[0] = change(blocks[0])
    with pytest.raises(InputError, match=re.escape(text) + "$"):
        sampled(blocks, SampleOptions(**options))


def test_labels_for_some_files_only():
    """Labelled and unlabelled values of one point cannot be put together."""
    blocks = [*blocks_of(noise(), labels=np.arange(50)), Block(8.0, 1.0, np.ones(3), None, "b.dat")]
    with pytest.raises(InputError, match=r"b\.dat, size 8, disorder 1: these values have no realisation labels, but"):
        sampled(blocks)


def test_tables_in_memory():
    """A table for each size is what blocks with the rows as labels are; NaN is a missing realisation."""
    rng = np.random.default_rng(14)
    table = rng.normal(size=(40, 1, 1)) + rng.normal(size=(40, 4, 3))
    table[5, 2] = np.nan
    curves = Curves.from_realisations({8: table, 12: table[:, :, 0] + 1e-6}, GRID, observable="m", paired=True)
    kept = np.delete(np.arange(40), 5)
    blocks = blocks_of(list(table.transpose(1, 0, 2)), labels=np.arange(40))
    blocks[2] = Block(8.0, 3.0, table[kept, 2], kept, "r")
    expected = sampled(blocks).curves[0]
    np.testing.assert_array_equal(curves.curves[0].covariance, expected.covariance)
    np.testing.assert_array_equal(curves.curves[0].mean, expected.mean)
    assert curves.curves[1].samples.tolist() == [40, 40, 39, 40]
    assert curves.labels.observable == "m"
    assert len(curves.origin["realisations"]) == 2
    assert not Curves.from_realisations({8: table, 12: table}, GRID, paired=False).correlated
    text = "table of size 8: the table must be realisations by disorders, or by disorders and states, with 4 disorders"
    with pytest.raises(InputError, match=text):
        Curves.from_realisations({8: table[:, :3]}, GRID)
    partly = table.copy()
    partly[7, 1, 0] = np.nan
    with pytest.raises(InputError, match="disorder 2: row 8 holds nan"):
        Curves.from_realisations({8: partly}, GRID)


def test_curves_of_the_chain():
    """The realisations make curves of all sizes that carry their covariance."""
    curves = Curves(sampled(chain_blocks("gap_ratio")).curves)
    assert curves.sizes.tolist()[:3] == [8.0, 10.0, 12.0]
    assert curves.correlated
