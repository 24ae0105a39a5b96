"""Each verdict from cases made by hand: what it asks for, and what a single missing condition makes of it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from analyses import LABELS, OPENING, case, collapse, made_crossings, made_curves, moved, separation

from driftline.cautions import Case
from driftline.collapse import CollapseFit, FitQuality, SamplerHealth
from driftline.inference.intervals import Interval
from driftline.verdict import FINITE_SIZES, judge

BEST, RIVAL, NULL = "power-law:corrected", "power-law:linear-drift:corrected", "size-independent"


def fits(best: float, rival: float, null: float = 200.0, **changes: Any) -> tuple[CollapseFit, ...]:
    """Fits of a transition, a drift and no size dependence with these log evidences; `changes` are of the first."""
    return replace(collapse(BEST, best), **changes), collapse(RIVAL, rival), collapse(NULL, null)


def some_crossings(probability: float) -> Any:
    """Crossings of which the last pair of neighbours crosses with this probability only."""
    found = made_crossings(made_curves())
    last = found.adjacent[-1].sizes
    pairs = tuple(replace(p, probability=probability) if p.sizes == last else p for p in found.pairs)
    return replace(found, pairs=pairs)


def beyond(share: int) -> Case:
    """Of 100 draws of W_c, `share` lie beyond the measured range."""
    fit = collapse(BEST)
    samples = np.repeat(fit.samples[:1], 100, axis=0)
    samples[:, 0] = 16.53
    samples[:share, 0] = 21.0
    return case(fits=fits(250.0, 240.0, samples=samples))


def test_transition_supported() -> None:
    """With every condition met, and only then, a transition is supported, with the interval of W_c and no warning."""
    verdict = judge(case())
    assert verdict.code == "transition-supported"
    # the drifting form has D = 0.3(2): whichever end of its 95 % interval is farther from 0, over 14 - 6 in size
    draws = collapse(RIVAL).draws("D")
    fastest = Interval.of_draws(draws, np.full(draws.size, 1 / draws.size)).high95 / 8
    assert verdict.statement == (
        "The data support a transition: curves separate on both sides of a crossing, and forms with a critical "
        "disorder describe them best, with W_c in [16.34, 16.70] (95 %). A critical disorder that moves by less than "
        f"{fastest:.2g} per unit of size is not excluded. Finite sizes alone do not decide the thermodynamic limit."
    )
    assert (verdict.reasons, verdict.warnings) == ((), ())
    # e^-10 and e^-50 are the odds of the rivals
    assert verdict.probability_transition == pytest.approx(1 / (1 + np.exp(-10)), rel=1e-12)
    assert verdict.probability_drift == pytest.approx(np.exp(-10) / (1 + np.exp(-10)), rel=1e-9)


HEALTH = SamplerHealth("importance", 120.0, None, False, "importance sampling has only 120 effective draws")
BLOCKED: dict[str, tuple[Case, str]] = {
    "close rival": (
        case(fits=fits(250.0, 249.7)),  # 1 / (1 + e^-0.3) = 0.5744
        "forms with a critical disorder hold 0.574 of the probability; 0.6 are asked for",
    ),
    "pair without crossing": (
        case(crossings=some_crossings(0.4)), "3 of 4 pairs of neighbouring sizes cross inside the common window"
    ),
    "no critical disorder": (case(basis=()), "no form with a critical disorder was fitted"),
    "smallest size never dropped": (
        case(stability=(moved(0.0, 0.2, smallest=6.0, window=(14.0, 19.0)),)),
        "too few sizes or disorders to see whether W_c stays without the smallest size",
    ),
    "one side flat": (
        case(separation=separation(0.8, -9.3, flat="below")),
        "ONE_SIDED: size dependence of opposite sign is not resolved on both sides of a crossing (+0.8 standard "
        "deviations below and -9.3 above)",
    ),
    "one side at the reference": (
        case(separation=separation(5.2, -0.4, flat="above", at_reference=True)),
        "CROSSING_AT_REFERENCE: above the crossing the curves of all sizes lie on a reference value within their "
        "errors, so the crossing there is not a crossing of resolved curves (size dependence +5.2 standard deviations "
        "below and -0.4 above)",
    ),
    "crossings move on": (
        case(probability_bounded=0.02),
        "DRIFT_UNBOUNDED: the crossings move with size by 0.0400 per unit of size and laws without a limit hold 0.980 "
        "of the probability",
    ),
    "poor fit": (
        case(fits=fits(250.0, 240.0, quality=FitQuality(2.31, 0.004, 1.4, -5.2, (8.0, 15.0)))),
        "POOR_FIT: power-law:corrected misses the data: p = 0.004, chi2/dof = 2.31, worst point -5.2 errors at size 8, "
        "disorder 15",
    ),
    "moves without the smallest size": (
        case(stability=(moved(-1.0, 0.2),)),
        "SIZE_UNSTABLE: without sizes below 8, W_c of power-law:corrected moves by -1, 6.3 times the expected scatter",
    ),
    "outside the range": (
        beyond(6),
        "OUTSIDE_RANGE: W_c in [16.29, 16.77] (95 %) reaches beyond the measured disorders 13 to 20 with probability "
        "0.06",
    ),
    "set by the prior": (
        case(fits=fits(250.0, 240.0, prior_limited=("nu",))),
        "PRIOR_LIMITED: nu of power-law:corrected is known hardly better than before the data",
    ),
    "sampler": (
        case(fits=fits(250.0, 240.0, sampler=HEALTH)),
        "SAMPLER_NOT_CONVERGED: the numbers of these fits are not reliable: power-law:corrected: importance sampling "
        "has only 120 effective draws",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", BLOCKED)
def test_a_single_missing_condition_leaves_it_undecided(name: str) -> None:
    """Any one condition that fails is enough, and is the reason that is given."""
    made, reason = BLOCKED[name]
    verdict = judge(made)
    assert verdict.code == "undecided"
    assert verdict.reasons == (reason,)
    assert verdict.statement == (
        f"{OPENING} The data neither support a critical disorder nor establish a drift. {FINITE_SIZES}"
    )


SUPPORTED = {
    "rival just weak enough": case(fits=fits(250.0, 249.5)),  # 1 / (1 + e^-0.5) = 0.6225
    "pair that just crosses": case(crossings=some_crossings(0.5)),
    "draws just inside": beyond(5),
    "laws undecided": case(probability_bounded=0.06),
    "no laws": case(probability_bounded=None),
    "window": case(stability=(moved(0.0, 0.2), moved(1.0, 0.2, smallest=6.0, window=(14.0, 19.0)))),
    "low exponent": case(
        labels=replace(LABELS, dimension=1.0, ergodic_value=None)  # nu = 1.57 is below 2
    ),
    "prior of omega": case(fits=fits(250.0, 240.0, prior_limited=("omega",))),
    "close forms of one kind": case(fits=(*fits(250.0, 240.0), collapse("kt:corrected", 249.9))),
}


@pytest.mark.parametrize("name", SUPPORTED)
def test_what_does_not_stand_in_the_way(name: str) -> None:
    """Conditions just met, and warnings that only inform, leave the transition supported."""
    assert judge(SUPPORTED[name]).code == "transition-supported"


def test_warnings_that_inform_are_still_raised() -> None:
    """A transition can be supported and carry warnings."""
    codes = {name: [caution.code for caution in judge(made).warnings] for name, made in SUPPORTED.items()}
    assert codes["window"] == ["WINDOW_UNSTABLE"]
    assert codes["low exponent"] == ["EXPONENT_BOUND"]
    assert codes["laws undecided"] == ["DRIFT_UNRESOLVED"]


def test_all_reasons_are_given() -> None:
    """Several failures are all listed, in the order of the conditions."""
    verdict = judge(case(fits=fits(248.0, 250.0), separation=separation(0.8, -9.3, flat="below"), basis=()))
    assert [reason[:10] for reason in verdict.reasons] == ["forms with", "no form wi", "ONE_SIDED:"]


def test_drifting() -> None:
    """Forms without a critical disorder hold the probability: the crossover drifts, at this rate."""
    verdict = judge(case(fits=fits(230.0, 250.0), probability_bounded=0.3))
    assert verdict.code == "drifting"
    # rate 0.04 +- 1.96 * 0.01
    assert verdict.statement == (
        f"{OPENING} The crossover moves with size by 0.0400 per unit of size, [0.0204, 0.0596] (95 %); forms without "
        f"a critical disorder hold 1.000 of the probability. {FINITE_SIZES}"
    )
    assert verdict.reasons == ("forms with a critical disorder hold 0.000 of the probability; 0.6 are asked for",)


@pytest.mark.parametrize("bounded", [None, 0.02, 0.49])
def test_drifting_whatever_undecided_crossings_say(bounded: float | None) -> None:
    """Crossings that do not say the contrary, or are missing, leave the drift established."""
    made = case(fits=fits(230.0, 250.0), probability_bounded=bounded, rate_per_site=None)
    verdict = judge(made)
    assert verdict.code == "drifting"
    assert verdict.statement.startswith(f"{OPENING} The crossover moves with size; forms without")


def test_drift_contradicted_by_the_crossings_is_undecided() -> None:
    """Collapse says drift, crossings establish a limit: undecided; crossings that only lean to one do not count."""
    assert judge(case(fits=fits(230.0, 250.0), probability_bounded=0.95)).code == "undecided"
    assert judge(case(fits=fits(230.0, 250.0), probability_bounded=0.94)).code == "drifting"


def test_no_drift_without_size_dependence() -> None:
    """Where no dependence on size is resolved, evidence for a drifting form is not a drift."""
    made = case(fits=fits(230.0, 250.0), probability_bounded=0.3)
    flat = replace(made.separation, z_below=2.9, z_above=-2.9, separated=False)
    assert judge(replace(made, separation=flat)).code == "undecided"
    assert judge(replace(made, separation=replace(flat, z_above=-3.1))).code == "drifting"


def test_drift_needs_its_probability() -> None:
    """A drift with odds of e^2 is not established (0.88), one with odds of e^3 is (0.953)."""
    codes = [judge(case(fits=fits(250.0 - gap, 250.0), probability_bounded=0.3)).code for gap in (2.0, 3.0)]
    assert codes == ["undecided", "drifting"]


def test_a_length_finite_everywhere_counts_as_drift() -> None:
    """Where the length is finite at every disorder the crossover moves out with size: no critical disorder either."""
    made = case(fits=(collapse(BEST, 230.0), collapse(RIVAL, 230.0), collapse("finite-length", 250.0)))
    verdict = judge(replace(made, drift=replace(made.drift, probability_bounded=0.3)))
    assert verdict.code == "drifting"
    assert verdict.probability_drift == pytest.approx(1.0, abs=1e-8)  # e^-20 for the others


def test_size_independent() -> None:
    """Curves that do not depend on size are said to be the same, and that is no drift."""
    verdict = judge(case(fits=fits(230.0, 230.0, 250.0)))
    assert verdict.code == "size-independent"
    assert verdict.statement == f"{OPENING} The curves of all sizes are the same within their errors. {FINITE_SIZES}"
    assert verdict.probability_drift == pytest.approx(np.exp(-20), rel=1e-6)


def test_size_independent_needs_its_probability() -> None:
    """With odds of e^2 against each of two rivals, probability 0.79, it is not established."""
    verdict = judge(case(fits=fits(248.0, 248.0, 250.0)))
    assert verdict.code == "undecided"


def test_size_independent_form_that_misses_the_data_is_not_called_the_same_within_errors() -> None:
    """The best of bad forms is named as such."""
    poor = replace(collapse(NULL, 250.0), quality=FitQuality(3.0, 1e-5, 1.7, 6.0, (8.0, 15.0)))
    verdict = judge(case(fits=(collapse(BEST, 230.0), collapse(RIVAL, 230.0), poor)))
    assert verdict.code == "size-independent"
    assert "misses them by more than their errors" in verdict.statement


def test_a_form_fitted_alone_proves_nothing() -> None:
    """The only form fitted has probability one, which says nothing: no size independence is concluded from it."""
    verdict = judge(case(fits=(collapse(NULL, 250.0),), probability_bounded=None))
    assert verdict.code == "undecided"
    assert (verdict.probability_transition, verdict.probability_drift) == (None, None)
    assert verdict.reasons[:2] == (
        "no rival form was fitted, so nothing was compared",
        "no form with a critical disorder was fitted",
    )


def test_laws_of_the_crossings_stand_in_where_nothing_was_compared() -> None:
    """With forms of one hypothesis only, the laws of the crossings decide, and the sentences say so."""
    alone = (collapse(BEST, 250.0), collapse("power-law", 249.0))
    supported, drifting, undecided = (judge(case(fits=alone, probability_bounded=p)) for p in (0.97, 0.02, 0.8))
    assert (supported.code, supported.probability_transition) == ("transition-supported", 0.97)
    assert (drifting.code, drifting.probability_drift) == ("drifting", pytest.approx(0.98, rel=1e-12))
    assert "laws of the crossings without a limit hold 0.980 of the probability" in drifting.statement
    assert undecided.reasons == (
        "laws of the crossings with a limit hold 0.800 of the probability; 0.95 are asked for",
    )


def test_two_sizes_are_insufficient() -> None:
    """Two sizes have one crossing, whatever all else says, and even where they look the same."""
    for made in (case(sizes=(8, 12)), case(sizes=(8, 12), fits=fits(230.0, 230.0, 250.0))):
        verdict = judge(made)
        assert verdict.code == "insufficient-data"
        assert verdict.statement == (
            f"{OPENING} Two sizes have a single crossing, which cannot be seen to drift or to stay. {FINITE_SIZES}"
        )
        few = verdict.warnings[0]
        assert few.message == "only 2 sizes, so at most 1 crossing of neighbouring sizes"


def test_every_other_verdict_opens_with_the_warning() -> None:
    """No verdict but the first comes without the sentence, and all name what finite sizes cannot decide."""
    cases = [made for made, _ in BLOCKED.values()] + [
        case(fits=fits(230.0, 250.0)), case(fits=fits(230.0, 230.0, 250.0)), case(sizes=(8, 12)),
        case(fits=(collapse(BEST, 250.0),), probability_bounded=None),
    ]  # fmt: skip
    for verdict in map(judge, cases):
        assert verdict.code != "transition-supported"
        assert verdict.statement.startswith(f"{OPENING} ")
        assert verdict.statement.endswith(FINITE_SIZES)
    for verdict in map(judge, SUPPORTED.values()):
        assert OPENING not in verdict.statement
        assert verdict.statement.endswith(FINITE_SIZES)


def test_statement_uses_the_symbol_of_the_disorder() -> None:
    """The critical value carries the user's symbol."""
    labels = replace(LABELS, ergodic_value=None, disorder_symbol="V")
    assert "with V_c in [16.34, 16.70]" in judge(case(labels=labels)).statement


def test_without_a_rate_the_statement_has_none() -> None:
    """An interval that is missing leaves no gap in the sentence."""
    made = case(fits=fits(230.0, 250.0), probability_bounded=0.3)
    with_rate = judge(replace(made, drift=replace(made.drift, rate_per_site=Interval.of_normal(0.2, 0.003))))
    assert "moves with size by 0.2000 per unit of size, [0.1941, 0.2059] (95 %);" in with_rate.statement
