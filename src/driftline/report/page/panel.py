"""The interactive panel: sliders for the parameters of an ansatz move the collapsed points.

What the scripts need stands in the page as data: the points once, and for each ansatz the names of its parts, the
posterior medians, and roughness and noise scale. The scripts compute x, refit the scaling function and draw.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from driftline.collapse import UNDERSMOOTHING, CollapseFit
from driftline.report.page.details import by_evidence
from driftline.report.page.elements import embedded, paragraph, text
from driftline.report.page.symbols import mathtext_to_html
from driftline.scaling.forms import Critical
from driftline.scaling.function import LINEAR_SD
from driftline.scaling.lengths import SOFTENING
from driftline.scaling.likelihood import Posterior
from driftline.scaling.priors import LogNormal, LogUniform

if TYPE_CHECKING:
    from driftline.analysis import Analysis
    from driftline.curves import Curves
    from driftline.scaling.ansatz import Ansatz
    from driftline.scaling.parameters import Parameter

#: Parts whose x the script computes, see scaling.js; a form with any other is left out of the choice.
LENGTHS = ("power-law", "power-law-asymmetric", "kt")
TRAJECTORIES = ("fixed", "inverse-drift", "log-drift", "linear-drift")
FORMS = ("size-ratio", "finite-length", "finite-length-quadratic", "size-independent")
#: A slider reaches so many posterior standard deviations to each side, where the prior allows.
REACH = 10.0
MARKER = 3.4  # radius in pixels

ABOUT = (
    "Move a slider, or type a number, and the points move to their new x. The curve is the penalised spline of the "
    "analysis (Eilers, Marx 1996), fitted again at every move with its smoothness held at the posterior median. Misfit "
    "is the mean squared distance of the points from this curve in units of their errors (chi-squared per point): near "
    "or below 1 where the points fall on one curve."
)
NOT_THE_VERDICT = (
    "The verdict does not rest on this number. A flexible curve can pass through points that do not collapse, most "
    "easily where the sizes hardly overlap in x; the verdict weighs whole posteriors, several forms and the crossings."
)
MISSING_SCRIPT = (
    "This panel needs JavaScript, which is switched off or too old here. The figures show the collapse at the "
    "posterior median."
)


def form_parts(ansatz: Ansatz) -> dict[str, str] | None:
    """The scaled variable in the terms of the script; None if the script cannot compute it."""
    form = ansatz.form
    if isinstance(form, Critical):
        known = form.length.name in LENGTHS and form.trajectory.name in TRAJECTORIES
        return {"length": form.length.name, "trajectory": form.trajectory.name} if known else None
    return {"form": form.name} if form.name in FORMS else None


def panel_data(analysis: Analysis) -> dict[str, Any] | None:
    """What the scripts work on; None if they can show no ansatz of this analysis."""
    shown = _shown(analysis)
    if not shown:
        return None
    _, disorder, mean, error = analysis.curves.flat()
    return {
        "sizes": analysis.curves.sizes.tolist(),
        "counts": [curve.disorder.size for curve in analysis.curves.curves],
        "points": {"disorder": disorder.tolist(), "mean": mean.tolist(), "error": error.tolist()},
        "covariances": [_packed(curve.covariance) for curve in analysis.curves.curves],
        "model": model_constants(Posterior(analysis.curves, shown[0].ansatz)),
        "looks": _looks(analysis.curves),
        "start": shown.index(_first(analysis, shown)),
        "fits": [_fit(fit) for fit in shown],
    }


def model_constants(posterior: Posterior) -> dict[str, float]:
    """The fixed numbers of the model, the same for every ansatz on the same curves."""
    return {
        "count": posterior.function.count,
        "spread": posterior.spread,
        "centre": posterior.centre,
        "correction_sd": posterior.correction_sd,
        "linear_sd": LINEAR_SD,
        "softening": SOFTENING,
    }


def ansatz_parts(ansatz: Ansatz) -> dict[str, Any]:
    """An ansatz in the terms of the script."""
    return {
        "form": form_parts(ansatz),
        "corrected": ansatz.corrected,
        "amplitude": ansatz.has_amplitude,
        "exponent": ansatz.amplitude_exponent,
    }


@dataclass(frozen=True)
class Control:
    """Slider and number field of one parameter: where it starts, and how far each goes."""

    parameter: Parameter
    median: float
    log: bool
    slider: tuple[float, float]  # in the coordinate in which the parameter is sampled
    number: tuple[float, float]  # in its own unit

    @classmethod
    def of(cls, fit: CollapseFit, parameter: Parameter) -> Control:
        """The control that suits the posterior of `parameter`."""
        prior, found = parameter.prior, fit.parameters[parameter.name]
        middle, low68, high68 = prior.coordinate(np.array([found.median, found.low68, found.high68])).tolist()
        low, high = prior.quantile(np.array([0.0, 1.0])).tolist()  # infinite for Gaussian priors
        reach = REACH * (high68 - low68) / 2 or 1e-3 * max(abs(middle), 1.0)
        slider = max(low, middle - reach), min(high, middle + reach)
        ends = prior.value(np.array([low, high])).tolist()
        return cls(parameter, found.median, isinstance(prior, LogUniform | LogNormal), slider, (ends[0], ends[1]))


def controls(fit: CollapseFit) -> list[Control]:
    """One for each parameter of the ansatz, in their order."""
    return [Control.of(fit, each) for each in fit.ansatz.parameters]


def _shown(analysis: Analysis) -> list[CollapseFit]:
    return [fit for fit in by_evidence(analysis) if form_parts(fit.ansatz) is not None]


def _first(analysis: Analysis, shown: list[CollapseFit]) -> CollapseFit:
    """The fit of the collapse figure if it can be shown, else the most probable."""
    from driftline.figures.headline import headline_fit

    fit = headline_fit(analysis)
    return fit if fit in shown else shown[0]


def _fit(fit: CollapseFit) -> dict[str, Any]:
    return {
        **ansatz_parts(fit.ansatz),
        "tau": float(fit.parameters["tau"].median * np.exp(UNDERSMOOTHING)),
        "s": fit.parameters["s"].median,
        "parameters": [{"name": c.parameter.name, "median": c.median, "log": c.log} for c in controls(fit)],
    }


def _packed(covariance: Any) -> list[float] | None:
    """Lower triangle row by row, to nine digits: errors are never known to more."""
    if covariance is None:
        return None
    return [float(f"{value:.9g}") for value in covariance[np.tril_indices(len(covariance))]]


def _looks(curves: Curves) -> list[dict[str, Any]]:
    """Colour and marker of each size, the same as in the figures."""
    from matplotlib.colors import to_hex

    from driftline.figures.style import size_looks

    return [
        {"colour": to_hex(look.colour), "filled": look.filled, "path": _marker(look.marker)}
        for look in size_looks(curves.sizes)
    ]


def _marker(name: str) -> str:
    """Outline of a marker of matplotlib as SVG, upside up."""
    from matplotlib.markers import MarkerStyle

    style = MarkerStyle(name)
    outlines = style.get_path().transformed(style.get_transform()).to_polygons()
    reach = max(float(np.abs(outline).max()) for outline in outlines)
    return "".join(
        "M" + "L".join(f"{x:.2f} {-y:.2f}" for x, y in np.asarray(outline) * MARKER / reach) + "Z"
        for outline in outlines
    )


# --- the panel as HTML ------------------------------------------------------------------------------------------


def panel(analysis: Analysis) -> str:
    """Choice, controls, picture and data; nothing but a sentence where no ansatz can be shown."""
    data = panel_data(analysis)
    left_out = _left_out(analysis)
    if data is None:
        return left_out
    shown = _shown(analysis)
    return "\n".join(
        [
            paragraph(ABOUT),
            paragraph(NOT_THE_VERDICT),
            left_out,
            f'<p id="panel-fallback"><strong>{text(MISSING_SCRIPT)}</strong></p>',
            '<div class="panel" id="panel" hidden>',
            _choice(analysis, shown, data["start"]),
            *(_controls(index, fit) for index, fit in enumerate(shown)),
            '<p><button type="button" id="panel-reset">Back to the posterior median</button></p>',
            '<p class="misfit">Misfit: chi-squared per point <strong id="panel-misfit"></strong>, at the posterior '
            'median <span id="panel-reference"></span></p>',
            '<p class="silent" role="status" id="panel-status"></p>',
            _plot(analysis, shown, data),
            "</div>",
            embedded("panel-data", data),
        ]
    )


def _left_out(analysis: Analysis) -> str:
    names = [fit.ansatz.name for fit in analysis.comparison.fits if form_parts(fit.ansatz) is None]
    if not names:
        return ""
    return paragraph(f"Not to choose here: {', '.join(names)}, whose x is a formula of your own.")


def _choice(analysis: Analysis, shown: list[CollapseFit], start: int) -> str:
    options = "".join(
        f'<option value="{index}"{" selected" if index == start else ""}>{text(fit.ansatz.name)}</option>'
        for index, fit in enumerate(shown)
    )
    return (
        '<label for="panel-ansatz">Ansatz, the most probable first</label>'
        f'<select id="panel-ansatz" autocomplete="off">{options}</select>'
    )


def _controls(index: int, fit: CollapseFit) -> str:
    rows = "\n".join(_control(index, order, each) for order, each in enumerate(controls(fit)))
    rows = rows or paragraph("This form has no parameter to move.", "note")
    legend = f"Parameters: {fit.ansatz.formula}"
    return f'<fieldset data-fit="{index}" hidden>\n<legend>{text(legend)}</legend>\n{rows}\n</fieldset>'


def _control(index: int, order: int, control: Control) -> str:
    name = f"{index}-{order}"
    parameter = control.parameter
    low, high = control.slider
    limits = "".join(
        f' {key}="{value!r}"' for key, value in zip(("min", "max"), control.number, strict=True) if np.isfinite(value)
    )
    return (
        f'<div class="parameter"><label for="slider-{name}">{mathtext_to_html(parameter.symbol)}: '
        f'{text(parameter.meaning)}</label>\n<span class="setting">'
        f'<input type="range" id="slider-{name}" min="{low!r}" max="{high!r}" step="any" autocomplete="off">'
        f'<input type="number" id="number-{name}" aria-label="{text(parameter.name)} as a number"{limits} step="any" '
        'autocomplete="off"></span></div>'
    )


def _plot(analysis: Analysis, shown: list[CollapseFit], data: dict[str, Any]) -> str:
    labels = analysis.curves.labels
    symbol = f"{{{labels.disorder_symbol.replace('$', '')}}}"  # braces: the symbol may have an index
    below = "".join(
        f'<span data-fit="{index}" hidden>{mathtext_to_html(fit.ansatz.form.label.format(W=symbol))}</span>'
        for index, fit in enumerate(shown)
    )
    keys = "".join(
        f'<li><svg viewBox="-5 -5 10 10" aria-hidden="true"><path d="{look["path"]}" stroke="{look["colour"]}" '
        f'fill="{look["colour"] if look["filled"] else "#ffffff"}"/></svg> <i>L</i> = {size:g}</li>'
        for size, look in zip(data["sizes"], data["looks"], strict=True)
    )
    return (
        f'<div class="plot"><ul class="sizes">{keys}</ul><p>{mathtext_to_html(labels.observable_symbol)} on the '
        "scaling function; below, residuals in units of the error</p>"
        '<svg id="panel-plot" role="img" aria-label="Collapsed points on the scaling function at the chosen values" '
        f'height="428"></svg><p class="abscissa">{below}</p></div>'
    )
