"""Equal-tailed credible intervals of posterior draws."""

from __future__ import annotations

from dataclasses import asdict, dataclass

import numpy as np
import numpy.typing as npt

#: Normal tail probabilities of one and two standard deviations are common usage; 68 % and 95 % are meant literally.
LEVELS = (0.5, 0.16, 0.84, 0.025, 0.975)


@dataclass(frozen=True)
class Interval:
    """Median and equal-tailed 68 % and 95 % credible intervals of one quantity, in its own unit.

    Examples
    --------
    >>> import numpy as np
    >>> Interval.of_draws(np.arange(101.0)).low68
    16.0
    """

    median: float
    low68: float
    high68: float
    low95: float
    high95: float

    @classmethod
    def of_draws(
        cls, draws: npt.NDArray[np.float64], weights: npt.NDArray[np.float64] | None = None
    ) -> Interval:  # fmt: skip
        """Interval of `draws`, shape (n,), with optional non-negative `weights`, shape (n,)."""
        if weights is None:
            return cls(*(float(q) for q in np.quantile(draws, LEVELS)))
        order = np.argsort(draws)
        reached = np.cumsum(weights[order])
        reached = (reached - 0.5 * weights[order]) / reached[-1]  # mid-point rule, symmetric in the two tails
        return cls(*(float(q) for q in np.interp(LEVELS, reached, draws[order])))

    @classmethod
    def of_normal(cls, mean: float, sd: float) -> Interval:
        """Interval of a normal distribution with this mean and standard deviation."""
        # Quantiles of the standard normal distribution at 0.84 and 0.975
        return cls(mean, *(mean + z * sd for z in (-0.994457883, 0.994457883, -1.959963985, 1.959963985)))

    @property
    def sd(self) -> float:
        """Half the width of the 68 % interval, the usual plus-minus."""
        return (self.high68 - self.low68) / 2

    def contains(self, value: float, *, level: int = 95) -> bool:
        """Whether `value` lies inside the 68 or 95 % interval, ends included."""
        low, high = (self.low68, self.high68) if level == 68 else (self.low95, self.high95)
        return low <= value <= high

    def to_dict(self) -> dict[str, float]:
        """The five numbers by name, as `result.json` holds them."""
        return asdict(self)
