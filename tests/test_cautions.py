"""Each warning from cases made by hand: raised with the right sentence and numbers, and not raised just short of it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from analyses import LABELS, case, collapse, made_crossings, made_curves, moved, separation

from driftline.cautions import RULES, Case, Caution, cautions, exponent_limit
from driftline.collapse import CollapseFit, FitQuality, SamplerHealth
from driftline.curves import Curve, Curves, Labels
from driftline.inference.intervals import Interval

BEST, RIVAL = "power-law:corrected", "power-law:linear-drift:corrected"
#: 0.12 of `collapse` against 0.2 of a refit: sqrt(0.2^2 - 0.12^2) = 0.16, by the factor of `Interval.of_normal`
SCATTER = 0.16 * 0.994457883


def found(made: Case) -> dict[str, Caution]:
    """Warnings by code."""
    return {caution.code: caution for caution in cautions(made)}


def refit(shift: float, *, smallest: float = 8.0, window: tuple[float, float] = (13.0, 20.0)) -> Any:
    """A refit of the headline form whose W_c lies `shift` higher, with error 0.2."""
    return moved(shift, 0.2, smallest=smallest, window=window)


def with_best(**changes: Any) -> Case:
    """A case whose headline fit has other fields."""
    return case(fits=(replace(collapse(BEST, 250.0), **changes), collapse(RIVAL, 240.0)))


def with_scales(*scales: tuple[float, float], **labels: Any) -> Case:
    """A case whose two fits found these noise scales, each (median, sd)."""
    fits = [collapse(BEST, 250.0), collapse(RIVAL, 240.0)]
    pairs = zip(fits, scales, strict=True)
    return case(
        fits=tuple(
            replace(fit, parameters={**fit.parameters, "s": Interval.of_normal(*scale)}) for fit, scale in pairs
        ),
        **labels,
    )


def with_draws(name: str, values: np.ndarray, interval: Interval, **options: Any) -> Case:
    """A case whose headline fit has these draws and this interval of one parameter."""
    fit = collapse(BEST, 250.0)
    samples = np.repeat(fit.samples[:1], values.size, axis=0)
    samples[:, fit.names.index(name)] = values
    changed = replace(fit, samples=samples, parameters={**fit.parameters, name: interval})
    return case(fits=(changed, collapse(RIVAL, 240.0)), **options)


def weakest(*means: float, labels: Labels = LABELS, error: float = 0.001) -> Case:
    """A case whose two largest sizes have these means at the weakest disorder."""
    curves = made_curves(labels=labels)
    *rest, first, last = curves.curves
    ends = []
    for curve, mean in zip((first, last), means, strict=True):
        values, errors = curve.mean.copy(), curve.error.copy()
        values[0], errors[0] = mean, error
        ends.append(Curve(curve.size, curve.disorder, values, errors))
    return case(curves=Curves([*rest, *ends], labels))


def quality(p_value: float) -> FitQuality:
    """A fit with this p-value."""
    return FitQuality(2.31, p_value, 1.4, -5.2, (8.0, 15.0))


def outside(share: int) -> Case:
    """Of 100 draws of W_c, `share` lie beyond the measured range."""
    values = np.full(100, 16.53)
    values[:share] = 21.0
    return with_draws("W_c", values, Interval.of_normal(16.53, 0.12))


def exponent(below: int, **options: Any) -> Case:
    """Of 100 draws of nu, `below` are 0.5, and the others 2."""
    values = np.full(100, 2.0)
    values[:below] = 0.5
    return with_draws("nu", values, Interval.of_normal(0.5, 0.02), **options)


def close(gap: float) -> Case:
    """Two forms of different hypotheses whose log evidences differ by `gap`."""
    return case(fits=(collapse(BEST, 250.0), collapse(RIVAL, 250.0 - gap)))


UNRESOLVED = SamplerHealth("importance", 120.0, None, False, "importance sampling has only 120 effective draws")
SIGMAS = "+0.8 standard deviations below and -9.3 above"

RAISED: dict[str, tuple[Case, str, dict[str, float]]] = {
    "FEW_SIZES": (
        case(sizes=(6, 8, 10)), "only 3 sizes, so at most 2 crossings of neighbouring sizes", {"sizes": 3},
    ),
    "NO_CROSSING": (
        case(crossings=made_crossings(made_curves(), probability=0.49)),
        "no curves of neighbouring sizes cross between 13 and 20; the likeliest pair, 6 and 8, does so with "
        "probability 0.49",
        {"highest_probability": 0.49},
    ),
    "CROSSING_AT_REFERENCE": (
        case(separation=separation(0.8, -9.3, flat="below", at_reference=True)),
        "below the crossing the curves of all sizes lie on a reference value within their errors, so the crossing "
        f"there is not a crossing of resolved curves (size dependence {SIGMAS})",
        {"z_below": 0.8, "z_above": -9.3},
    ),
    "ONE_SIDED": (
        case(separation=separation(0.8, -9.3, flat="below")),
        f"size dependence of opposite sign is not resolved on both sides of a crossing ({SIGMAS})",
        {"z_below": 0.8, "z_above": -9.3},
    ),
    "DRIFT_UNBOUNDED": (
        case(probability_bounded=0.02),
        "the crossings move with size by 0.0400 per unit of size and laws without a limit hold 0.980 of the "
        "probability",
        {"probability_bounded": 0.02},
    ),
    "DRIFT_UNRESOLVED": (
        case(probability_bounded=0.5),
        "the crossings alone give laws with a limit a probability of 0.50",
        {"probability_bounded": 0.5, "deciding_size": 31.0},
    ),
    "POOR_FIT": (
        with_best(quality=quality(0.004)),
        "power-law:corrected misses the data: p = 0.004, chi2/dof = 2.31, worst point -5.2 errors at size 8, "
        "disorder 15",
        {"p_value": 0.004, "chi2_per_dof": 2.31},
    ),
    "SIZE_UNSTABLE": (
        case(stability=(refit(-1.0),)),
        "without sizes below 8, W_c of power-law:corrected moves by -1, 6.3 times the expected scatter",
        {"shift": -1.0, "significance": -1 / SCATTER},
    ),
    "WINDOW_UNSTABLE": (
        case(stability=(refit(0.0), refit(1.0, smallest=6.0, window=(14.0, 19.0)))),
        "with disorders from 14 to 19 only, W_c of power-law:corrected moves by +1, 6.3 times the expected scatter",
        {"shift": 1.0, "significance": 1 / SCATTER},
    ),
    "OUTSIDE_RANGE": (
        outside(6),
        "W_c in [16.29, 16.77] (95 %) reaches beyond the measured disorders 13 to 20 with probability 0.06",
        {"probability_outside": 0.06},
    ),
    "PRIOR_LIMITED": (
        with_best(prior_limited=("W_c", "nu", "omega")),
        "W_c and nu of power-law:corrected are known hardly better than before the data",
        {"W_c": 0.12 * 0.994457883, "nu": 0.05 * 0.994457883},
    ),
    "EXPONENT_BOUND": (
        exponent(97),
        "nu = 0.500(20) lies below the bound 0.667 for quenched disorder in d = 3 (Chayes et al. 1986) with "
        "probability 0.970",
        {"nu": 0.5, "bound": 2 / 3, "probability": 0.97},
    ),
    "SAMPLER_NOT_CONVERGED": (
        with_best(sampler=UNRESOLVED),
        "the numbers of these fits are not reliable: power-law:corrected: importance sampling has only 120 effective "
        "draws",
        {"power-law:corrected": 120.0},
    ),
    "ERRORS_UNDERSTATED": (
        with_scales((1.5, 0.08), (1.4, 0.08)),
        "the points scatter about every form by 1.400(80) times their errors",
        {"noise_scale": 1.4},
    ),
    "ERRORS_ASSUMED_INDEPENDENT": (
        with_scales((0.7, 0.05), (1.0, 0.05)),
        "the points scatter about power-law:corrected by only 0.700(50) times their errors, as they do when the same "
        "disorder realisations were used at several disorders",
        {"noise_scale": 0.7},
    ),
    "PLATEAU_MISMATCH": (
        # error of the mean of two: 0.001 / sqrt 2 = 0.00071
        weakest(0.4230, 0.4236),
        "at the weakest disorder the two largest sizes agree on 0.42330(71), not on the ergodic value 0.5307, but on "
        "that of two unresolved symmetry blocks",
        {"plateau": 0.4233, "ergodic_value": 0.5307},
    ),
    "EVIDENCE_CLOSE": (
        close(1.5),
        "power-law:corrected (transition) and power-law:linear-drift:corrected (drift) differ by only 1.5 in log "
        "evidence",
        {"log_evidence_difference": 1.5},
    ),
}  # fmt: skip

#: Refits at 2.57 expected scatters: the threshold of a single one is 2.576, the two-sided 1 % point of the normal.
NEARLY = 2.57 * SCATTER
NEAR_MISSES: dict[str, list[Case]] = {
    "FEW_SIZES": [case(sizes=(6, 8, 10, 12))],
    "NO_CROSSING": [case(crossings=made_crossings(made_curves(), probability=0.5))],
    "CROSSING_AT_REFERENCE": [RAISED["ONE_SIDED"][0], case(separation=separation(3.1, -9.3))],
    "ONE_SIDED": [RAISED["CROSSING_AT_REFERENCE"][0], case(separation=separation(3.1, -9.3))],
    "DRIFT_UNBOUNDED": [case(probability_bounded=0.06), case(probability_bounded=None)],
    "DRIFT_UNRESOLVED": [case(probability_bounded=p) for p in (0.04, 0.95, None)],
    "POOR_FIT": [with_best(quality=quality(0.01)), case(basis=())],
    "SIZE_UNSTABLE": [
        case(stability=(refit(NEARLY),)),
        case(stability=(refit(1.0, window=(14.0, 19.0)),)),  # both cut: it cannot be said which of the two did it
        case(stability=(refit(1.0, smallest=6.0, window=(14.0, 19.0)),)),
    ],
    "WINDOW_UNSTABLE": [
        case(stability=(refit(NEARLY, smallest=6.0, window=(14.0, 19.0)),)),
        case(stability=(refit(1.0, window=(14.0, 19.0)),)),
        case(stability=(refit(1.0),)),
    ],
    "OUTSIDE_RANGE": [outside(5), case(basis=())],
    "PRIOR_LIMITED": [with_best(prior_limited=("omega",)), case(basis=())],
    "EXPONENT_BOUND": [
        exponent(94),
        exponent(100, labels=replace(LABELS, disorder_kind="quasiperiodic")),  # 0.5 is above 1/3
        exponent(100, labels=replace(LABELS, dimension=None)),
        exponent(100, labels=replace(LABELS, disorder_kind="none")),
        case(fits=(collapse("kt:corrected", 250.0), collapse(RIVAL, 240.0))),  # has no nu
    ],
    "SAMPLER_NOT_CONVERGED": [
        with_best(sampler=replace(UNRESOLVED, converged=True)),
        # odds of e^-5 leave the rival a probability of 0.0067, short of 0.01
        case(fits=(collapse(BEST, 250.0), replace(collapse(RIVAL, 245.0), sampler=UNRESOLVED))),
    ],
    # lower 95 % limit 1.25 - 1.96 * 0.08 = 1.093, short of 1.1; or a single form that needs no scale
    "ERRORS_UNDERSTATED": [with_scales((1.25, 0.08), (1.5, 0.08)), with_scales((1.5, 0.08), (1.0, 0.08))],
    # upper 95 % limit 0.76 + 1.96 * 0.05 = 0.858, beyond 0.85; or not the form with the highest evidence
    "ERRORS_ASSUMED_INDEPENDENT": [with_scales((0.76, 0.05), (0.7, 0.05)), with_scales((1.0, 0.05), (0.7, 0.05))],
    "PLATEAU_MISMATCH": [
        weakest(0.4230, 0.4260),  # 2.1 errors apart: no plateau
        weakest(0.5250, 0.5250),  # off by less than a twentieth of the distance to the localised value, 0.0072
        weakest(0.4233, 0.4233, error=0.05),  # off by 3 errors
        weakest(0.4233, 0.4233, labels=replace(LABELS, ergodic_value=None)),
    ],
    "EVIDENCE_CLOSE": [
        close(3.0),
        case(fits=(collapse(BEST, 250.0), collapse("power-law", 249.9), collapse(RIVAL, 240.0))),
        case(fits=(collapse(BEST, 250.0), collapse("power-law", 249.9))),
    ],
}


def test_nothing_is_raised_where_all_is_well() -> None:
    """The case from which the others differ has no warning at all."""
    assert cautions(case()) == ()


def test_every_rule_is_tested() -> None:
    """Each rule has a case that raises it and one that nearly does."""
    assert len(RAISED) == len(RULES)
    assert list(NEAR_MISSES) == list(RAISED)


@pytest.mark.parametrize("code", RAISED)
def test_warning_says_what_was_found(code: str) -> None:
    """The whole sentence, the numbers behind it, and something to do."""
    made, message, numbers = RAISED[code]
    caution = found(made)[code]
    assert caution.message == message
    assert caution.numbers == pytest.approx(numbers, rel=1e-9)  # differences of numbers near 17: rounding of 1e-14
    assert caution.action


@pytest.mark.parametrize("code", NEAR_MISSES)
def test_warning_is_not_raised_just_short_of_it(code: str) -> None:
    """Just short of the threshold, or with the cause somewhere else, nothing is said."""
    assert [code in found(made) for made in NEAR_MISSES[code]] == [False] * len(NEAR_MISSES[code])


def test_unstable_only_just() -> None:
    """2.58 expected scatters exceed the two-sided 1 % point of a single refit, 2.576, in either direction."""
    for shift in (2.58 * SCATTER, -2.58 * SCATTER):
        assert "SIZE_UNSTABLE" in found(case(stability=(refit(shift),)))
        window = refit(shift, smallest=6.0, window=(14.0, 19.0))
        assert "WINDOW_UNSTABLE" in found(case(stability=(refit(0.0), window)))


def test_many_refits_raise_the_threshold() -> None:
    """With four refits the largest shift must reach 3.023, the normal's two-sided 0.25 % point (Bonferroni)."""
    quiet = tuple(refit(0.0, smallest=size) for size in (8.0, 10.0, 10.0))
    short, long = (case(stability=(refit(z * SCATTER), *quiet)) for z in (3.02, 3.03))
    assert "SIZE_UNSTABLE" not in found(short)
    assert "SIZE_UNSTABLE" in found(long)


def test_the_worst_refit_is_named() -> None:
    """Of several unstable refits the most significant one is quoted, whatever its form."""
    fits = (collapse(BEST, 250.0), collapse("kt:corrected", 249.0), collapse(RIVAL, 240.0))
    rows = (refit(1.0), replace(refit(-2.0, smallest=10.0), ansatz="kt:corrected"))
    caution = found(case(fits=fits, stability=rows))["SIZE_UNSTABLE"]
    assert caution.message.startswith("without sizes below 10, W_c of kt:corrected moves by -2, 12.6 times")


def test_drift_without_rate_or_deciding_size() -> None:
    """Where the laws give no rate and no deciding size, the sentences leave them out."""
    unbounded = found(case(probability_bounded=0.02, rate_per_site=None))["DRIFT_UNBOUNDED"]
    assert unbounded.message == "the crossings move with size and laws without a limit hold 0.980 of the probability"
    near, far = (
        found(case(probability_bounded=0.5, **size))["DRIFT_UNRESOLVED"] for size in ({}, {"deciding_size": None})
    )
    assert near.action.startswith("the two best laws differ by three errors from size 31 on; ")
    assert far.action.startswith("no size tells them apart soon; ")
    assert far.numbers == {"probability_bounded": 0.5}


def test_plateau_of_two_blocks_is_known_by_the_observable() -> None:
    """0.4234 is the gap ratio of two unresolved orthogonal blocks (Giraud et al., PRX 12, 011006 (2022), from memory).

    Any other observable with that value, and a gap ratio with another value, is only said to be off.
    """
    blocks = ", but on that of two unresolved symmetry blocks"
    spelled = [weakest(0.4230, 0.4236, labels=replace(LABELS, observable=name)) for name in ("gap-ratio", "Gap ratio")]
    assert all(found(made)["PLATEAU_MISMATCH"].message.endswith(blocks) for made in spelled)
    others = [weakest(0.48, 0.48), weakest(0.4230, 0.4236, labels=replace(LABELS, observable="entropy"))]
    for made in others:
        caution = found(made)["PLATEAU_MISMATCH"]
        assert caution.message.endswith("not on the ergodic value 0.5307")
        assert caution.action.startswith("check the reference value")


def test_correlated_points_are_not_said_to_be_assumed_independent() -> None:
    """Where the covariance was given, a small noise scale has another cause."""
    made = with_scales((0.7, 0.05), (1.0, 0.05))
    curves = Curves(
        [Curve(c.size, c.disorder, c.mean, c.error, c.noise) for c in made.curves.curves], made.curves.labels
    )
    assert "ERRORS_ASSUMED_INDEPENDENT" in found(made)
    assert "ERRORS_ASSUMED_INDEPENDENT" not in found(replace(made, curves=curves))


@pytest.mark.parametrize(
    ("kind", "dimension", "bound"),
    [
        ("quenched", 1.0, (2.0, "Chayes et al. 1986")),
        ("quenched", 3.0, (2 / 3, "Chayes et al. 1986")),
        ("quasiperiodic", 1.0, (1.0, "Luck 1993")),
        ("quasiperiodic", 2.0, (0.5, "Luck 1993")),
        ("none", 1.0, None),
        ("quenched", None, None),
        ("quasiperiodic", None, None),
    ],
)
def test_exponent_bounds(kind: Any, dimension: float | None, bound: tuple[float, str] | None) -> None:
    """nu >= 2/d for quenched disorder and 1/d for quasi-periodic modulation, else no bound is known.

    Chayes, Chayes, Fisher, Spencer, PRL 57, 2999 (1986); Luck, Europhys. Lett. 24, 359 (1993).
    """
    assert exponent_limit(made_curves(labels=Labels(dimension=dimension, disorder_kind=kind))) == bound


def test_exponent_bound_of_quasiperiodic_modulation() -> None:
    """The sentence names the bound that belongs to the kind of disorder."""
    labels = replace(LABELS, dimension=1.0, disorder_kind="quasiperiodic")
    assert found(exponent(100, labels=labels))["EXPONENT_BOUND"].message == (
        "nu = 0.500(20) lies below the bound 1 for quasiperiodic disorder in d = 1 (Luck 1993) with probability 1.000"
    )


def test_headline_is_the_fit_with_the_highest_evidence() -> None:
    """Rules about the headline look at one form of the basis, the likeliest."""
    fits: tuple[CollapseFit, ...] = (collapse("kt:corrected", 249.0), collapse(BEST, 250.0), collapse(RIVAL, 240.0))
    assert case(fits=fits).headline is fits[1]
    assert case(fits=fits, basis=()).headline is None
