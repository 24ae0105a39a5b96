"""The page in a browser: the scripts compute what Python computes, and a person can use the panel."""

from __future__ import annotations

import json
import re
from itertools import pairwise

import numpy as np
import pytest
from analyses import made_analysis, made_curves
from browser import Browser, executable
from pages import HOSTILE, draw

from driftline.collapse import UNDERSMOOTHING
from driftline.curves import Curve, Curves
from driftline.report.page import page
from driftline.report.page.panel import FORMS, LENGTHS, TRAJECTORIES, ansatz_parts, model_constants, panel_data
from driftline.scaling.ansatz import available, parse_ansatz
from driftline.scaling.likelihood import Posterior

NAMES = ("power-law", "kt:linear-drift:corrected", "size-independent", "power-law:corrected")
#: Whatever a page says by itself when something is wrong with it.
COMPLAINTS = ("Runtime.exceptionThrown", "Log.entryAdded", "Runtime.consoleAPICalled")
EPSILON = np.finfo(float).eps


@pytest.fixture(scope="module")
def browser():
    """One browser for all tests of this file; without Chromium they fail with a sentence that says how to get it."""
    opened = Browser()
    yield opened
    opened.close()


@pytest.fixture(scope="module")
def analysis():
    """The analysis behind the page."""
    return made_analysis(code="undecided", names=NAMES)


@pytest.fixture(scope="module")
def pictures(tmp_path_factory):
    """A folder with one figure, whose labels are hostile."""
    return draw(made_analysis(made_curves().relabel(**HOSTILE)), tmp_path_factory.mktemp("figures"), "curves")


@pytest.fixture(scope="module")
def file(analysis, pictures):
    """A page on disk."""
    (pictures / "report.html").write_text(page(analysis, pictures), encoding="utf-8")
    return pictures / "report.html"


@pytest.fixture
def still(browser, file):
    """The page in a wide window, to be looked at; opened again only where another page has come in between."""
    if browser.run("location.href") != file.as_uri():
        browser.open(file)
    return browser


@pytest.fixture
def panel(still, analysis):
    """The same page, to be used: afterwards every control is put back by its own means."""
    yield still
    start = panel_data(analysis)["start"]
    still.run(
        f"for (const index of [0, 1, 2, 3, {start}]) {{ const choice = document.getElementById('panel-ansatz');"
        " choice.value = index; choice.dispatchEvent(new Event('change'));"
        " document.getElementById('panel-reset').click(); }"
    )


@pytest.fixture
def fresh(browser, file):
    """The page just opened."""
    browser.open(file)
    return browser


@pytest.fixture(autouse=True)
def restored(browser):
    """Whatever a test asked of the window is taken back."""
    yield
    browser.send("Emulation.setEmulatedMedia", media="", features=[])
    browser.resize(1280)


def test_a_missing_browser_is_named(monkeypatch):
    """Without Chromium the tests of this file fail, and say what to install."""
    monkeypatch.setenv("PATH", "")
    with pytest.raises(RuntimeError, match=r"need the browser Chromium, which is not installed; on Debian: apt-get"):
        executable()


# --- the scripts compute what Python computes -------------------------------------------------------------------


def correlated(curves):
    """The same curves with errors correlated between neighbouring disorders."""
    return Curves(
        [
            Curve(c.size, c.disorder, c.mean, c.error,
                  np.outer(c.error, c.error) * 0.6 ** np.abs(np.subtract.outer(range(c.mean.size), range(c.mean.size))))
            for c in curves.curves
        ],
        curves.labels,
    )  # fmt: skip


def refit(curves, ansatz, z, log_tau):
    """What the panel shows, from the classes of the analysis, with the tolerance that the conditioning asks for."""
    posterior = Posterior(curves, ansatz, log_tau=log_tau)
    size, disorder, mean, error = curves.flat()
    coefficients, _ = posterior.coefficients(z)
    design = posterior.design(z[None])[0, :, :-1]
    scale = ansatz.amplitude(z[None], size, curves.sizes)
    amplitude = np.ones(size.size) if scale is None else scale[0]
    count = posterior.function.count
    fitted = amplitude * posterior.centre + posterior.spread * design @ coefficients
    offsets, start, misfit = mean - fitted, 0, 0.0
    for curve in curves.curves:
        part = slice(start, start + curve.mean.size)
        misfit += offsets[part] @ np.linalg.solve(curve.noise, offsets[part])
        start = part.stop
    values = {name: float(value[0, 0]) for name, value in ansatz.values(z[None]).items()}
    return values, {
        "x": ansatz.scaled(z[None], size, disorder, curves.sizes)[0] * ansatz.form.unit(curves.sizes, values),
        "y": (mean - posterior.spread * design[:, count:] @ coefficients[count:]) / amplitude,
        "error": error / amplitude,
        "fitted": fitted,
        "residual": offsets / error,
        "misfit": misfit / size.size,
    }, float(np.linalg.cond(posterior.system(z[None])[0][:-1, :-1]))  # fmt: skip


def script_refit(browser, curves, ansatz, values, log_tau, log_s):
    """The same from the scripts of the page."""
    _, disorder, mean, error = curves.flat()
    lower = [
        None if c.covariance is None else c.covariance[np.tril_indices(c.mean.size)].tolist() for c in curves.curves
    ]
    data = {
        "sizes": curves.sizes.tolist(),
        "counts": [c.mean.size for c in curves.curves],
        "points": {"size": curves.flat()[0].tolist(), "disorder": disorder.tolist(), "mean": mean.tolist(),
                   "error": error.tolist()},
        "covariances": lower,
        "model": model_constants(Posterior(curves, ansatz)),
    }  # fmt: skip
    fit = {**ansatz_parts(ansatz), "tau": float(np.exp(log_tau)), "s": float(np.exp(log_s))}
    return browser.run(
        f"(() => {{ const data = {json.dumps(data)}; return Refit.at(data, {json.dumps(fit)}, {json.dumps(values)}, "
        "Refit.whitener(data)); })()"
    )


def compare(browser, curves, name, rng):
    """Largest deviation of the script from Python at one draw of the prior, over what rounding allows."""
    ansatz = parse_ansatz(name, curves)
    unit = rng.uniform(0.2, 0.8, (1, len(ansatz.parameters)))
    physical = [each.prior.quantile(unit[:, [i]])[0, 0] for i, each in enumerate(ansatz.parameters)]
    log_tau, log_s = np.log(0.05), np.log(1.1)
    z = np.array([*physical, log_s])
    values, expected, condition = refit(curves, ansatz, z, log_tau)
    found = script_refit(browser, curves, ansatz, values, log_tau, log_s)
    # x takes a dozen operations, one of them an exponential of an argument up to a thousand or so; what the fit gives
    # carries the relative error epsilon times the condition number of the normal matrix, in units of its largest value
    allowed = {"x": 1e4 * EPSILON, **dict.fromkeys(("y", "error", "fitted"), 10 * condition * EPSILON)}
    allowed.update(dict.fromkeys(("residual", "misfit"), 10 * condition * EPSILON * np.ptp(curves.flat()[2]) / 1e-3))
    return {
        each: float(np.max(np.abs(np.asarray(found[each]) - value)) / np.max(np.abs(value)) / allowed[each])
        for each, value in expected.items()
    }


def test_the_scripts_agree_with_python(still):
    """Every ansatz on offer, with free and held amplitude too: x, corrected points, fitted curve, residuals, misfit."""
    curves, rng = made_curves((6, 8, 10, 14)), np.random.default_rng(3)
    names = [*available(), "power-law:amplitude", "kt:corrected:amplitude=-0.3"]
    worst = {name: max(compare(still, curves, name, rng).values()) for name in names}
    assert len(names) > 30
    assert {name: value for name, value in worst.items() if value > 1} == {}


def test_the_scripts_agree_with_python_on_correlated_points(still):
    """The covariance of the points of a size is used as the analysis uses it; without it the result differs."""
    curves = correlated(made_curves((6, 8, 10, 14)))
    assert max(compare(still, curves, "power-law:corrected", np.random.default_rng(4)).values()) <= 1
    bare = Curves([Curve(c.size, c.disorder, c.mean, c.error) for c in curves.curves], curves.labels)
    ansatz = parse_ansatz("power-law:corrected", curves)
    z = np.array([16.0, 0.3, 0.0, 0.0])
    values, expected, _ = refit(curves, ansatz, z, -3.0)
    assert abs(script_refit(still, bare, ansatz, values, -3.0, 0.0)["misfit"] / expected["misfit"] - 1) > 0.01


def test_another_exponent_is_noticed(still):
    """Negative control: a hundredth of a per cent in nu is far outside what the comparison allows."""
    curves = made_curves((6, 8, 10, 14))
    ansatz = parse_ansatz("power-law", curves)
    values, expected, _ = refit(curves, ansatz, np.array([16.0, 0.3, 0.0]), -3.0)
    found = script_refit(still, curves, ansatz, {**values, "nu": values["nu"] * 1.0001}, -3.0, 0.0)
    assert np.max(np.abs(np.array(found["x"]) - expected["x"])) > 1e-6


def test_the_scripts_know_the_parts_that_python_says(still):
    """The names of lengths, trajectories and forms are those in `panel.py`."""
    assert still.run("Scaling.parts") == {"lengths": [*LENGTHS], "trajectories": [*TRAJECTORIES], "forms": [*FORMS]}


def test_the_panel_opens_at_the_posterior_median(still, analysis):
    """The misfit that is shown is chi-squared per point of the headline form at its medians, with tau as in the fit."""
    data = panel_data(analysis)
    fit = data["fits"][data["start"]]
    z = np.array([16.53, np.log(1.57), np.log(1.0), np.log(1.0)])
    headline = parse_ansatz("power-law:corrected", analysis.curves)
    _, expected, _ = refit(analysis.curves, headline, z, np.log(0.02) + UNDERSMOOTHING)
    assert fit["tau"] == pytest.approx(0.02 * np.e)
    shown = still.run("document.getElementById('panel-misfit').textContent")
    assert float(shown) == pytest.approx(expected["misfit"], rel=0.005)  # three digits are shown
    assert still.run("document.getElementById('panel-reference').textContent") == shown


# --- a person uses it -------------------------------------------------------------------------------------------


def state(panel):
    """Picture and misfit as they are shown now."""
    return panel.run(
        "[document.getElementById('panel-plot').innerHTML, document.getElementById('panel-misfit').textContent]"
    )


def write(panel, text):
    """Type into the element that the keyboard acts on."""
    for character in text:
        panel.press(character, text=character)


def focused(panel):
    """Id of the element that the keyboard acts on."""
    return panel.run("document.activeElement.id")


def test_arrow_keys_on_a_slider_move_points_and_reset_brings_them_back(panel):
    """Picture and misfit follow the slider; the button, pressed by keyboard, restores both exactly."""
    panel.run("document.getElementById('panel-ansatz').focus()")
    panel.press("End", 35)  # the last choice is the plain power law, which has no correction to hide a wrong W_c
    before = state(panel)
    assert panel.run("document.querySelectorAll('#panel-plot .marker').length") == 2 * 65
    panel.run("document.getElementById('slider-3-0').focus()")
    panel.press("ArrowRight", 39)
    assert state(panel)[0] != before[0]
    panel.press("End", 35)  # ten standard errors from where the points were made to fall together
    moved = state(panel)
    assert float(moved[1]) > 2 * float(before[1])
    assert panel.run("document.getElementById('number-3-0').value") != "16.53"
    assert panel.run("document.getElementById('panel-status').textContent") == f"chi-squared per point {moved[1]}"
    panel.run("document.getElementById('panel-reset').focus()")
    panel.press("Enter", 13, text="\r")
    assert state(panel) == before
    assert panel.run("document.getElementById('number-3-0').value") == "16.53"


def test_a_key_that_means_nothing_moves_nothing(panel):
    """Negative control of the test above."""
    before = state(panel)
    panel.run("document.getElementById('slider-0-0').focus()")
    panel.press("F2", 113)
    assert state(panel) == before


def test_a_mouse_moves_the_slider(panel):
    """A click near the left end takes the parameter there, and its number field follows."""
    before = state(panel)
    panel.run("document.getElementById('slider-0-0').scrollIntoView({behavior: 'instant', block: 'center'})")
    box = panel.run(
        "(b => [b.x, b.y, b.width, b.height])(document.getElementById('slider-0-0').getBoundingClientRect())"
    )
    for kind in ("mousePressed", "mouseReleased"):
        panel.send("Input.dispatchMouseEvent", type=kind, x=box[0] + 0.1 * box[2], y=box[1] + box[3] / 2,
                   button="left", clickCount=1)  # fmt: skip
    assert state(panel)[0] != before[0]
    # the slider runs from 16.53 - 1.19 to 16.53 + 1.19; a tenth of it, give or take the width of the knob
    assert float(panel.run("document.getElementById('number-0-0').value")) == pytest.approx(15.57, abs=0.06)


def test_typing_a_number(panel):
    """A number in the field moves the points and the slider; one outside the prior is marked and changes nothing."""
    before = state(panel)
    panel.run("document.getElementById('number-0-1').select()")
    write(panel, "2.5")
    moved = state(panel)
    assert moved[0] != before[0]
    assert float(panel.run("document.getElementById('slider-0-1').getAttribute('aria-valuetext')")) == 2.5
    write(panel, "00")
    assert float(panel.run("document.getElementById('number-0-1').value")) == 2.5  # 2.500
    panel.run("document.getElementById('number-0-1').select()")
    write(panel, "99")
    after = state(panel)
    assert panel.run("document.getElementById('number-0-1').getAttribute('aria-invalid')") == "true"
    complaint = panel.run(
        "(e => [e.textContent, e.getBoundingClientRect().height > 10])(document.getElementById('panel-status'))"
    )
    assert complaint[0].startswith("nu: Value must be less than or equal to 10")
    assert complaint[1]  # for everybody to see, where the usual account is for screen readers
    nine = panel.run("Number(document.getElementById('slider-0-1').getAttribute('aria-valuetext'))")
    assert nine == 9  # the first 9 lies inside the prior, 99 does not
    panel.press("Backspace", 8)
    assert state(panel) == after
    assert panel.run("document.getElementById('number-0-1').getAttribute('aria-invalid')") is None


def test_everything_is_reached_by_tab(panel):
    """From the choice of ansatz, the tabulator reaches each slider, its number and the button, in that order."""
    panel.run("document.getElementById('panel-ansatz').focus()")
    reached = [focused(panel)]
    while reached[-1] != "panel-reset" and len(reached) < 20:
        panel.press("Tab", 9)
        reached.append(focused(panel))
    pairs = [f"{kind}-0-{order}" for order in range(3) for kind in ("slider", "number")]
    assert reached == ["panel-ansatz", *pairs, "panel-reset"]
    outline = panel.run("(s => [s.outlineStyle, parseFloat(s.outlineWidth)])(getComputedStyle(document.activeElement))")
    assert outline == ["solid", 3]


def test_choosing_another_ansatz(panel):
    """Arrow keys on the choice show the controls and the picture of each ansatz in turn, and of no other."""
    panel.run("document.getElementById('panel-ansatz').focus()")
    pictures = [state(panel)[0]]
    for index in range(1, len(NAMES)):
        panel.press("ArrowDown", 40)
        shown = "Array.from(document.querySelectorAll('fieldset:not([hidden])'), e => e.dataset.fit)"
        assert panel.run(shown) == [str(index)]
        pictures.append(state(panel)[0])
    assert len(set(pictures)) == len(NAMES)
    assert panel.run("Array.from(document.querySelectorAll('.abscissa span:not([hidden])')).length") == 1


# --- what the browser says of the page --------------------------------------------------------------------------


def test_no_complaint_and_no_network(fresh, file):
    """After use there is no error on the console, and nothing was asked for but the file itself."""
    fresh.run("document.getElementById('panel-reset').click()")
    fresh.resize(360)
    fresh.run("new Promise(done => requestAnimationFrame(() => requestAnimationFrame(done)))")
    assert fresh.reported(*COMPLAINTS) == []
    asked = [each["request"]["url"] for each in fresh.reported("Network.requestWillBeSent")]
    assert asked == [file.as_uri()]


def test_the_policy_lets_nothing_in(fresh, file):
    """Negative control of the test above: neither script, handler nor picture from elsewhere gets past the policy."""
    fresh.run(
        "document.body.insertAdjacentHTML('beforeend', '<img src=\"https://example.org/x\" onerror=\"harmed = 1\">');"
        "document.body.append(Object.assign(document.createElement('script'), {textContent: 'window.harmed = 2'}));"
        "new Promise(done => setTimeout(done, 100))"
    )
    assert fresh.run("window.harmed") is None
    assert len(fresh.reported("Log.entryAdded")) >= 2
    assert not [e for e in fresh.reported("Network.responseReceived") if "example.org" in e["response"]["url"]]
    fresh.open(file)


def test_hostile_text_is_shown_and_not_run(browser, pictures, tmp_path):
    """Labels that try to break out of title, script, table, figure and panel appear letter by letter."""
    attacked = made_analysis(made_curves().relabel(**HOSTILE))
    (tmp_path / "report.html").write_text(page(attacked, pictures), encoding="utf-8")
    browser.open(tmp_path / "report.html")
    assert browser.run("window.harmed") is None
    assert browser.run("document.querySelectorAll('script').length") == 2
    assert browser.run("document.querySelectorAll('img').length") == 0
    assert browser.run("document.title") == f"driftline: {HOSTILE['observable']}"
    assert browser.run("document.querySelector('h1').textContent").endswith(HOSTILE["observable"])
    assert "window.harmed" in browser.run("document.querySelector('.abscissa').textContent")
    assert browser.run("document.querySelectorAll('#panel-plot .marker').length") == 2 * 65
    assert browser.reported(*COMPLAINTS) == []


@pytest.mark.parametrize("width", [360, 1280])
def test_the_page_fits_its_window(still, width):
    """Nothing makes the page itself scroll sideways; a wide element would, so the measure can fail."""
    still.resize(width, 740)
    reach = "document.documentElement.scrollWidth"
    assert still.run(reach) <= width
    still.run("document.querySelector('main').append(Object.assign(document.createElement('div'), {id: 'wide'}))")
    still.run("document.getElementById('wide').style.cssText = 'width: 3000px; height: 1px'")
    assert still.run(reach) > width
    still.run("document.getElementById('wide').remove()")


def test_letters_of_the_picture_keep_their_size_on_a_phone(still):
    """The panel is drawn in pixels of the window, so that its letters do not shrink with it."""
    height = "document.querySelector('#panel-plot text').getBoundingClientRect().height"
    wide = still.run(height)
    still.resize(360, 740)
    still.run("new Promise(done => requestAnimationFrame(() => requestAnimationFrame(done)))")
    assert still.run(height) == pytest.approx(wide, abs=0.5)
    assert still.run("document.getElementById('panel-plot').getBoundingClientRect().width") < 330


CONTRAST = """
(() => {
  const parse = (text) => text.match(/[\\d.]+/g).map(Number);
  const light = ([r, g, b]) => [r, g, b].map((v) => v / 255)
    .map((v) => (v <= 0.04045 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4))
    .reduce((sum, v, i) => sum + v * [0.2126, 0.7152, 0.0722][i], 0);
  const behind = (element) => {
    for (let at = element; at; at = at.parentElement) {
      const colour = parse(getComputedStyle(at).backgroundColor);
      if (colour.length === 3 || colour[3] > 0) return colour;
    }
    return [255, 255, 255];
  };
  const found = [];
  for (const element of document.querySelectorAll('body *:not(svg *):not(script)')) {
    const own = Array.from(element.childNodes).some((node) => node.nodeType === 3 && node.textContent.trim());
    if (!own && element.tagName !== 'INPUT') continue;
    const pair = [light(parse(getComputedStyle(element).color)), light(behind(element))].sort((a, b) => b - a);
    found.push([(pair[0] + 0.05) / (pair[1] + 0.05), element.tagName + '.' + element.className]);
  }
  return found.sort((a, b) => a[0] - b[0]);
})()
"""


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_contrast(still, scheme):
    """Text has a contrast of 4.5 to what is behind it (WCAG 2.2, criterion 1.4.3), in a light and in a dark window."""
    still.send("Emulation.setEmulatedMedia", features=[{"name": "prefers-color-scheme", "value": scheme}])
    found = still.run(CONTRAST)
    assert len(found) > 100
    assert [each for each in found if each[0] < 4.5] == []
    still.run("document.querySelector('h1').style.color = '#888888'")  # 3.5 on white; on the dark ground 5
    still.run("document.querySelector('h1').style.backgroundColor = '#ffffff'")
    assert still.run(CONTRAST)[0][0] < 4.5
    still.run("document.querySelector('h1').style.cssText = ''")


def test_headings_are_in_order(still):
    """One first heading, and no level is skipped on the way down."""
    levels = still.run("Array.from(document.querySelectorAll('h1,h2,h3,h4'), e => Number(e.tagName[1]))")
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))
    assert set(levels) == {1, 2, 3}


def test_controls_have_names(still):
    """The browser's own account of the page for screen readers names every control and figure."""
    nodes = still.send("Accessibility.getFullAXTree")["nodes"]
    roles = ("slider", "spinbutton", "combobox", "button", "image", "region", "link", "table")
    about = [(n["role"]["value"], n.get("name", {}).get("value", "")) for n in nodes if not n.get("ignored")]
    named = [each for each in about if each[0] in roles]
    assert [role for role, name in named if not name] == []
    assert {"slider", "spinbutton", "combobox", "button", "image", "table"} <= {role for role, _ in named}
    assert ("slider", "Wc: critical disorder") in named


def test_still_for_those_who_ask_for_it(still):
    """Smooth scrolling is off where the reader prefers reduced motion, and nothing else moves by itself."""
    moves = "[getComputedStyle(document.documentElement).scrollBehavior, document.getAnimations().length]"
    assert still.run(moves) == ["smooth", 0]
    still.send("Emulation.setEmulatedMedia", features=[{"name": "prefers-reduced-motion", "value": "reduce"}])
    assert still.run(moves) == ["auto", 0]


def test_print(still):
    """On paper there is no still, no contents and nothing cut off; the verdict and every table are."""
    shown = (
        "Object.fromEntries(['#panel-section', 'nav', '#verdict', '#tables', '#limits'].map("
        "name => [name, document.querySelector(name).getClientRects().length > 0]))"
    )
    assert all(still.run(shown).values())
    still.send("Emulation.setEmulatedMedia", media="print")
    still.resize(680)  # the text width of A4 in CSS pixels
    assert still.run(shown) == {
        "#panel-section": False, "nav": False, "#verdict": True, "#tables": True, "#limits": True,
    }  # fmt: skip
    assert still.run("Math.max(...Array.from(document.querySelectorAll('table'), e => e.scrollWidth))") <= 680
    assert still.run("document.documentElement.scrollWidth") <= 680
    pdf = still.send("Page.printToPDF", paperWidth=8.27, paperHeight=11.69)["data"]
    assert pdf.startswith("JVBERi0")  # %PDF-


def test_without_javascript(browser, file):
    """Everything but the panel is there, and a sentence says what is missing."""
    browser.send("Emulation.setScriptExecutionDisabled", value=True)
    try:
        browser.open(file)
        root = browser.send("DOM.getDocument")["root"]["nodeId"]
        boxes = {}
        for name in ("panel", "panel-fallback", "verdict"):
            node = browser.send("DOM.querySelector", nodeId=root, selector=f"#{name}")["nodeId"]
            attributes = browser.send("DOM.getAttributes", nodeId=node)["attributes"]
            boxes[name] = "hidden" in attributes
        assert boxes == {"panel": True, "panel-fallback": False, "verdict": False}
    finally:
        browser.send("Emulation.setScriptExecutionDisabled", value=False)
        browser.open(file)


def test_the_picture_is_where_the_numbers_are(still):
    """The markers stand at the x of the corrected points: their order from left to right is that of x, to a pixel."""
    places = still.run(
        "Array.from(document.querySelectorAll('#panel-plot .marker'), e => e.getAttribute('transform'))"
    )[::2]
    pixels = np.array([[float(number) for number in re.findall(r"[-\d.]+", each)] for each in places])
    curves = made_curves()
    size, disorder, mean, _ = curves.flat()
    x = (disorder - 16.53) * size ** (1 / 1.57)
    slope, offset = np.polyfit(x, pixels[:, 0], 1)
    assert slope > 0
    assert np.max(np.abs(slope * x + offset - pixels[:, 0])) < 0.02  # written to a hundredth of a pixel
    assert np.corrcoef(mean, pixels[:, 1])[0, 1] < -0.99  # downwards on the screen; the correction shifts a little
