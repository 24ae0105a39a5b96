"""Analyses built by hand, for tests of what is made of them: no estimator runs, so every number is known."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np

from driftline.collapse import CollapsedPoints, CollapseFit, Comparison, FitQuality, SamplerHealth
from driftline.crossings import Crossing, Crossings
from driftline.curves import Curve, Curves, Labels
from driftline.inference.intervals import Interval
from driftline.scaling.ansatz import parse_ansatz
from driftline.settings import Settings
from driftline.smoothing import SmoothCurve

LABELS = Labels(
    observable="gap ratio",
    observable_symbol=r"\langle r\rangle",
    disorder_symbol="W",
    disorder_unit="t",
    ergodic_value=0.5307,
    localised_value=0.3863,
    dimension=3.0,
)
OPENING = "Warning: no evidence of a transition in these data."


def made_curves(sizes=(6, 8, 10, 12, 14), *, labels=LABELS, scale=1.0, offset=0.0, error=0.001, points=13):
    """Curves of a logistic that steepens with size and crosses at 16.5, in units of `scale` above `offset`."""
    rng = np.random.default_rng(5)
    grid = np.linspace(13.0, 20.0, points)
    curves = []
    for size in sizes:
        mean = 0.39 + 0.14 / (1 + np.exp((grid - 16.5) * size**0.63 / 12)) + rng.normal(0, error, points)
        curves.append(Curve(size, grid, offset + scale * mean, np.full(points, scale * error)))
    return Curves(curves, labels, {"path": "made.csv", "sha256": "0" * 64})


def made_crossings(curves, *, probability=1.0, separated=0.99):
    """Crossings near 16.5 that drift a little, and smoothers that pass through the points."""
    smooth = tuple(
        SmoothCurve(
            c.size, c.disorder, c.mean, c.error / 2, np.tile(c.mean, (2, 1)), np.tile(np.gradient(c.mean), (2, 1))
        )
        for c in curves.curves
    )
    pairs = []
    for i, small in enumerate(curves.curves):
        for j, large in enumerate(curves.curves[i + 1 :], start=i + 1):
            position = 16.5 - 6 / (small.size + large.size)
            value = float(np.interp(position, small.disorder, small.mean))
            height = 2 * float(small.error[0])
            known = probability >= 0.05
            pairs.append(
                Crossing(
                    sizes=(small.size, large.size),
                    probability=probability,
                    separated=separated,
                    disorder=Interval.of_normal(position, 0.12) if known else None,
                    value=Interval.of_normal(value, height) if known else None,
                    inverse_nu=Interval.of_normal(0.63, 0.08) if known else None,
                    draws=np.full(10, position if known else np.nan),
                    adjacent=j == i + 1,
                )
            )
    return Crossings(tuple(pairs), smooth, curves.common_range, curves.labels, curves, 1)


def made_fit(curves, name="power-law:corrected", *, log_evidence=250.0):
    """A collapse fit with W_c = 16.53(12) and nu = 1.57(5) whose residuals are standard normal numbers."""
    size, disorder, mean, error = curves.flat()
    x = (disorder - 16.53) * (size / np.sqrt(curves.sizes[0] * curves.sizes[-1])) ** (1 / 1.57)
    order = np.argsort(x)
    residual = np.random.default_rng(6).normal(size=x.size)
    ansatz = parse_ansatz(name, curves)
    truth = {"W_c": (16.53, 0.12), "nu": (1.57, 0.05), "omega": (1.0, 0.5), "D": (0.3, 0.2)}
    names = (*(each.name for each in ansatz.parameters), "tau", "s")
    centres = np.array([truth.get(each, (1.0, 0.1)) for each in names])
    rng = np.random.default_rng(7)
    return CollapseFit(
        ansatz=ansatz,
        curves=curves,
        log_evidence=log_evidence,
        log_evidence_error=0.05,
        parameters={each: Interval.of_normal(*truth[each]) for each in names if each in truth},
        samples=rng.normal(centres[:, 0], centres[:, 1], size=(50, len(names))),
        names=names,
        quality=FitQuality(1.02, 0.44, 1.01, 2.6, (8.0, 15.0)),
        sampler=SamplerHealth("emcee", 1500.0, 40.0, True),
        prior_limited=(),
        points=CollapsedPoints(size, disorder, x, mean, error, mean - residual * error, residual),
        function_x=x[order],
        function_mean=(mean - residual * error)[order],
        function_sd=error[order] / 3,
    )


def made_drift(crossings, *, note=""):
    """Drift through the adjacent crossings: exact lines, with a band of 0.1; with a `note`, nothing fitted."""
    pairs = [each for each in crossings.adjacent if each.disorder is not None]
    sizes = np.array([np.sqrt(each.sizes[0] * each.sizes[1]) for each in pairs])
    positions = np.array([each.disorder.median for each in pairs])
    covariance = np.diag(np.full(len(pairs), 0.12**2))
    laws = () if note else tuple(_law(name, sizes, positions) for name in ("constant", "inverse", "linear"))
    return SimpleNamespace(source="crossings", sizes=sizes, positions=positions, covariance=covariance, laws=laws,
        probability_bounded=None if note else 0.8, rate_per_site=None if note else Interval.of_normal(0.04, 0.01), deciding_size=None if note else 31.0, note=note,
        to_dict=lambda: {"source": "crossings", "laws": [{"name": law.name, "bounded": law.bounded, "log_evidence": law.log_evidence, "probability": law.probability, "parameters": {}, "limit": law.limit and law.limit.to_dict()} for law in laws], "probability_bounded": 0.8, "rate_per_site": None, "deciding_size": None})

def _law(name, sizes, positions):
    power = {"constant": 0, "inverse": -1, "linear": 1}[name]
    a = np.polyfit(sizes**power, positions, 1) if power else [0.0, positions.mean()]
    def predict(L):
        y = a[1] + a[0] * L**power
        return y, y - 0.1, y + 0.1
    return SimpleNamespace(name=name, bounded=power <= 0, formula="W* = a + b L^%d" % power, log_evidence=-3.0 + power, probability=0.4,
        parameters={"a": Interval.of_normal(a[1], 0.1)}, limit=Interval.of_normal(a[1], 0.15) if power <= 0 else None, chi2_per_dof=1.1, predict=predict)

def made_analysis(curves=None, *, code="transition-supported", names=("power-law", "power-law:corrected"), warnings=(), note="", crossover=True, settings=None, **crossing):
    curves = made_curves() if curves is None else curves
    crossings = made_crossings(curves, **crossing)
    fits = tuple(made_fit(curves, name, log_evidence=250.0 + i) for i, name in enumerate(names))
    weights = np.exp([fit.log_evidence - 250 for fit in fits]); weights /= weights.sum()
    statement = "A transition is supported by these data." if code == "transition-supported" else OPENING + " The crossings drift."
    return SimpleNamespace(curves=curves, settings=settings or Settings(seed=3), crossings=crossings, drift=made_drift(crossings, note=note), comparison=Comparison(fits, tuple(float(w) for w in weights)),
        crossover=SimpleNamespace(disorder=Interval.of_normal(16.53, 0.12), systematic=0.05, nu=Interval.of_normal(1.57, 0.05), basis=("power-law:corrected",)) if crossover else None,
        stability=(SimpleNamespace(ansatz="power-law:corrected", smallest_size=8.0, window=(13.0, 20.0), disorder=Interval.of_normal(16.5, 0.2), p_value=0.3),),
        verdict=SimpleNamespace(code=code, statement=statement, reasons=("The crossings agree.",), probability_transition=0.9, probability_drift=0.1, warnings=tuple(warnings), false_alarm={}),
        timing={"total": 1.0})
