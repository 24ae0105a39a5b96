"""Cost functions of the literature and their noise floor."""

import time
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from analyses import made_curves, made_fit
from scipy.stats import binom

from driftline.analysis import analyse
from driftline.collapse import CollapsedPoints, fit_collapse
from driftline.costs import COST_FUNCTIONS, BhattacharjeeSeno, collapse_costs, synthetic_ordinates
from driftline.curves import Curve, Curves
from driftline.settings import Settings
from driftline.simulate import Logistic, PowerLawTruth, simulate

SIZES = (6, 8, 10, 12, 14, 16)
GRID = np.linspace(2.0, 6.0, 21)
ALL = pytest.mark.parametrize("name", COST_FUNCTIONS)


def random_points(seed=1, count=60):
    """Points of four sizes without ties, scattered about a smooth curve."""
    rng = np.random.default_rng(seed)
    size, x = rng.permutation(np.repeat([8.0, 10.0, 12.0, 16.0], count // 4)), rng.normal(0, 3, count)
    error = rng.uniform(0.01, 0.05, count)
    return size, x, np.tanh(x) + rng.normal(0, error), error


def collapsed(curves, nu, W_c=4.0):
    """A fit at this exponent: F is the truth for the true exponent 1, else the best polynomial."""
    size, disorder, mean, error = curves.flat()
    x = (disorder - W_c) * size ** (1 / nu)
    # Of degree 9 for at least 120 points: it bends as a fitted spline would, and costs no fit
    fitted = Logistic()(x) if nu == 1 else np.polynomial.Polynomial.fit(x, mean, 9, w=1 / error)(x)
    points = CollapsedPoints(size, disorder, x, mean, error, fitted, (mean - fitted) / error)
    return replace(made_fit(made_curves()), curves=curves, points=points)


@cache
def fitted():
    """A real fit of the right form."""
    return fit_collapse(simulate(SIZES, GRID, PowerLawTruth(), 0.003, 1), "power-law", quick=True, extras=False)


class TestByHand:
    """Values that can be checked on paper."""

    def test_kawashima_ito(self):
        """The middle of three points lies 1 above their line, whose error is that of (1, 1/3, 2/3): 9/14."""
        x, y = np.array([0.0, 1.0, 3.0]), np.array([0.0, 1.0, 0.0])
        # p = 1/3, D^2 = 1 + 1/9 + 4/9 = 14/9; one rounding each
        assert COST_FUNCTIONS["kawashima-ito"](np.ones(3), x, y, np.ones(3)) == pytest.approx(9 / 14, rel=1e-14)

    #: Size 1 at x = 0, 2 on y = x; size 2 at x = 1, 3 with y = 2: two points lie in the range of the other size, one
    #: of them 1 above its line, the other on it
    TWO = (np.array([1.0, 1.0, 2.0, 2.0]), np.array([0.0, 2.0, 1.0, 3.0]), np.array([0.0, 2.0, 2.0, 2.0]), np.ones(4))

    @pytest.mark.parametrize(("q", "expected"), [(1.0, 0.5), (2.0, 0.5**0.5)])
    def test_bhattacharjee_seno(self, q, expected):
        """Distances 1 and 0 have the mean 1/2 and the root mean square sqrt(1/2)."""
        assert BhattacharjeeSeno(q)(*self.TWO) == pytest.approx(expected, rel=1e-14)

    def test_houdayer_hartmann(self):
        """Half way between two points of error 1 the line has variance 1/2: S = [1 / (1 + 1/2) + 0] / 2 = 1/3."""
        assert COST_FUNCTIONS["houdayer-hartmann"](*self.TWO) == pytest.approx(1 / 3, rel=1e-14)

    def test_sorted_increment(self):
        """Steps of 2, -1, 2 over a range of 3: 5/3 - 1."""
        x, y = np.array([3.0, 0.0, 1.0, 2.0]), np.array([3.0, 0.0, 2.0, 1.0])
        assert COST_FUNCTIONS["sorted-increment"](np.ones(4), x, y, np.ones(4)) == pytest.approx(2 / 3, rel=1e-14)

    def test_ties_are_ordered_by_size(self):
        """Points at one x follow each other by size: steps of 1, 1 and 1 here, and the middle one of three is 0 off."""
        size, x, y = np.array([3.0, 1.0, 2.0]), np.zeros(3), np.array([2.0, 0.0, 1.0])
        assert COST_FUNCTIONS["sorted-increment"](size, x, y, np.ones(3)) == 0
        assert COST_FUNCTIONS["kawashima-ito"](size, x, y, np.ones(3)) == 0


class TestAgainstOtherAlgorithms:
    """The vectorised code against the definitions, written as loops over library functions."""

    def test_houdayer_hartmann(self):
        """Weighted straight lines by numpy's polynomial fit give the same master curve and errors."""
        size, x, y, error = random_points()
        terms = []
        for i in range(x.size):
            chosen = []
            for other in set(size.tolist()) - {size[i]}:
                own = np.flatnonzero(size == other)
                own = own[np.argsort(x[own])]
                chosen += [own[j : j + 2] for j in range(own.size - 1) if x[own[j]] <= x[i] < x[own[j + 1]]]
            if chosen:
                k = np.concatenate(chosen)
                line = np.polynomial.Polynomial.fit(x[k], y[k], 1, w=1 / error[k])(x[i])
                design = np.column_stack([np.ones(k.size), x[k] - x[i]])
                variance = np.linalg.inv(design.T @ (design / error[k, None] ** 2))[0, 0]
                terms.append((y[i] - line) ** 2 / (error[i] ** 2 + variance))
        # Lines through neighbours that are close condition to about 1e3; 1e-16 of rounding times its square
        assert COST_FUNCTIONS["houdayer-hartmann"](size, x, y, error) == pytest.approx(np.mean(terms), rel=1e-9)
        assert 40 < len(terms) < 60

    def test_bhattacharjee_seno(self):
        """numpy's interpolation, size by size."""
        size, x, y, error = random_points()
        distances = []
        for basis in np.unique(size):
            own, rest = size == basis, size != basis
            order = np.argsort(x[own])
            line = np.interp(x[rest], x[own][order], y[own][order], left=np.nan, right=np.nan)
            distances += (y[rest] - line)[~np.isnan(line)].tolist()
        expected = np.mean(np.abs(distances))
        assert BhattacharjeeSeno()(size, x, y, error) == pytest.approx(expected, rel=1e-12)  # sums of 150 terms

    def test_sorted_increment(self):
        """The published form, steps over range less one."""
        size, x, y, error = random_points()
        expected = np.abs(np.diff(y[np.argsort(x)])).sum() / np.ptp(y) - 1
        # sums of 60 terms
        assert COST_FUNCTIONS["sorted-increment"](size, x, y, error) == pytest.approx(expected, rel=1e-12)


@ALL
class TestInvariances:
    """What must not matter. Rounding is 1e-16 times the 60 terms and the inverse least distance, well below 1e-9."""

    def test_permutation(self, name):
        """The order of the points."""
        points = random_points()
        shuffled = [part[np.random.default_rng(2).permutation(60)] for part in points]
        assert COST_FUNCTIONS[name](*shuffled) == pytest.approx(COST_FUNCTIONS[name](*points), rel=1e-9)

    @pytest.mark.parametrize("unit", [1e-80, 1e3, -2.0, 1e80])
    def test_unit_of_x(self, name, unit):
        """The unit, the origin and the direction of x."""
        size, x, y, error = random_points()
        moved = COST_FUNCTIONS[name](size, unit * (x - 0.5), y, error)
        assert moved == pytest.approx(COST_FUNCTIONS[name](size, x, y, error), rel=1e-9)

    @pytest.mark.parametrize("unit", [1e-80, 1e3, 1e80])
    def test_unit_of_y(self, name, unit):
        """The unit and the origin of the observable, but for the one cost that is stated in this unit."""
        size, x, y, error = random_points()
        moved = COST_FUNCTIONS[name](size, x, unit * (y + 0.5), unit * error)
        expected = COST_FUNCTIONS[name](size, x, y, error) * (unit if name == "bhattacharjee-seno" else 1)
        assert moved == pytest.approx(expected, rel=1e-9)

    def test_many_sets_at_once(self, name):
        """A stack of ordinates gives the stack of costs, whatever its shape."""
        size, x, y, error = random_points()
        stack = y + np.random.default_rng(3).normal(0, 0.1, (2, 3, y.size))
        together = COST_FUNCTIONS[name](size, x, stack, error)
        assert together.shape == (2, 3)
        for index in np.ndindex(2, 3):
            assert together[index] == pytest.approx(COST_FUNCTIONS[name](size, x, stack[index], error), rel=1e-9)

    def test_perfect_collapse_costs_nothing(self, name):
        """Noiseless points of all sizes on one straight line."""
        size, x, _, error = random_points()
        # y of order 10 rounds by 1e-15, over errors of 0.01, squared or not
        assert COST_FUNCTIONS[name](size, x, 2 * x + 1, error) == pytest.approx(0, abs=1e-13)
        assert COST_FUNCTIONS[name](size, x, 2 * x + size / 8, error) > 0.1  # negative control

    def test_where_nothing_overlaps(self, name):
        """Two sizes apart in x have no cost of overlap, and a constant has no range; both are NaN, not an error."""
        size, x, y = np.repeat([8.0, 9.0], 3), np.arange(6.0), np.full(6, 0.5)
        undefined = {"bhattacharjee-seno", "houdayer-hartmann", "sorted-increment"}
        assert np.isnan(COST_FUNCTIONS[name](size, x, y, np.ones(6))) == (name in undefined)
        assert np.isnan(COST_FUNCTIONS[name](size, np.zeros(6), y, np.ones(6))) == (name in undefined)


def test_a_monotone_curve_costs_exactly_nothing():
    """The sorted-increment cost of points on any monotone curve is zero, without rounding."""
    size, x, _, error = random_points()
    for curve in (np.exp(x), -np.arctan(x)):
        assert COST_FUNCTIONS["sorted-increment"](size, x, curve, error) == 0


def test_exponentially_small_variables():
    """Points whose x underflows to a tie or below the square root of the least number still have finite costs."""
    size = np.repeat([8.0, 12.0], 6)
    x = np.tile(np.array([-1e-3, -1e-170, 0.0, 0.0, 1e-200, 1.0]), 2) * size
    y = np.tile(np.array([0.5, 0.45, 0.45, 0.45, 0.45, 0.4]), 2)
    for function in COST_FUNCTIONS.values():
        # The sizes lie on one straight line but for its bend, which linear interpolation sees as at most 0.05
        assert 0 <= function(size, x, y, np.full(12, 0.05)) < 1


class TestNoiseFloor:
    """The floor says what noise alone gives; shown by simulation, with controls that fail."""

    @pytest.mark.parametrize(("understated", "expected"), [(1.0, 1.0), (2.0, 4.0)])
    def test_houdayer_hartmann_is_a_chi_squared(self, understated, expected):
        """With the right exponent S is 1 for honest errors and 4 for errors understated by 2."""
        grid = np.linspace(2.0, 6.0, 41)
        curves = simulate(SIZES, grid, PowerLawTruth(), 0.003, 5)
        fit = collapsed(curves, 1)
        y, p = synthetic_ordinates(fit, 200, np.random.default_rng(6)), fit.points
        values = COST_FUNCTIONS["houdayer-hartmann"](p.size, p.x, y, p.error / understated)
        # Each term has mean 1 on a straight line; the bend of F over the widest spacing of 1.6 adds at most
        # (0.14 * 0.096 / 16 * 1.6^2 / 8 / 0.003)^2 = 0.008 of it. Four standard errors of the mean of 200 sets.
        tolerance = 4 * values.std() / np.sqrt(200) + 0.008 * expected
        assert values.mean() == pytest.approx(expected, abs=tolerance)
        assert tolerance < 0.05 * expected

    def test_coverage(self):
        """Costs of new data fall into the 95 % interval of the floor as often as the quantiles of 100 draws say."""
        inside = dict.fromkeys(COST_FUNCTIONS, 0)
        for seed in range(100):
            curves = simulate(SIZES, GRID, PowerLawTruth(), 0.003, seed)
            for cost in collapse_costs(collapsed(curves, 1), bootstrap=100, seed=1000 + seed):
                inside[cost.name] += cost.floor.contains(cost.value)
        # The interval ends between the 3rd and 4th draw of 100 from either side, so a 101st falls inside with a
        # probability of 1 - 2 * 4/101 to 1 - 2 * 3/101; false alarms below 1e-4 for each cost and side
        low, high = binom.ppf(1e-4, 100, 1 - 8 / 101), binom.ppf(1 - 1e-4, 100, 1 - 6 / 101)
        assert all(low <= count <= high for count in inside.values()), inside

    def test_understated_errors_are_seen(self):
        """Negative control: noise of twice the stated error leaves the floor of all four costs."""
        curves = simulate(SIZES, GRID, PowerLawTruth(), 0.006, 7)
        halved = Curves([Curve(c.size, c.disorder, c.mean, c.error / 2) for c in curves.curves])
        for cost in collapse_costs(collapsed(halved, 1), seed=8):
            assert cost.value > cost.floor.high95, cost

    def test_wrong_exponent(self):
        """Negative control: at nu = 3 in place of 1 every cost lies far above its floor, at the right one none does."""
        curves = simulate(SIZES, GRID, PowerLawTruth(), 0.003, 9)
        for right, wrong in zip(
            collapse_costs(collapsed(curves, 1)), collapse_costs(collapsed(curves, 3)), strict=True
        ):
            assert right.ratio < 1.5
            # Six of the floor's own standard deviations: no chance matter
            assert wrong.value > wrong.floor.median + 6 * wrong.floor.sd, wrong

    def test_a_real_fit_of_the_right_form(self):
        """Costs after a fit lie within the 99.8 % interval of their floors."""
        p, y = fitted().points, synthetic_ordinates(fitted(), 2000, np.random.default_rng(10))
        costs = collapse_costs(fitted(), seed=10)
        for cost in costs:
            draws = COST_FUNCTIONS[cost.name](p.size, p.x, y, p.error)
            low, high = np.quantile(draws, [0.001, 0.999])  # false alarm 0.2 % for each of the four
            assert low < cost.value < high, cost
            assert cost.ratio == cost.value / cost.floor.median

    def test_a_real_fit_of_a_wrong_form(self):
        """Negative control: curves that cross, taken as independent of size, cost more than any noise."""
        fit = fit_collapse(fitted().curves, "size-independent", quick=True, extras=False)
        for cost in collapse_costs(fit, seed=11):
            assert cost.value > cost.floor.high95, cost

    def test_noise_has_the_measured_covariance_over_the_amplitude(self):
        """Synthetic sets scatter about the scaling function with the covariance of the means, divided by A squared."""
        curves = simulate([6, 12], GRID, PowerLawTruth(), 0.003, 12, correlation=0.6)
        fit, amplitude = collapsed(curves, 1), np.repeat([0.5, 2.0], GRID.size)
        p = fit.points
        curve = p.fitted / amplitude
        fit = replace(fit, points=replace(p, y=p.y / amplitude, error=p.error / amplitude))
        y = synthetic_ordinates(fit, 4000, np.random.default_rng(13))
        noise = np.zeros((42, 42))
        noise[:21, :21], noise[21:, 21:] = curves.curves[0].noise, curves.curves[1].noise
        noise /= np.outer(amplitude, amplitude)
        sd = np.sqrt(np.diag(noise))
        # A mean of 4000 has a standard error of sd / 63; a covariance one of at most sqrt(2) sd sd' / 63; five of them
        assert np.all(np.abs(y.mean(axis=0) - curve) < 5 * sd / np.sqrt(4000))
        assert np.all(np.abs(np.cov(y.T) - noise) < 5 * np.sqrt(2 / 4000) * np.outer(sd, sd))
        assert np.all(
            np.abs(np.cov(y.T)[:21, :21] - np.diag(sd[:21] ** 2)).max() > 0.4 * sd[0] ** 2
        )  # negative control

    def test_the_seed_decides(self):
        """The same seed gives the same floor, another seed another, and the value depends on none."""
        one, two, other = (collapse_costs(fitted(), seed=seed) for seed in (1, 1, 2))
        assert one == two
        assert [cost.value for cost in one] == [cost.value for cost in other]
        assert all(a.floor != b.floor for a, b in zip(one, other, strict=True))

    def test_undefined_costs_are_missing_numbers(self):
        """Sizes that do not overlap in x leave NaN in value, floor and ratio, without a warning."""
        fit = made_fit(made_curves((8, 10)))
        apart = replace(fit, points=replace(fit.points, x=np.arange(fit.points.x.size, dtype=float)))
        cost = collapse_costs(apart)[1]
        assert cost.name == "bhattacharjee-seno"
        assert np.isnan([cost.value, cost.ratio, *cost.floor.to_dict().values()]).all()

    def test_speed(self):
        """All four with 50 sets take well below 0.1 s for 126 points; measured 4 ms, so this leaves a factor of 25."""
        fit, best = fitted(), np.inf
        for _ in range(3):
            start = time.process_time()
            collapse_costs(fit, bootstrap=50)
            best = min(best, time.process_time() - start)
        assert best < 0.1


def test_analysis_holds_the_costs_of_every_fit():
    """They come with the analysis under the names of the ansätze, and no verdict needs them."""
    settings = Settings(ansatze=("size-independent", "size-ratio"), quick=True, draws=200)
    analysis = analyse(fitted().curves.select(smallest_size=14), settings=settings)
    assert tuple(analysis.costs) == settings.ansatze
    for fit in analysis.comparison.fits:
        values = [cost.value for cost in analysis.costs[fit.ansatz.name]]
        assert values == [cost.value for cost in collapse_costs(fit)]
