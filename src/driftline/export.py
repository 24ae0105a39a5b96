"""Posterior draws for other tools: a fit as the data set that arviz works with.

Choose this to draw pair plots, compare models by leave-one-out, or hand draws on in a standard form; `posterior.h5` has
the same draws without any package.
"""

from __future__ import annotations

import warnings
from importlib import import_module
from importlib.metadata import version
from typing import TYPE_CHECKING, Any

import numpy as np

from driftline.errors import ConfigurationError
from driftline.scaling.likelihood import Posterior

if TYPE_CHECKING:
    from driftline.collapse import CollapseFit
    from driftline.curves import FloatArray

#: Draws whose pointwise densities are computed at once: a few dozen matrices of points by points.
CHUNK = 64


def to_arviz(fit: CollapseFit) -> Any:
    """A fit as `arviz.InferenceData`, or as the `xarray.DataTree` that arviz has in its place from version 1 on.

    Parameters
    ----------
    fit : CollapseFit

    Returns
    -------
    InferenceData or DataTree
        `posterior`: every parameter, dimensions (chain, draw). `log_likelihood`: y, dimensions (chain, draw, point),
        the log density of each mean given all others and the parameters, with the scaling function integrated out.
        `observed_data`: y; `constant_data`: size, disorder and error of each point.

    Raises
    ------
    ConfigurationError
        If arviz is not installed.

    Notes
    -----
    The draws come from importance sampling, resampled to equal weight in random order. They stand as one chain; its
    autocorrelation says nothing, `effective_samples` among the attributes does.
    """
    arviz = _arviz()
    size, disorder, mean, error = fit.curves.flat()
    groups = {
        "posterior": {name: fit.draws(name)[None] for name in fit.names},
        "log_likelihood": {"y": pointwise(fit)[None]},
        "observed_data": {"y": mean},
        "constant_data": {"size": size, "disorder": disorder, "error": error},
    }
    points = {"y": ["point"], "size": ["point"], "disorder": ["point"], "error": ["point"]}
    attributes = {
        "inference_library": "driftline", "inference_library_version": version("driftline"),
        "ansatz": fit.ansatz.name, "log_evidence": fit.log_evidence, "effective_samples": fit.sampler.effective_samples,
    }  # fmt: skip
    if version("arviz").startswith("0."):
        return arviz.from_dict(**groups, dims=points, attrs=attributes)
    return arviz.from_dict(groups, dims=points, attrs={"/": attributes})


def pointwise(fit: CollapseFit) -> FloatArray:
    """ln p(y_i | all other y, parameters) of each draw, in the user's unit, shape (draws, points)."""
    held = Posterior(fit.curves, fit.ansatz, log_tau=fit.log_tau)
    columns = [p.prior.coordinate(fit.draws(p.name)) for p in held.parameters]
    z = np.column_stack(columns)
    return np.concatenate([held.leave_one_out(z[i : i + CHUNK]) for i in range(0, len(z), CHUNK)])


def _arviz() -> Any:
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # it announces its own changes on import, which are not the user's concern
            return import_module("arviz")
    except ImportError as reason:
        raise ConfigurationError(
            "arviz is not installed, and to_arviz needs it; install it with: pip install 'driftline[arviz]'"
        ) from reason
