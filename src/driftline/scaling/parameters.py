"""A parameter of a scaling ansatz: its name, its symbol and its prior."""

from __future__ import annotations

from dataclasses import dataclass

from driftline.scaling.priors import Prior


@dataclass(frozen=True)
class Parameter:
    """One physical parameter.

    Parameters
    ----------
    name : str
        Plain name, as in ``result.json``.
    symbol : str
        Matplotlib mathtext without dollar signs.
    prior : Prior
        Density in the sampled coordinate.
    meaning : str
        A few words for listings.
    """

    name: str
    symbol: str
    prior: Prior
    meaning: str
