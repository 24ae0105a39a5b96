"""Crossings: do their intervals cover, which crossing is taken, and what is said where there is none."""

from __future__ import annotations

import json

import numpy as np
import pytest

import driftline.crossings as module
from driftline.crossings import find_crossings
from driftline.curves import Curve, Curves
from driftline.errors import InputError
from driftline.simulate import (
    Gompertz,
    LinearDriftTruth,
    Logistic,
    PowerLawTruth,
    SizeIndependentTruth,
    SlowTails,
    Truth,
    simulate,
    true_crossing,
)
from driftline.smoothing import SmoothCurve

GRID = np.linspace(2.0, 6.0, 15)
TRUTHS = {
    "logistic": PowerLawTruth(),
    "asymmetric": PowerLawTruth(W_c=3.8, scaling=Gompertz()),
    "slow tails": PowerLawTruth(W_c=4.2, scaling=SlowTails()),
    "drifting": LinearDriftTruth(W_c=3.0, rate=0.04, nu=1.3, scaling=Logistic(scale=2.5)),
}


def understate(curves, factor):
    """The same means with errors smaller by `factor` than they are."""
    return Curves([Curve(c.size, c.disorder, c.mean, c.error / factor) for c in curves.curves])


def coverage(truths, sets, *, factor=1.0, sizes=(8, 12, 16), draws=250, error=0.003, seed=11):
    """Fractions of 68 % and 95 % intervals of adjacent crossings that hold the truth, `sets` data sets in all."""
    rng = np.random.default_rng(seed)
    held = []
    for k in range(sets):
        truth = truths[k % len(truths)]
        curves = simulate(sizes, GRID, truth, error, rng)
        found = find_crossings(curves if factor == 1 else understate(curves, factor), draws=draws, seed=rng)
        for pair in found.adjacent:
            exact = true_crossing(truth, *pair.sizes, (3.0, 5.0))
            held.append((pair.disorder.contains(exact, level=68), pair.disorder.contains(exact)))
    return np.mean(held, axis=0)


def covers(fractions, sets):
    """Whether both fractions agree with their levels to three binomial standard errors of `sets` independent trials.

    The pairs of one data set share sizes; counting a data set once makes the tolerance err on the wide side by at
    most sqrt(2), which the negative control shows to be harmless.
    """
    return all(
        abs(found - level) < 3 * np.sqrt(level * (1 - level) / sets)
        for found, level in zip(fractions, (0.68, 0.95), strict=True)
    )


def test_intervals_cover():
    """In 200 data sets of four shapes 68 % and 95 % intervals hold the true crossing at these rates."""
    assert covers(coverage(list(TRUTHS.values()), 200), 200)


def test_understated_errors_fail_the_same_check():
    """Negative control: with errors half of what they are the check of coverage fails."""
    assert not covers(coverage(list(TRUTHS.values()), 60, factor=2.0), 60)


@pytest.mark.long
@pytest.mark.parametrize("name", TRUTHS)
@pytest.mark.parametrize("error", [0.001, 0.003])
def test_intervals_cover_for_each_shape(name, error):
    """Five sizes, 200 data sets for each shape and error; and the control with understated errors fails."""
    sizes = (8, 10, 12, 14, 16)
    assert covers(coverage([TRUTHS[name]], 200, sizes=sizes, draws=1000, error=error), 200)
    assert not covers(coverage([TRUTHS[name]], 200, sizes=sizes, draws=1000, error=error, factor=2.0), 200)


def test_exponent_and_value_of_a_power_law():
    """With small errors position, value and 1/nu of F((W - 4) L^(1/nu)) come out: 4, F(0) = 0.46 and 1/0.8."""
    truth = PowerLawTruth(nu=0.8, scaling=Logistic(scale=6.0))
    pair = find_crossings(simulate([8, 16], GRID, truth, 0.0005, 1), draws=1000).pairs[0]
    for interval, exact in ((pair.disorder, 4.0), (pair.value, 0.46), (pair.inverse_nu, 1.25)):
        assert abs(interval.median - exact) < 4 * interval.sd  # false alarm 6e-5 each
    assert pair.inverse_nu.sd < 0.1  # and that is not for want of precision
    assert pair.probability == 1.0
    assert pair.separated > 0.99


def test_curves_apart_do_not_cross():
    """Curves that keep ten errors apart cross with probability near 0 and nothing is said about where."""

    class Apart(Truth):
        def value(self, size, disorder):
            return 0.5 - 0.02 * disorder - 0.005 * size

    found = find_crossings(simulate([8, 16], GRID, Apart(), 0.003, 1), draws=500)
    pair = found.pairs[0]
    # Smoothed over 15 points the difference 0.04 is at least 9 of its standard deviations everywhere
    assert pair.probability == 0.0
    assert (pair.disorder, pair.value, pair.inverse_nu, pair.separated) == (None, None, None, 0.0)
    assert np.all(np.isnan(pair.draws))
    assert json.loads(json.dumps(found.to_dict(), allow_nan=False))[0]["disorder"] is None


def test_curves_that_coincide_are_not_separated():
    """Without size dependence a pair reaches separated > 0.95 in fewer than 5 % of 100 data sets, crossings or not."""
    high, probability = 0, []
    for seed in range(100):
        pair = find_crossings(simulate([8, 16], GRID, SizeIndependentTruth(), 0.003, seed), draws=100).pairs[0]
        high += pair.separated > 0.95
        probability.append(pair.probability)
    # Either side alone would do so in 5 %; both together must do so much less often: 5 of 100 at 5 % has p = 0.56,
    # at the true rate below 1 % (both sides) p = 0.004
    assert high < 5
    assert np.mean(probability) > 0.5  # there are plenty of crossings to be deceived by


def test_plateau_does_not_attract_the_crossing():
    """Where curves coincide on half of the range their many noise crossings are passed over for the real one."""
    grid = np.linspace(2.0, 10.0, 25)
    truth = PowerLawTruth(W_c=4.0)  # both curves sit on 0.39 above W = 7
    off = 0
    for seed in range(20):
        pair = find_crossings(simulate([8, 16], grid, truth, 0.003, seed), draws=200).pairs[0]
        off += abs(pair.disorder.median - 4.0) > 4 * 0.1
    # 0.1: error of the difference, 0.003 sqrt(2) / sqrt(3 points in reach), over its slope 0.035 per unit of W, and
    # a margin; four of them have false alarm 6e-5
    assert off == 0


def test_pairs_that_share_a_size_share_its_error():
    """A high middle curve moves the crossing with the smaller size up and that with the larger one down."""
    found = find_crossings(simulate([8, 12, 16], GRID, PowerLawTruth(), 0.001, 2), draws=2000)
    first, second = (pair.draws for pair in found.adjacent)
    correlation = np.corrcoef(first, second)[0, 1]
    # Equal errors of three sizes: cov = -v, variances 2 v each after the slopes cancel, so about -1/2; smoothers of
    # steeper curves have larger errors, hence the room. Independent draws would give 0 +- 0.022.
    assert -0.75 < correlation < -0.25


def test_rising_curves_cross_as_falling_ones():
    """The mirrored observable has the same crossings, with the direction reversed."""
    curves = simulate([8, 12], GRID, PowerLawTruth(), 0.003, 1)
    mirrored = Curves([Curve(c.size, c.disorder, -c.mean, c.error) for c in curves.curves])
    first, second = find_crossings(curves, seed=1), find_crossings(mirrored, seed=2)
    assert (first.direction, second.direction) == (1, -1)
    # Two sets of 2000 draws: 4 sqrt(2) standard errors of a median, 1.25 sd / sqrt(2000)
    room = 4 * np.sqrt(2) * 1.25 * first.pairs[0].disorder.sd / np.sqrt(2000)
    assert abs(first.pairs[0].disorder.median - second.pairs[0].disorder.median) < room


def test_unit_and_order_do_not_matter():
    """Disorder in other units and sizes in another order give the same probabilities and scaled positions."""
    curves = simulate([8, 12, 16], GRID, PowerLawTruth(), 0.003, 1)
    scaled = Curves([Curve(c.size, 10 * c.disorder, c.mean, c.error) for c in reversed(curves.curves)])
    for first, second in zip(find_crossings(curves).pairs, find_crossings(scaled).pairs, strict=True):
        # Rounding may turn eigenvectors of near-zero eigenvalues, which is new noise for a draw: Monte Carlo room of
        # 2000 draws, five standard errors of a fraction and of a median
        assert second.probability == pytest.approx(first.probability, abs=5 * 0.5 / np.sqrt(1000))
        assert second.separated == pytest.approx(first.separated, abs=5 * 0.5 / np.sqrt(1000))
        room = 5 * 1.25 * first.disorder.sd / np.sqrt(1000)
        assert second.disorder.median / 10 == pytest.approx(first.disorder.median, abs=room)


def test_same_seed_same_crossings():
    """Two runs with one seed agree in every digit."""
    curves = simulate([8, 12], GRID, PowerLawTruth(), 0.003, 1)
    assert find_crossings(curves, seed=4).to_dict() == find_crossings(curves, seed=4).to_dict()


def test_root_of_a_cubic_is_exact():
    """Values and slopes at two grid points fix a cubic, and its root is found to rounding."""
    grid = np.array([0.0, 1.0])
    root = 0.3
    value = ((grid - root) * (1 + grid**2))[None, :]
    slope = (1 + grid**2 + 2 * grid * (grid - root))[None, :]
    position, fraction = module._refine(grid, value, slope, np.array([0]), np.array([True]))
    assert position[0] == pytest.approx(root, abs=2e-9)  # 2^-30 = 1e-9
    assert fraction[0] == position[0]


def test_best_root_by_hand():
    """Of two roots from plus to minus the one with more on its sides is taken; a draw without any has none."""
    grid = np.arange(7.0)
    z = np.array([[3.0, 3.0, -1.0, 1.0, -2.0, -2.0, -2.0], [1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0]])
    step, has = module._best_root(grid, z)
    assert has.tolist() == [True, False]
    # |mean z| = 2 2 0 1 .5 .5 .5, weighted z = 6 6 0 1 -1 -1 -1: up to step 1 the area is 6 + 3 = 9, up to step 3
    # it is 9.5 + 0 = 9.5; so the second root is better by twice 0.5
    assert step[0] == 3


def test_two_directions_are_told_apart_by_the_data():
    """Curves that fall but of which the larger size is the flatter one cross in the direction that is seen."""

    def smooth(size, slope):
        grid = np.linspace(0, 1, 11)
        mean = -slope * (grid - 0.5)
        return SmoothCurve(size, grid, mean, np.full(11, 0.01), np.tile(mean, (2, 1)), np.full((2, 11), -slope))

    assert module._direction([smooth(8, 1.0), smooth(16, 2.0)]) == 1
    assert module._direction([smooth(8, 2.0), smooth(16, 1.0)]) == -1
    # Unresolved (separation 0.5 * 0.01 / 0.014 = 0.35 standard deviations): the expected direction stands
    assert module._direction([smooth(8, 1.01), smooth(16, 1.0)]) == 1


def test_summary_fits_the_terminal():
    """The table names every pair and keeps to 80 columns."""
    text = find_crossings(simulate([8, 12, 16], GRID, PowerLawTruth(), 0.003, 1), draws=200).summary()
    assert max(map(len, text.splitlines())) <= 80
    assert [line.split()[:2] for line in text.splitlines()[2:]] == [["8,", "12"], ["8,", "16"], ["12,", "16"]]


def test_too_few_draws_are_refused():
    """Fewer than 100 draws give one sentence that says what is needed."""
    curves = simulate([8, 12], GRID, PowerLawTruth(), 0.003, 1)
    with pytest.raises(InputError) as caught:
        find_crossings(curves, draws=99)
    assert str(caught.value) == "find_crossings: at least 100 draws are needed for an interval, not 99"
