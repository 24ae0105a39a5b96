"""The page as text: what stands on it, that it is escaped, and that it holds together. In a browser: `test_panel`."""

import json
import re
from dataclasses import replace
from html import escape
from html.parser import HTMLParser
from importlib.resources import files

import numpy as np
import pytest
from analyses import CAUTION, OPENING, made_analysis, made_curves
from pages import HOSTILE, draw

from driftline.rates import Count, FalseAlarm
from driftline.report.page import details, page
from driftline.report.page.document import SCRIPTS, policy, resource
from driftline.report.page.elements import embedded
from driftline.report.page.limits import limits
from driftline.report.page.panel import FORMS, LENGTHS, TRAJECTORIES, panel, panel_data
from driftline.report.page.pictures import figures, inline
from driftline.report.page.sections import HEADINGS
from driftline.report.page.symbols import mathtext_to_html
from driftline.scaling import forms, lengths, trajectories
from driftline.scaling.expression import ExpressionForm
from driftline.scaling.priors import Uniform
from driftline.settings import Settings

VOID = {"meta", "input", "br", "img", "link"}


class Outline(HTMLParser):
    """Every element with its attributes, in order; fails where elements are not nested."""

    def __init__(self, text):
        super().__init__()
        self.found, self.open, self.texts = [], [], {}
        self.feed(text)
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.found.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.found.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.texts.setdefault(self.open[-1] if self.open else "", []).append(data)

    def all(self, tag):
        """Attributes of every element of this kind."""
        return [attributes for name, attributes in self.found if name == tag]


@pytest.fixture(scope="module")
def pictures(tmp_path_factory):
    """Two figures as files, drawn from hostile labels."""
    curves = made_curves().relabel(**HOSTILE)
    return draw(made_analysis(curves), tmp_path_factory.mktemp("figures"), "curves", "collapse")


@pytest.fixture(scope="module")
def text(pictures):
    """A page with two figures."""
    return page(made_analysis(code="drifting"), pictures)


def test_every_section_is_there_and_linked(text):
    """All sections stand on the page in the order of the contents, the warning sentence before any number."""
    outline = Outline(text)
    assert [part["id"] for part in outline.all("section")] == list(HEADINGS)
    assert [link["href"] for link in outline.all("a")][1:] == [f"#{name}" for name in HEADINGS]
    assert text.index(OPENING) < text.index("<dl") < text.index("<table")
    assert CAUTION.message in text
    assert f"<strong>What to do:</strong> {CAUTION.action}" in text
    assert "16.53(12)" in text


def test_a_section_without_content_is_left_out(tmp_path):
    """Without warnings, figures and headline there is neither heading nor link."""
    analysis = replace(
        made_analysis(warnings=(), crossover=False, note="nothing"), comparison=made_analysis().comparison
    )
    outline = Outline(page(analysis, tmp_path))
    assert not {"warnings", "figures"} & {part["id"] for part in outline.all("section")}
    assert not {"#warnings", "#figures"} & {link["href"] for link in outline.all("a")}


def test_tables_have_captions_and_scopes(text):
    """Each table has one caption, heads of columns, and a head for each row."""
    tables = re.findall(r"<table.*?</table>", text, re.DOTALL)
    assert len(tables) >= 8
    for each in tables:
        outline = Outline(each)
        assert len(outline.all("caption")) == 1
        scopes = [head["scope"] for head in outline.all("th")]
        rows = len(outline.all("tr")) - 1
        assert scopes == ["col"] * (len(scopes) - rows) + ["row"] * rows


def test_every_figure_has_its_words(text):
    """Each picture is announced by the words of its caption."""
    outline = Outline(text)
    captions = re.findall(r"<figcaption>(.*?)</figcaption>", text)
    drawn = [svg for svg in outline.all("svg") if svg.get("role") == "img" and svg.get("id") != "panel-plot"]
    assert len(captions) == len(drawn) == 2
    assert all(svg["aria-label"] for svg in drawn)


def test_no_id_occurs_twice_and_every_reference_resolves(text):
    """Ids of several inline figures do not collide, and what refers to one finds it in its own figure."""
    outline = Outline(text)
    names = [attributes["id"] for _, attributes in outline.found if "id" in attributes]
    assert len(names) == len(set(names))
    used = re.findall(r'(?:href="#|url\(#|for="|aria-labelledby=")([^")]+)', text)
    assert len(used) > 20
    assert set(used) <= set(names)


def test_the_ids_of_two_figures_would_collide(pictures):
    """Negative control: as matplotlib writes them, both figures use the same names."""
    found = [
        set(re.findall(r' id="([^"]+)"', (pictures / f"{name}.svg").read_text())) for name in ("curves", "collapse")
    ]
    assert found[0] & found[1]


def test_the_picture_is_the_same_after_inlining(pictures):
    """As many marks and letters as before, no rule for the whole page, paths moved by half a hundredth at most."""
    raw = (pictures / "curves.svg").read_bytes()
    small = inline(raw, "a-")
    assert "<style" not in small
    assert "<!--" not in small
    assert "metadata" not in small
    assert len(small) < len(raw)
    for mark in (b"<path", b"<use", b"<rect"):
        assert raw.count(mark) == small.encode().count(mark)
    numbers = [
        np.array(
            [float(number) for path in re.findall(r' d="([^"]*)"', each) for number in re.findall(r"-?[\d.]+", path)]
        )
        for each in (raw.decode(), small)
    ]
    assert np.max(np.abs(numbers[0] - numbers[1])) <= 0.005 + 1e-9  # half of the last digit, and rounding


def test_a_huge_figure_becomes_a_bitmap(tmp_path):
    """A figure of too many points is shown as the PNG that lies beside it, with the same words."""
    (tmp_path / "curves.svg").write_text(
        f'<svg xmlns="http://www.w3.org/2000/svg"><path d="{"M1 1" * 130_000}"/></svg>'
    )
    (tmp_path / "curves.png").write_bytes(b"picture")
    shown = figures(made_analysis(), tmp_path)
    assert "<svg" not in shown
    (image,) = Outline(shown).all("img")
    assert image["src"] == "data:image/png;base64,cGljdHVyZQ=="
    assert f"<figcaption>{escape(image['alt'])}</figcaption>" in shown


def test_nothing_of_the_data_file_becomes_markup(pictures):
    """Hostile labels, path and figures: as many elements and attributes of each name as with harmless ones."""
    harmless = made_analysis(made_curves().relabel(**dict.fromkeys(HOSTILE, "x")))
    curves = made_curves().relabel(**HOSTILE)
    object.__setattr__(curves, "origin", {"path": HOSTILE["observable"], "sha256": HOSTILE["observable"]})
    hostile = made_analysis(curves, settings=Settings(labels={"observable": HOSTILE["observable"]}))
    outlines = [Outline(page(each, pictures)) for each in (harmless, hostile)]
    slanted = {"i", "sub", "sup"}  # letters of a symbol
    shapes = [[(tag, list(about)) for tag, about in each.found if tag not in slanted] for each in outlines]
    assert shapes[0] == shapes[1]
    assert HOSTILE["observable"] in "".join(outlines[1].texts["h1"])
    assert "".join(outlines[1].texts["pre"]).count("<script>window.harmed=1</script>") == 2  # settings and command


def test_data_cannot_end_their_element():
    """Text that looks like the end of a script stays text, and reads back as it was."""
    data = {"name": "</script><!--<script>&\u2028", "value": 0.1}
    written = embedded("data", data)
    content = written.removeprefix('<script type="application/json" id="data">').removesuffix("</script>")
    assert not set("<>&\u2028") & set(content)
    assert json.loads(content) == data


def test_the_page_is_self_contained(text):
    """No address but that of the SVG name space, no file beside it; the policy names the very script of the page."""
    outline = Outline(text)
    assert set(re.findall(r"https?://[^\"' ]+", text)) == {"http://www.w3.org/2000/svg"}
    assert [tag for tag in ("link", "iframe", "object", "embed", "base", "form") if outline.all(tag)] == []
    assert [script.get("src") for script in outline.all("script")] == [None, None]
    assert not any(name.startswith("on") for _, attributes in outline.found for name in attributes)
    (rule,) = [meta["content"] for meta in outline.all("meta") if meta.get("http-equiv")]
    assert rule == policy(re.search(r"<script>(.*?)</script>", text, re.DOTALL).group(1))
    assert rule.startswith("default-src 'none'; script-src 'sha256-")
    assert "unsafe-inline" not in rule.partition("style-src")[0]


def test_scripts_are_plain():
    """The scripts read nothing from elsewhere and make no code or markup from text."""
    banned = re.compile(
        r"\beval\(|\bFunction\(|(inner|outer)HTML|insertAdjacentHTML|document\.write|\bfetch\(|XMLHttpRequest|"
        r"\bimport\b|setTimeout\(\s*[\"'`]"
    )
    for name in SCRIPTS:
        assert not banned.search(resource(name)), name
    assert banned.search("window.eval(text)")  # negative control


def test_style_and_scripts_are_part_of_the_package():
    """The files lie beside the module, wherever it is installed."""
    for name in ("style.css", *SCRIPTS):
        assert (files("driftline.report.page") / name).is_file()


def test_every_part_of_an_ansatz_is_known_to_the_script():
    """A new length, trajectory or form must be written in scaling.js as well, or be left out on purpose."""
    assert set(LENGTHS) == set(lengths.LENGTHS)
    assert set(TRAJECTORIES) == set(trajectories.TRAJECTORIES)
    assert set(FORMS) == set(forms.FORMS)


def test_a_form_of_the_users_own_is_left_out_with_a_sentence():
    """Its x is not known to the script; alone it leaves the sentence and no panel."""
    own = ExpressionForm("mine", "(W - W_c) * L", "transition", {"W_c": Uniform(13, 20)})
    analysis = made_analysis()
    fits = analysis.comparison.fits
    mine = replace(fits[0], ansatz=replace(fits[0].ansatz, name="mine", form=own))
    mixed = replace(analysis, comparison=replace(analysis.comparison, fits=(mine, fits[1])))
    assert len(panel_data(mixed)["fits"]) == 1
    sentence = "Not to choose here: mine, whose x is a formula of your own."
    assert sentence in panel(mixed)
    assert sentence not in panel(analysis)
    alone = replace(analysis, comparison=replace(analysis.comparison, fits=(mine,)))
    assert panel(alone) == f"<p>{sentence}</p>"


def test_the_panel_starts_at_the_fit_of_the_headline():
    """The corrected form is shown first although another may be more probable, as in the figure of the collapse."""
    analysis = made_analysis(names=("power-law:corrected", "kt"))  # made so that the last is the most probable
    analysis = replace(analysis, crossover=replace(analysis.crossover, basis=("power-law:corrected",)))
    data = panel_data(analysis)
    assert data["fits"][data["start"]]["form"] == {"length": "power-law", "trajectory": "fixed"}
    assert data["start"] == 1


def test_sliders_stay_inside_the_prior(text):
    """A slider reaches ten standard deviations, or to the end of the prior; the number field has the prior's limits."""
    outline = Outline(text)
    sliders = {each["id"]: each for each in outline.all("input") if each["type"] == "range"}
    numbers = {each["id"]: each for each in outline.all("input") if each["type"] == "number"}
    # power-law:corrected is the most probable: W_c = 16.53(12), prior from 11.25 to 21.75; the 68 % interval of a
    # normal distribution is 0.9945 standard deviations to each side
    assert float(sliders["slider-0-0"]["min"]) == pytest.approx(16.53 - 10 * 0.12 * 0.994457883)
    assert (numbers["number-0-0"]["min"], numbers["number-0-0"]["max"]) == ("11.25", "21.75")
    # omega has a Gaussian prior of its logarithm, which has no ends but zero and infinity
    assert numbers["number-0-2"]["min"] == "0.0"
    assert "max" not in numbers["number-0-2"]


def test_each_prior_stands_once():
    """Parameters that several ansätze share with the same prior have one row, which counts them."""
    table = details.priors(made_analysis(names=("power-law", "power-law:corrected", "kt")))
    by_name = {row[0]: row for row in table.rows}
    assert len(table.rows) == len(by_name)
    assert by_name["W_c"][1:] == ("critical disorder", "uniform from 11.25 to 21.75", "3 of 3")
    assert by_name["nu"][3] == "2 of 3"
    assert by_name["omega"][3] == "1 of 3"
    assert {"b_below", "b_above", "tau", "s"} <= set(by_name)


def test_every_parameter_has_its_posterior():
    """Each parameter of each ansatz, roughness and noise scale included, with its value and what limits it."""
    analysis = made_analysis(names=("power-law:corrected",))
    limited = replace(analysis.comparison.fits[0], prior_limited=("omega",))
    analysis = replace(analysis, comparison=replace(analysis.comparison, fits=(limited,)))
    rows = details.posteriors(analysis).rows
    assert [row[1] for row in rows] == ["W_c", "nu", "omega", "tau", "s"]
    assert rows[0][2:] == ("16.53(12)", "[16.41, 16.65]", "[16.29, 16.77]", "no")
    assert rows[2][-1] == "yes"


def test_what_the_result_does_not_show():
    """The sentences depend on verdict, sizes, forms and settings."""
    supported = " ".join(limits(made_analysis(settings=Settings(quick=True))))
    undecided = " ".join(limits(made_analysis(code="undecided")))
    assert "the sizes run from 6 to 14" in supported
    assert "The two best drift laws part only at size 31." in supported
    assert "holds only if one exists" in undecided
    assert "holds only if one exists" not in supported
    assert "with --quick there is no chain" in supported
    assert "--quick" not in undecided
    assert "How forms whose crossover moves on with size or forms without any critical disorder" in supported
    assert "no false-alarm rate was measured" in supported
    analysis = made_analysis()
    measured = replace(analysis, verdict=replace(analysis.verdict, false_alarm=rates()))
    unlike = replace(analysis, verdict=replace(analysis.verdict, false_alarm=replace(rates(), alike=False)))
    assert "no false-alarm rate" in " ".join(limits(unlike))
    assert "no false-alarm rate" not in " ".join(limits(measured))


def rates():
    """Measured rates, three wrong in four hundred each."""
    return FalseAlarm(0.02, (6.0, 14.0), *[Count(3, 400)] * 5, True)


def test_measured_rates_stand_beside_the_verdict(tmp_path):
    """How often verdicts were wrong on simulated data is part of the verdict's box."""
    analysis = made_analysis()
    shown = page(replace(analysis, verdict=replace(analysis.verdict, false_alarm=rates())), tmp_path)
    box = shown[shown.index('<div class="verdict good">') : shown.index('id="numbers"')]
    assert f"<p>{escape(rates().sentence)}</p>" in box


@pytest.mark.parametrize(
    ("mathtext", "html"),
    [
        (r"\langle r\rangle", "⟨<i>r</i>⟩"),
        (r"S_{\mathrm{half}}", "<i>S</i><sub>half</sub>"),
        (r"$L^{1/\nu}$", "<i>L</i><sup>1/<i>ν</i></sup>"),
        (r"\Delta_<", "<i>Δ</i><sub>&lt;</sub>"),
        (r"\overline{r}\,t", '<span style="text-decoration:overline"><i>r</i></span>\N{THIN SPACE}<i>t</i>'),
        (r"{{W}_c", "<i>W</i><sub><i>c</i></sub>"),
        (r"a}b_", "<i>a</i><i>b</i>_"),
        (r"\unheard <script>", "unheard&lt;"),
    ],
)
def test_symbols(mathtext, html):
    """Greek letters, indices and powers are set; unmatched braces and unknown commands do no harm."""
    assert mathtext_to_html(mathtext).startswith(html)


def test_size_of_the_page(text):
    """Small enough to be sent by mail: two figures and the panel take less than a megabyte, scripts under 30 kB."""
    assert len(text.encode()) < 1_000_000
    assert sum(len(resource(name)) for name in SCRIPTS) < 30_000
