"""A chain of the posterior: emcee's ensemble of walkers with differential-evolution and global moves.

Goodman, Weare, Commun. Appl. Math. Comput. Sci. 5, 65 (2010).  Where a mixture that resembles the target is known, a
part of the steps draws from it and accepts by the rule of Metropolis and Hastings (the independence sampler of Tierney,
Ann. Stat. 22, 1701 (1994)).  Such steps jump between modes and along bent ridges, on which the local moves need
hundreds of steps; since the mixture has heavier tails than the target, no walker is held for long.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import emcee
import numpy as np
import numpy.typing as npt

from driftline.curves import FloatArray
from driftline.inference.importance import Mixture
from driftline.inference.modes import LogDensity

WALKERS = 64
LENGTHS_WANTED = 50.0  # chain length in autocorrelation times, the rule of Foreman-Mackey et al. (2013)
EFFECTIVE_WANTED = 1000.0
BLOCK = 250
MOST_STEPS = 6000
BURN_IN = 5.0  # autocorrelation times
GLOBAL = 0.5  # share of the global moves, where there are any


@dataclass(frozen=True, eq=False)
class Chain:
    """Draws after burn-in, shape (n, d), and how good they are."""

    draws: FloatArray
    autocorrelation: float
    effective: float
    steps: int
    converged: bool
    acceptance: float


class IndependenceMove(emcee.moves.Move):  # type: ignore[misc]  # emcee has no types
    """Proposals from a fixed mixture, whatever the state of the walkers."""

    def __init__(self, mixture: Mixture) -> None:
        self.mixture = mixture

    def propose(self, model: Any, state: Any) -> tuple[Any, npt.NDArray[np.bool_]]:
        """The next state of all walkers, and which of them moved; what emcee calls."""
        rng = np.random.default_rng(model.random.randint(2**31))  # emcee hands on a generator of numpy's old kind
        places = self.mixture.draw_independent(len(state.coords), rng)
        log_prob, blobs = model.compute_log_prob_fn(places)
        toll = self.mixture.log_density(state.coords) - self.mixture.log_density(places)
        accepted = np.log(rng.random(len(places))) < log_prob - state.log_prob + toll
        moved = emcee.State(places, log_prob=log_prob, blobs=blobs)
        return self.update(state, moved, accepted), accepted


def run_chain(
    target: LogDensity,
    start: FloatArray,
    rng: np.random.Generator,
    progress: Callable[[float], None] | None = None,
    *,
    mixture: Mixture | None = None,
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
    mixture : Mixture, optional
        A density that resembles the target, for global moves.
    """
    moves = [(emcee.moves.DEMove(), 0.6), (emcee.moves.DESnookerMove(), 0.1), (emcee.moves.StretchMove(), 0.3)]
    if mixture is not None:
        moves = [(move, (1 - GLOBAL) * share) for move, share in moves] + [(IndependenceMove(mixture), GLOBAL)]
    sampler = emcee.EnsembleSampler(len(start), start.shape[1], target, moves=moves, vectorize=True)
    random = np.random.RandomState(np.random.MT19937(rng.integers(2**63)))  # what emcee draws from
    state = emcee.State(start, random_state=random.get_state())
    time = np.inf
    while sampler.iteration < MOST_STEPS:
        # a quarter more each time: the autocorrelation of a long chain takes longer to compute than the next steps
        steps = min(max(BLOCK, sampler.iteration // 4), MOST_STEPS - sampler.iteration)
        state = sampler.run_mcmc(state, steps, skip_initial_state_check=True)
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
