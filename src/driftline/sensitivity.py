"""How much the answer owes to the priors: three declared sets, compared by reweighting one set of draws.

The first set is the one used.  `flat-in-value` takes parameters sampled as logarithms uniform in their value instead;
`wide` doubles the standard deviation of every Gaussian prior.  A reweighting is only as good as its effective number of
draws, which is reported beside it.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from driftline.curves import FloatArray
from driftline.inference.intervals import Interval
from driftline.scaling.parameters import Parameter
from driftline.scaling.priors import LogUniform, Normal

PriorChange = Callable[[Sequence[Parameter], FloatArray], FloatArray]
WIDENED = 2.0


@dataclass(frozen=True)
class PriorShift:
    """The result under another set of priors.

    Parameters
    ----------
    name : str
        Of the set.
    log_evidence_shift : float
        Change of the log evidence.
    disorder : Interval or None
        W_c under that set; None for a form without it.
    effective : float
        Effective draws of the reweighting.
    """

    name: str
    log_evidence_shift: float
    disorder: Interval | None
    effective: float


def flat_in_value(parameters: Sequence[Parameter], z: FloatArray) -> FloatArray:
    """Log of (density uniform in the value) over (density uniform in its logarithm), summed over the parameters."""
    total = np.zeros(len(z))
    for i, parameter in enumerate(parameters):
        if isinstance(parameter.prior, LogUniform):
            low, high = parameter.prior.low, parameter.prior.high
            total += z[:, i] - np.log(np.exp(high) - np.exp(low)) + np.log(high - low)
    return total


def wide(parameters: Sequence[Parameter], z: FloatArray) -> FloatArray:
    """Log of (Gaussian with twice the standard deviation) over (Gaussian as declared), summed over the parameters."""
    total = np.zeros(len(z))
    for i, parameter in enumerate(parameters):
        if isinstance(parameter.prior, Normal):
            broader = Normal(parameter.prior.mean, WIDENED * parameter.prior.sd)
            narrow = Normal(parameter.prior.mean, parameter.prior.sd)
            total += broader.log_density(z[:, i]) - narrow.log_density(z[:, i])
    return total


def as_declared(parameters: Sequence[Parameter], z: FloatArray) -> FloatArray:
    """No change."""
    return np.zeros(len(z))


PRIOR_SETS: dict[str, PriorChange] = {"declared": as_declared, "flat-in-value": flat_in_value, "wide": wide}
