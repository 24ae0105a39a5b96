"""A chain of the posterior: emcee's ensemble of walkers with differential-evolution moves.

Goodman, Weare, Commun. Appl. Math. Comput. Sci. 5, 65 (2010).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import emcee
import numpy as np

from driftline.curves import FloatArray
from driftline.inference.modes import LogDensity

WALKERS = 64
LENGTHS_WANTED = 50.0  # chain length in autocorrelation times, the rule of Foreman-Mackey et al. (2013)
EFFECTIVE_WANTED = 1000.0
BLOCK = 250
MOST_STEPS = 6000
BURN_IN = 5.0  # autocorrelation times


@dataclass(frozen=True, eq=False)
class Chain:
    """Draws after burn-in, shape (n, d), and how good they are."""

    draws: FloatArray
    autocorrelation: float
    effective: float
    steps: int
    converged: bool
    acceptance: float


def run_chain(
    target: LogDensity,
    start: FloatArray,
    rng: np.random.Generator,
    progress: Callable[[float], None] | None = None,
) -> Chain:
    """Sample `target` from `start` until the chain is long enough, or say that it is not.

    Parameters
    ----------
    target : callable
        Log density of a batch, shape (batch, d) -> (batch,).
    start : array, shape (walkers, d)
        First positions, of finite density, spread like the target.
    rng : numpy.random.Generator
        The one source of randomness.
    progress : callable, optional
        Called with the fraction done.
    """
    moves = [
        (emcee.moves.DEMove(), 0.6),
        (emcee.moves.DESnookerMove(), 0.1),
        (emcee.moves.StretchMove(), 0.3),
    ]
    sampler = emcee.EnsembleSampler(len(start), start.shape[1], target, moves=moves, vectorize=True)
    random = np.random.RandomState(np.random.MT19937(rng.integers(2**63)))  # what emcee draws from
    state = emcee.State(start, random_state=random.get_state())
    time = np.inf
    while sampler.iteration < MOST_STEPS:
        state = sampler.run_mcmc(state, BLOCK, skip_initial_state_check=True)
        time = float(np.max(emcee.autocorr.integrated_time(sampler.get_chain(), tol=0)))
        length = sampler.iteration - BURN_IN * time
        if length >= LENGTHS_WANTED * time and length * len(start) / time >= EFFECTIVE_WANTED:
            break
        if progress:
            progress(min(sampler.iteration / ((LENGTHS_WANTED + BURN_IN) * time), 0.99))
    burn = min(int(BURN_IN * time), sampler.iteration // 2) if np.isfinite(time) else sampler.iteration // 2
    length = sampler.iteration - burn
    effective = length * len(start) / time
    return Chain(
        draws=sampler.get_chain(discard=burn, flat=True),
        autocorrelation=time,
        effective=effective,
        steps=sampler.iteration,
        converged=bool(length >= LENGTHS_WANTED * time and effective >= EFFECTIVE_WANTED),
        acceptance=float(np.mean(sampler.acceptance_fraction)),
    )
