"""Figures: nothing clipped, nothing overlapping, the right width and fonts, whatever the data look like."""

from dataclasses import replace
from itertools import combinations

import matplotlib as mpl
import numpy as np
import pytest
from analyses import LABELS, made_analysis, made_crossings, made_curves, made_drift, made_fit
from matplotlib.collections import QuadMesh
from matplotlib.figure import Figure
from matplotlib.legend import Legend
from matplotlib.text import Annotation

from driftline.collapse import HeldOut
from driftline.curves import Curve, Curves, Labels
from driftline.drift import LAWS
from driftline.errors import InputError
from driftline.figure_options import FIGURE_NAMES, FigureOptions
from driftline.figures import labels, style
from driftline.figures.collapse import draw_collapse
from driftline.figures.comparison import draw_comparison
from driftline.figures.curves import draw_curves
from driftline.figures.drift import draw_drift
from driftline.figures.finish import panels, shown_ticks
from driftline.figures.gallery import FIGURES, chosen
from driftline.figures.headline import headline_fit
from driftline.figures.held_out import draw_held_out
from driftline.figures.keys import spread_apart
from driftline.figures.misfit import draw_misfit
from driftline.figures.posterior import draw_posterior, shown_parameters
from driftline.figures.rendering import pictures
from driftline.figures.stability import draw_stability
from driftline.inference.intervals import Interval
from driftline.scaling.ansatz import available, parse_ansatz
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.settings import Settings
from driftline.stability import StabilityRow

LONG = Labels(
    observable_symbol=r"\overline{\langle S_{\mathrm{half\ chain}}(t\to\infty)\rangle}/S_{\mathrm{Page}}(L)",
    disorder_symbol=r"\Delta_{\mathrm{longitudinal\ random\ field\ amplitude}}",
    disorder_unit="units of the nearest-neighbour exchange",
)
BROKEN = Labels(observable_symbol=r"r_{", disorder_symbol=r"\nosuch $", disorder_unit="5$")
DRAWINGS = {figure.name: figure for figure in FIGURES}


def waves():
    """Curves that rise and fall several times."""
    grid = np.linspace(-3.0, 3.0, 25)
    return Curves([Curve(size, grid, np.sin(3 * grid + size), np.full(25, 0.02)) for size in (4.5, 10.25, 100.125)])


def full(analysis, *, one_sided=False):
    """`analysis` with a held-out size for each fit, a map of refits, and one-sided limits of the drift if asked for."""
    fits = tuple(replace(fit, held_out=held_out(fit)) for fit in analysis.comparison.fits)
    whole, (low, high) = headline_fit(analysis).parameters.get("W_c"), analysis.curves.disorder_range
    cuts = [(size, part) for size in analysis.curves.sizes[:3] for part in (1.0, 0.8, 0.6)][1:]
    name = headline_fit(analysis).ansatz.name
    refits = tuple(
        StabilityRow(name, size, (low + (1 - part) * (high - low), high), replace(whole), 10.0**-number)
        for number, (size, part) in enumerate(cuts[:-1])
        if whole is not None
    )
    drift = analysis.drift
    if one_sided:
        far = Interval(40.0, 17.2, 90.0, 17.0, 400.0)  # the upper tail is 15 times the lower one
        drift = replace(drift, laws=tuple(replace(law, limit=far if law.limit else None) for law in drift.laws))
    return replace(analysis, comparison=replace(analysis.comparison, fits=fits), stability=refits, drift=drift)


def held_out(fit):
    """A prediction of the largest size that is off by half an error."""
    largest = fit.curves.curves[-1]
    predicted, sd = largest.mean + largest.error / 2, largest.error
    score = fit.log_evidence - 200.0
    return HeldOut(largest.size, score, 0.1, 1.2, largest.disorder, predicted, sd)


def numbers(scale, unit):
    """Data, disorders and limits in other units: everything made by hand is about 16.5 and of order one."""
    analysis = made_analysis(made_curves(scale=scale, labels=Labels(disorder_symbol="h", disorder_unit=unit)))
    return full(analysis)


#: Analyses by name, with the figures that the case is about; None means all.
CASES = {
    "usual": (lambda: full(made_analysis()), None),
    "ten sizes, ten forms": (
        lambda: full(made_analysis(made_curves((6, 8, 10, 12, 14, 16, 18, 20, 24, 1024)), names=DEFAULT_ANSATZE)),
        None,
    ),
    "long symbols": (lambda: full(made_analysis(made_curves(labels=LONG))), None),
    "two sizes, one form": (
        lambda: made_analysis(
            made_curves((8, 16)), names=("power-law",), note="One point is too little to fit.", separated=0.2
        ),
        ("curves", "drift", "collapse", "posterior", "misfit"),
    ),
    "no crossing": (
        lambda: made_analysis(code="undecided", crossover=False, probability=0.01, note="No pair crosses."),
        ("curves",),
    ),
    "one-sided limits": (lambda: full(made_analysis(), one_sided=True), ("drift",)),
    "up and down": (lambda: made_analysis(waves(), note="Nothing to fit."), ("curves", "misfit")),
    "huge numbers": (lambda: numbers(3e9, ""), ("curves", "collapse", "held-out")),
    "tiny numbers": (lambda: numbers(2e-12, r"\mu\mathrm{eV}^{-1}"), ("curves", "collapse", "held-out")),
    "small change of a large number": (
        lambda: full(made_analysis(made_curves(offset=12345.0))), ("curves", "collapse", "held-out"),
    ),
    "large errors": (lambda: made_analysis(made_curves(error=0.1, points=5)), ("curves", "collapse")),
    "symbols that cannot be typeset": (
        lambda: full(made_analysis(made_curves(labels=BROKEN))), ("curves", "posterior", "stability"),
    ),
    "sizes are ln N": (
        lambda: full(made_analysis(made_curves(np.log([64, 128, 256, 512])))),
        ("curves", "collapse", "stability", "misfit"),
    ),
}  # fmt: skip


@pytest.fixture(scope="module", params=CASES, ids=str)
def case(request):
    """An analysis and its figures, drawn once for all checks."""
    build, names = CASES[request.param]
    analysis = build()
    drawn = [each for each in FIGURES if each.applies(analysis) and (names is None or each.name in names)]
    assert names is None or {each.name for each in drawn} == set(names)
    return analysis, {each.name: each.draw(analysis) for each in drawn}


def words(figure):
    """Every visible text or legend of a figure with its bounding box in pixels."""
    figure.draw_without_rendering()
    found = [("legend", legend.get_window_extent()) for legend in figure.legends]
    for ax in panels(figure):
        for axis in (ax.xaxis, ax.yaxis):
            found += [(label.get_text(), label.get_window_extent()) for label in shown_ticks(axis)]
            found += [(tick.label2.get_text(), tick.label2.get_window_extent()) for tick in second_labels(axis)]
            found.append((axis.label.get_text(), axis.label.get_window_extent()))
        found += [("legend", legend.get_window_extent()) for legend in ax.findobj(Legend)]
        found += [(text.get_text(), text.get_window_extent()) for text in [*ax.texts, ax.title]]
    return [(text, box) for text, box in found if text.strip() and box.width > 0]


def second_labels(axis):
    """Ticks of an axis that are labelled on the other side, as those of a colour bar."""
    low, high = sorted(axis.get_view_interval())
    slack = 1e-9 * (high - low)
    ticks = axis.get_major_ticks()
    return [tick for tick in ticks if tick.label2.get_visible() and low - slack <= tick.get_loc() <= high + slack]


def overlapping(figure):
    """Pairs of texts whose boxes share more than a sliver, and texts that lie on a panel, but for those in its cells.

    An inset lies on a panel by design, and that it hides no point is checked elsewhere.
    """
    found = words(figure)
    clashes = [(one, two) for (one, first), (two, second) in combinations(found, 2) if shared(first, second)]
    cells = {text.get_text() for ax in figure.axes for text in ax.texts if ax.findobj(QuadMesh)}
    insets = [inset.get_tightbbox() for ax in figure.axes for inset in ax.child_axes]
    for ax in figure.axes:
        clashes += [
            (text, "axes")
            for text, box in found
            if text not in cells and shared(box, ax.bbox) and not any(within(box, inset) for inset in insets)
        ]
    return clashes


def shared(first, second):
    """Whether two boxes overlap by more than one pixel (0.7 points, the side bearing of a glyph) either way."""
    width = min(first.x1, second.x1) - max(first.x0, second.x0)
    height = min(first.y1, second.y1) - max(first.y0, second.y0)
    return width > 1 and height > 1


def within(box, other):
    """Whether a box lies inside another, to a pixel."""
    return box.x0 > other.x0 - 1 and box.x1 < other.x1 + 1 and box.y0 > other.y0 - 1 and box.y1 < other.y1 + 1


def test_no_text_touches_another_or_the_data(case):
    """Tick labels, axis labels, direct labels and legends keep apart from each other and off the panels."""
    for name, figure in case[1].items():
        assert overlapping(figure) == [], name


def test_no_text_is_cut_off(case):
    """Every text and legend lies inside the figure."""
    for name, figure in case[1].items():
        for text, box in words(figure):
            # half a pixel of 1/100 inch: rounding of the text's position
            assert box.x0 >= -0.5, (name, text)
            assert box.y0 >= -0.5, (name, text)
            assert box.x1 <= figure.bbox.x1 + 0.5, (name, text)
            assert box.y1 <= figure.bbox.y1 + 0.5, (name, text)


def test_the_checks_of_overlap_can_fail():
    """Negative control: a label moved onto another, and one moved onto the panel, are noticed."""
    for place in ((0.5, -0.02), (0.5, 0.5)):
        figure = draw_curves(made_curves()).figure
        figure.axes[0].text(*place, "in the way", transform=figure.axes[0].transAxes)
        assert overlapping(figure)


def inside(ax, x, low, high):
    """Whether all points with the ends of their error bars lie within the axes."""
    left, right = sorted(ax.get_xlim())
    bottom, top = sorted(ax.get_ylim())
    return bool(np.all((x > left) & (x < right)) and np.all((low > bottom) & (high < top)))


def test_every_point_is_inside_the_axes(case):
    """Points with their error bars, residuals, scores, cells and limits are never cut off."""
    analysis, figures = case
    _, disorder, mean, error = analysis.curves.flat()
    fit = headline_fit(analysis)
    checks = {
        "curves": lambda ax: inside(ax[0], disorder, mean - error, mean + error),
        "drift": lambda ax: drift_inside(analysis.drift, ax),
        "collapse": lambda ax: collapse_inside(fit.points, ax),
        "comparison": lambda ax: comparison_inside(analysis.comparison.fits, ax),
        "held-out": lambda ax: inside(ax[0], disorder, mean - error, mean + error),
        "misfit": lambda ax: inside(ax[0], disorder, np.zeros(1), np.full(1, len(analysis.curves.sizes) - 1.0)),
    }
    for name, figure in figures.items():
        if name in checks:
            assert checks[name](figure.axes), name


def drift_inside(drift, axes):
    """Points of both panels, and markers and arrows of the limits."""
    left, right = axes
    sd = np.sqrt(np.diag(drift.covariance))
    low, high = drift.positions - sd, drift.positions + sd
    marks = [line for line in left.lines if line.get_marker() in ("D", 6, 7)]  # diamonds and the heads of arrows
    limits = np.concatenate([np.asarray(line.get_ydata(), dtype=float) for line in marks] or [drift.positions])
    assert len(marks) >= sum(law.limit is not None for law in drift.laws)
    return (
        inside(left, 1 / drift.sizes, low, high)
        and inside(right, drift.sizes, low, high)
        and inside(left, np.zeros(1), limits, limits)
    )


def collapse_inside(points, axes):
    """Collapsed points with their error bars, and residuals."""
    upper, lower = axes
    y, error, residual = points.y, points.error, points.residual
    return inside(upper, points.x, y - error, y + error) and inside(lower, points.x, residual, residual)


def comparison_inside(fits, axes):
    """Evidences and scores relative to the best."""
    rows = np.arange(len(fits), dtype=float)
    columns = ([fit.log_evidence for fit in fits], [fit.held_out.log_score for fit in fits])
    return all(inside(ax, np.array(x) - max(x), rows, rows) for ax, x in zip(axes, columns, strict=True))


def test_the_inset_hides_no_point(case):
    """Neither point nor error bar lies under the inset or its tick labels."""
    analysis, figures = case
    if "curves" not in figures:
        return
    ax = figures["curves"].axes[0]
    _, disorder, mean, error = analysis.curves.flat()
    for inset in ax.child_axes:
        box = inset.get_tightbbox()
        for y in (mean - error, mean + error):
            x, y = ax.transData.transform(np.column_stack([disorder, y])).T
            assert not np.any((x > box.x0) & (x < box.x1) & (y > box.y0) & (y < box.y1))


def test_labels_are_readable(case):
    """Text is never smaller than 5 points, which is the least journals print, but for labels longer than a page."""
    for name, figure in case[1].items():
        sizes = [text.get_fontsize() for ax in figure.axes for text in ax.texts if text.get_text()]
        sizes += [axis.label.get_fontsize() for ax in figure.axes for axis in (ax.xaxis, ax.yaxis)]
        assert min(sizes) >= 5, name


def test_captions_are_sentences(case):
    """Each figure says what it shows."""
    for name in case[1]:
        caption = DRAWINGS[name].caption(case[0])
        assert caption.endswith(".")
        assert "nan" not in caption


def test_widths_are_those_of_a_journal(case):
    """One column is 3.4 inches wide and two are 7, whatever is drawn."""
    for name, figure in case[1].items():
        few = name == "posterior" and len(figure.axes) < 7  # up to three parameters fit one column
        assert figure.get_figwidth() == (3.4 if few else DRAWINGS[name].width)


@pytest.mark.parametrize("width", ["single", "double"])
def test_every_figure_fits_either_width(width):
    """What suits two columns can be drawn in one and the other way round, with nothing overlapping."""
    analysis = full(made_analysis(names=(*DEFAULT_ANSATZE[3:6], "power-law:corrected")))
    natural = {"single": ("drift", "comparison", "posterior"), "double": ("curves", "stability", "misfit")}
    with style.drawn_with(FigureOptions(width=width)):
        for name in natural[width]:
            figure = DRAWINGS[name].draw(analysis)
            assert figure.get_figwidth() == {"single": 3.4, "double": 7.0}[width]
            assert overlapping(figure) == [], name


def test_registry_and_names_agree():
    """Each figure that can be asked for exists, in the same order."""
    assert tuple(figure.name for figure in FIGURES) == FIGURE_NAMES


def test_files(tmp_path):
    """PDF with TrueType fonts and no date; PNG at 300 dots per inch; SVG for the page; only what was asked for."""
    options = FigureOptions(figures=("curves",), format=("pdf", "png"))
    (picture,) = pictures(
        made_analysis(settings=Settings(ansatze=("power-law", "power-law:corrected"), figure=options))
    )
    assert picture.name == "curves"
    assert set(picture.files) == {"pdf", "png", "svg"}
    pdf = picture.files["pdf"]
    assert b"/CIDFontType2" in pdf  # a TrueType font, which fonttype 42 embeds; fonttype 3 would show as /Type3
    assert b"/Type3" not in pdf
    assert b"CreationDate" not in pdf
    assert b"<dc:date>" not in picture.files["svg"]
    (tmp_path / "curves.png").write_bytes(picture.files["png"])
    assert mpl.image.imread(tmp_path / "curves.png").shape[:2] == (870, 1020)  # 2.9 by 3.4 inches


def test_a_style_file_is_honoured(tmp_path):
    """Letters, lines and colours follow the user's style file, the width of the column does not."""
    path = tmp_path / "mine.mplstyle"
    path.write_text("font.size: 6  # small\nlines.linewidth: 3\nfigure.figsize: 1, 1\nimage.cmap: plasma\n")
    with style.drawn_with(FigureOptions(style=str(path), font_size=9)):
        ax = draw_curves(made_curves(), made_crossings(made_curves()))
    assert ax.figure.get_figwidth() == 3.4
    assert {text.get_fontsize() for text in ax.texts if text.get_text()} == {6 * style.TICK}
    plasma = mpl.colormaps["plasma"](0.0)
    assert any(line.get_linewidth() == 3 * 0.8 and tuple(line.get_color()) == plasma for line in ax.lines)


def test_font_size_is_honoured():
    """All letters grow with the option."""
    with style.drawn_with(FigureOptions(font_size=10)):
        ax = draw_curves(made_curves())
    assert ax.xaxis.label.get_fontsize() == 10 * style.LABEL


def test_sizes_differ_in_marker_and_lightness():
    """Twelve sizes have twelve markers, and grey values that grow with size."""
    looks = style.size_looks(np.arange(12.0))
    assert len({look.marker for look in looks}) == 12
    # luma of Rec. 601, as most conversions to grey take it
    grey = [0.299 * r + 0.587 * g + 0.114 * b for r, g, b, _ in (look.colour for look in looks)]
    assert np.all(np.diff(grey) > 0.02)


def test_every_curve_is_labelled_at_its_end():
    """The labels stand in the order in which the curves end, and each leader begins at its curve."""
    curves = made_curves(np.log([64, 128, 256, 512]))
    ax = draw_curves(curves)
    placed = sorted(
        (text.get_position()[1], text.get_text()) for text in ax.texts if text.get_text() not in ("", "$L$")
    )
    ends = sorted((curve.mean[-1], text) for curve, text in zip(curves.curves, labels.sizes(curves.sizes), strict=True))
    assert [text for _, text in placed] == [text for _, text in ends]
    assert {text for _, text in ends} == {"4.16", "4.85", "5.55", "6.24"}
    leaders = [text.xy for text in ax.texts if isinstance(text, Annotation)]
    assert leaders == [(curve.disorder[-1], curve.mean[-1]) for curve in curves.curves]


def test_labels_are_spread_apart_as_little_as_can_be():
    """By hand: a close pair moves apart evenly, at the edge only inwards, and too many share the room evenly."""
    np.testing.assert_allclose(spread_apart(np.array([0.5, 0.55, 0.9]), 0.15, 0, 1), [0.45, 0.6, 0.9])
    np.testing.assert_allclose(spread_apart(np.array([0.0, 1.0, 0.02]), 0.2, 0, 1), [0.0, 1.0, 0.2])
    np.testing.assert_allclose(spread_apart(np.full(3, 0.4), 0.7, 0, 1), [0.0, 0.5, 1.0])


def test_all_laws_at_once():
    """Seven laws have seven colours and dashes, and their legends fit."""
    drift = made_drift(made_crossings(made_curves()), laws=tuple(LAWS))
    left, _ = draw_drift(drift, LABELS)
    assert overlapping(left.figure) == []
    assert len(set(style.PALETTE)) >= len(LAWS)
    assert len({str(dash) for dash in style.DASHES}) >= len(LAWS)


def test_unresolved_and_unlikely_crossings():
    """Crossings that are not separated are drawn hollow under their own name, and improbable ones not at all."""
    curves = made_curves()

    def texts(**kind):
        ax = draw_curves(curves, made_crossings(curves, **kind))
        return [text.get_text() for legend in ax.findobj(Legend) for text in legend.get_texts()]

    assert "crossing" in texts()
    assert "crossing, not separated" in texts(separated=0.5)
    assert not any("crossing" in text for text in texts(probability=0.3))


def test_given_axes_are_drawn_into():
    """With `ax` nothing new is made, the axes come back, and the user's settings stay as they were."""
    mine = Figure(figsize=(20, 20))
    with mpl.rc_context({"font.size": 17.0}):
        before = dict(mpl.rcParams)
        free = iter(mine.subplots(5, 5).flat)
        analysis = full(made_analysis())
        fit, pair = headline_fit(analysis), lambda: (next(free), next(free))
        one = next(free)
        assert draw_curves(analysis.curves, analysis.crossings, ax=one) is one
        for draw, thing in (
            (draw_drift, analysis.drift), (draw_collapse, fit), (draw_comparison, analysis.comparison),
            (draw_held_out, fit),
        ):  # fmt: skip
            axes = pair()
            assert draw(thing, ax=axes) == axes
        one = next(free)
        assert draw_misfit(fit, ax=one) is one
        one = next(free)
        assert draw_stability(analysis.stability, fit, ax=one) is one
        count = len(shown_parameters(fit))
        grid = Figure().subplots(count, count)
        assert draw_posterior(fit, ax=grid) is grid
        assert dict(mpl.rcParams) == before


def test_collapse_shown_is_the_headline():
    """The figure shows the most probable fit among those that the crossover rests on."""
    analysis = made_analysis(names=("power-law:corrected", "power-law:linear-drift"))
    # the basis of the hand-built analysis is its last ansatz, which also has the highest evidence
    caption = DRAWINGS["collapse"].caption(analysis)
    assert caption.startswith("Collapse under power-law:linear-drift at the posterior median (W_mid = 16.53(12), nu = ")


@pytest.mark.parametrize("name", available())
def test_every_ansatz_has_an_axis_label(name):
    """The scaled variable of each form can be typeset, whatever index the disorder's symbol has."""
    symbols = Labels(disorder_symbol="h_{x}")
    text = labels.with_disorder(parse_ansatz(name, made_curves(labels=symbols)).form.label, symbols)
    assert text.startswith("$")
    assert "h_{x}" in text


def test_a_form_without_critical_disorder_is_drawn():
    """Where no ansatz has a critical disorder, figures and captions do without it, or are left out."""
    analysis = made_analysis(made_curves(), names=("size-independent",), code="undecided", crossover=False)
    assert [figure.name for figure in chosen(analysis)] == ["curves", "drift", "collapse", "misfit"]
    assert overlapping(DRAWINGS["collapse"].draw(analysis)) == []
    assert (
        DRAWINGS["collapse"]
        .caption(analysis)
        .startswith("Collapse under size-independent at the posterior median with one ")
    )


def test_a_fit_without_held_out_size_is_refused():
    """The drawing of what is not there says so."""
    with pytest.raises(InputError, match=r"^power-law: no size was held out of this fit; it needs three sizes and ext"):
        draw_held_out(made_fit(made_curves(), "power-law"))


def test_the_map_of_residuals_shows_each_at_its_place():
    """Cells hold the residuals of their size in order, and a sign stands on each of two errors and more."""
    fit = made_fit(made_curves())
    ax = draw_misfit(fit)
    meshes = [mesh for mesh in ax.findobj(QuadMesh) if mesh.axes is ax]
    for mesh, size in zip(meshes, fit.curves.sizes, strict=True):
        np.testing.assert_array_equal(np.ravel(mesh.get_array()), fit.points.residual[fit.points.size == size])
    signs = sum(len(line.get_xdata()) for line in ax.lines if line.get_marker() in ("+", "_"))
    assert signs == np.sum(np.abs(fit.points.residual) >= 2) > 0


def test_contours_hold_what_they_say():
    """On a lattice of known densities the levels enclose 68 % and 95 % of the mass."""
    from driftline.figures.posterior import LEVELS, _levels

    x = np.linspace(-5, 5, 401)
    density = np.exp(-0.5 * (x[:, None] ** 2 + x[None, :] ** 2))
    for share, level in zip(LEVELS, _levels(density), strict=True):
        # closed form: the density of a 2D normal at the contour of share p is 1 - p of its peak; lattice step 0.025
        assert level == pytest.approx(1 - share, abs=0.002)


def test_prior_densities_are_normalised():
    """Each prior of a collapse integrates to one in the parameter's own scale, which is what the corner plot shows."""
    curves = made_curves()
    for name in ("power-law:corrected", "power-law:linear-drift", "kt", "size-ratio"):
        for parameter in parse_ansatz(name, curves).parameters:
            low, high = parameter.prior.value(parameter.prior.quantile(np.array([1e-6, 1 - 1e-6])))
            grid = np.linspace(low, high, 200_001)
            # trapezia over 2e5 steps of a density that varies over 1e-3 of the range at its fastest, and the ends
            assert np.trapezoid(parameter.prior.density(grid), grid) == pytest.approx(1.0, abs=2e-3), parameter.name


def test_processes_change_nothing():
    """Figures drawn by two processes are, byte for byte, those drawn by one."""
    kind = {"ansatze": ("power-law", "power-law:corrected"), "figure": FigureOptions(figures=("misfit", "stability"))}
    alone, shared_out = (pictures(full(made_analysis(settings=Settings(jobs=jobs, **kind)))) for jobs in (1, 2))
    assert alone == shared_out
