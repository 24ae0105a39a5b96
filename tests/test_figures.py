"""Figures: nothing clipped, nothing overlapping, the right width and fonts, whatever the data look like."""

from itertools import combinations

import matplotlib as mpl
import numpy as np
import pytest
from analyses import LABELS, made_analysis, made_crossings, made_curves, made_drift, made_fit
from matplotlib.figure import Figure
from matplotlib.legend import Legend

from driftline.curves import Curve, Curves, Labels
from driftline.drift import LAWS
from driftline.figures import style
from driftline.figures.collapse import draw_collapse
from driftline.figures.curves import draw_curves
from driftline.figures.drift import draw_drift
from driftline.figures.gallery import FIGURES
from driftline.scaling.ansatz import available, parse_ansatz

LONG = Labels(
    observable_symbol=r"\overline{\langle S_{\mathrm{half\ chain}}(t\to\infty)\rangle}/S_{\mathrm{Page}}(L)",
    disorder_symbol=r"\Delta_{\mathrm{longitudinal\ random\ field\ amplitude}}",
    disorder_unit="units of the nearest-neighbour exchange",
)


def waves():
    """Curves that rise and fall several times."""
    grid = np.linspace(-3.0, 3.0, 25)
    return Curves([Curve(size, grid, np.sin(3 * grid + size), np.full(25, 0.02)) for size in (4.5, 10.25, 100.125)])


CASES = {
    "usual": made_analysis,
    "eight sizes": lambda: made_analysis(made_curves((6, 8, 10, 12, 14, 16, 18, 1024))),
    "no crossing": lambda: made_analysis(
        code="undecided", crossover=False, probability=0.01,
        note="No pair of neighbouring sizes crosses inside the window with a probability of a half or more.",
    ),
    "one pair": lambda: made_analysis(made_curves((8, 16)), note="One point is too little to fit.", separated=0.2),
    "up and down": lambda: made_analysis(waves(), note="Nothing to fit."),
    "huge numbers": lambda: made_analysis(made_curves(scale=3e9, labels=Labels(disorder_symbol="h"))),
    "tiny numbers": lambda: made_analysis(made_curves(scale=2e-12)),
    "small change of a large number": lambda: made_analysis(made_curves(offset=12345.0)),
    "large errors": lambda: made_analysis(made_curves(error=0.1, points=5)),
    "long symbols": lambda: made_analysis(made_curves(labels=LONG)),
    "symbols that cannot be typeset": lambda: made_analysis(
        made_curves(labels=Labels(observable_symbol=r"r_{", disorder_symbol=r"\nosuch $", disorder_unit="5$")),
    ),
}  # fmt: skip


@pytest.fixture(scope="module", params=CASES, ids=str)
def case(request):
    """An analysis and its three figures, drawn once for all checks."""
    analysis = CASES[request.param]()
    return analysis, {figure.name: figure.draw(analysis) for figure in FIGURES}


def words(figure):
    """Every visible text or legend of a figure with its bounding box in pixels."""
    figure.draw_without_rendering()
    found = []
    for ax in figure.axes:
        for axis in (ax.xaxis, ax.yaxis):
            found += [(label.get_text(), label.get_window_extent()) for label in style.shown_ticks(axis)]
            found.append((axis.label.get_text(), axis.label.get_window_extent()))
        found += [("legend", legend.get_window_extent()) for legend in ax.findobj(Legend)]
        found += [(text.get_text(), text.get_window_extent()) for text in ax.texts]
    return [(text, box) for text, box in found if text.strip() and box.width > 0]


def overlapping(figure):
    """Pairs of texts whose boxes share more than a sliver, and texts other than notes that lie on an axes' area."""
    clashes = []
    for (one, first), (two, second) in combinations(words(figure), 2):
        if shared(first, second):
            clashes.append((one, two))
    notes = {text.get_text() for ax in figure.axes for text in ax.texts}
    for ax in figure.axes:
        clashes += [(text, "axes") for text, box in words(figure) if text not in notes and shared(box, ax.bbox)]
    return clashes


def shared(first, second):
    """Whether two boxes overlap by more than one pixel (0.7 points, the side bearing of a glyph) either way."""
    width = min(first.x1, second.x1) - max(first.x0, second.x0)
    height = min(first.y1, second.y1) - max(first.y0, second.y0)
    return width > 1 and height > 1


def test_no_text_touches_another_or_the_data(case):
    """Tick labels, axis labels and legends keep apart from each other and off the axes."""
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
    """Negative control: a label moved onto another is noticed."""
    figure = draw_curves(made_curves()).figure
    ax = figure.axes[0]
    ax.text(0.5, -0.02, "in the way", transform=ax.transAxes)
    assert overlapping(figure)


def inside(ax, x, low, high):
    """Whether all points with the ends of their error bars lie within the axes."""
    (left, right), (bottom, top) = ax.get_xlim(), ax.get_ylim()
    return bool(np.all((x > left) & (x < right)) and np.all((low > bottom) & (high < top)))


def test_every_point_is_inside_the_axes(case):
    """Points with their error bars, and residuals, are never cut off."""
    analysis, figures = case
    _, disorder, mean, error = analysis.curves.flat()
    assert inside(figures["curves"].axes[0], disorder, mean - error, mean + error)
    drift, (left, right) = analysis.drift, figures["drift"].axes
    sd = np.sqrt(np.diag(drift.covariance))
    assert inside(left, 1 / drift.sizes, drift.positions - sd, drift.positions + sd)
    assert inside(right, drift.sizes, drift.positions - sd, drift.positions + sd)
    points, (upper, lower) = analysis.comparison.fits[-1].points, figures["collapse"].axes
    assert inside(upper, points.x, points.y - points.error, points.y + points.error)
    assert inside(lower, points.x, points.residual, points.residual)


def test_widths_are_those_of_a_journal(case):
    """One column is 3.4 inches wide and two are 7, whatever is drawn."""
    widths = {name: float(figure.get_size_inches()[0]) for name, figure in case[1].items()}
    assert widths == {"curves": 3.4, "drift": 7.0, "collapse": 3.4}
    assert {figure.name: figure.width for figure in FIGURES} == widths


def test_labels_are_readable(case):
    """Text is never smaller than 5 points, which is the least journals print."""
    for figure in case[1].values():
        sizes = [axis.label.get_fontsize() for ax in figure.axes for axis in (ax.xaxis, ax.yaxis)]
        assert min(sizes) >= 5


def test_captions_are_sentences(case):
    """Each figure says what it shows."""
    for figure in FIGURES:
        caption = figure.caption(case[0])
        assert caption.endswith(".")
        assert "nan" not in caption


def test_files(tmp_path):
    """PDF with TrueType fonts and no date; PNG at 300 dots per inch."""
    figure = draw_curves(made_curves()).figure
    for kind in ("pdf", "png"):
        style.save(figure, tmp_path / f"curves.{kind}")
    pdf = (tmp_path / "curves.pdf").read_bytes()
    assert b"/CIDFontType2" in pdf  # a TrueType font, which fonttype 42 embeds; fonttype 3 would show as /Type3
    assert b"/Type3" not in pdf
    assert b"CreationDate" not in pdf
    image = mpl.image.imread(tmp_path / "curves.png")
    assert image.shape[:2] == (870, 1020)  # 2.9 by 3.4 inches


def test_sizes_differ_in_marker_and_lightness():
    """Twelve sizes have twelve markers, and grey values that grow with size."""
    looks = style.size_looks(np.arange(12.0))
    assert len({look.marker for look in looks}) == 12
    # luma of Rec. 601, as most conversions to grey take it
    grey = [0.299 * r + 0.587 * g + 0.114 * b for r, g, b, _ in (look.colour for look in looks)]
    assert np.all(np.diff(grey) > 0.02)


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
    mine = Figure()
    with mpl.rc_context({"font.size": 17.0}):
        before = dict(mpl.rcParams)
        one, two, three, four, five = mine.subplots(1, 5)
        curves = made_curves()
        assert draw_curves(curves, ax=one) is one
        assert draw_drift(made_drift(made_crossings(curves)), ax=(two, three)) == (two, three)
        assert draw_collapse(made_fit(curves), ax=(four, five)) == (four, five)
        assert dict(mpl.rcParams) == before
    assert all(ax.has_data() for ax in mine.axes)


def test_collapse_shown_is_the_headline():
    """The figure shows the most probable fit among those that the crossover rests on."""
    analysis = made_analysis(names=("power-law:corrected", "power-law:linear-drift"))
    # the basis of the hand-built analysis is its last ansatz, which also has the highest evidence
    (caption,) = [figure.caption(analysis) for figure in FIGURES if figure.name == "collapse"]
    assert caption.startswith("Collapse under power-law:linear-drift at the posterior median (W_mid = 16.53(12), nu = ")


@pytest.mark.parametrize("name", available())
def test_every_ansatz_has_an_axis_label(name):
    """The scaled variable of each form can be typeset, whatever index the disorder's symbol has."""
    curves = made_curves(labels=Labels(disorder_symbol="h_{x}"))
    text = style.math(parse_ansatz(name, curves).form.label.format(W="{h_{x}}"))
    assert text.startswith("$")
    assert "h_{x}" in text


def test_a_form_without_critical_disorder_is_drawn():
    """Where no ansatz has a critical disorder, figure and caption do without it."""
    analysis = made_analysis(made_curves(), names=("size-independent",), code="undecided", crossover=False)
    (drawing,) = [figure for figure in FIGURES if figure.name == "collapse"]
    assert overlapping(drawing.draw(analysis)) == []
    assert drawing.caption(analysis).startswith("Collapse under size-independent at the posterior median with one ")
