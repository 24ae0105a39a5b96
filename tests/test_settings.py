"""Settings from defaults, TOML and options, and the sentences for what cannot be used."""

import re

import numpy as np
import pytest

from driftline.curves import Curve, Curves
from driftline.errors import ConfigurationError, suggestion
from driftline.report.configuration import to_toml
from driftline.scaling.defaults import DEFAULT_ANSATZE
from driftline.settings import MIN_DRAWS, Settings


def refusal(text):
    """Match the whole of an error message."""
    return pytest.raises(ConfigurationError, match=f"^{re.escape(text)}$")


def write(folder, text):
    """A TOML file with this text."""
    path = folder / "run.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_defaults():
    """Without a word from the user every ansatz of the default list is compared on all of the data."""
    settings = Settings.resolve()
    assert settings == Settings()
    assert settings.ansatze == DEFAULT_ANSATZE
    assert (settings.window, settings.smallest_size, settings.seed, settings.quick) == (None, None, 0, False)


def test_options_override_the_file_and_the_file_the_defaults(tmp_path):
    """The command line wins over the file, key by key, and an option that is None counts as not given."""
    file = write(tmp_path, 'seed = 5\nwindow = [14, 19]\nansatze = ["power-law"]\n[labels]\ndisorder_unit = "t"\n')
    settings = Settings.resolve(file, {"seed": 6, "window": None, "quick": True})
    assert settings.seed == 6
    assert settings.window == (14.0, 19.0)
    assert settings.ansatze == ("power-law",)
    assert settings.labels == {"disorder_unit": "t"}
    assert settings.quick


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("sead = 1", "{file}: unknown key 'sead'; did you mean seed?"),
        ("seed = -1", "{file}, seed: must be at least 0, not -1"),
        ("seed = true", "{file}, seed: must be a whole number, not True"),
        ("jobs = 0", "{file}, jobs: must be at least 1, not 0"),
        ("draws = 10", f"{{file}}, draws: must be at least {MIN_DRAWS}, not 10"),
        ('quick = "yes"', "{file}, quick: must be true or false, not 'yes'"),
        ("window = [19, 14]", "{file}, window: the low end 19 must lie below the high end 14"),
        ("window = [14]", "{file}, window: must be two numbers, low and high, not [14]"),
        ("window = [14, nan]", "{file}, window: must be a finite number, not nan"),
        ("smallest_size = 0", "{file}, smallest_size: must be positive, not 0"),
        ('ansatze = "power-law"', "{file}, ansatze: must be a list of names, not 'power-law'"),
        ("ansatze = []", "{file}, ansatze: is empty; give at least one ansatz or leave the key out"),
        ("ansatze = [3]", "{file}, ansatze: must be a list of names, but holds 3"),
        (
            'ansatze = ["power-law", "power-law"]',
            "{file}, ansatze: 'power-law' is given twice; give each ansatz once",
        ),
        ("labels = 3", "{file}, labels: must be a table of labels, not 3"),
        (
            "[labels]\nobservabel = 'r'",
            "{file}, labels: unknown label 'observabel'; did you mean observable or observable_symbol?",
        ),
        ("[labels]\nergodic_value = 'x'", "{file}, labels.ergodic_value: must be a finite number, not 'x'"),
        ("[labels]\nobservable = 3", "{file}, labels.observable: must be text, not 3"),
        ("[labels]\ndimension = -1", "{file}, labels: dimension must be positive, not -1"),
    ],
)
def test_what_cannot_be_used_is_named_with_its_place(tmp_path, text, sentence):
    """Every bad value is refused with file, key, rule and value."""
    file = write(tmp_path, text)
    with refusal(sentence.format(file=file)):
        Settings.resolve(file)


def test_unknown_ansatz_gets_a_suggestion(tmp_path):
    """A misspelt ansatz is refused with the place and the nearest name."""
    with pytest.raises(ConfigurationError, match=r"^option --ansatz: .*did you mean 'corrected'\?$"):
        Settings.resolve(None, {"ansatze": ("power-law:corected",)})
    with pytest.raises(ConfigurationError, match=r"^ansatze: .*'powerlaw'.*did you mean 'power-law'\?$"):
        Settings(ansatze=("powerlaw",))


def test_malformed_toml_is_refused_with_the_line(tmp_path):
    """A syntax error is reported where it stands."""
    file = write(tmp_path, "seed = 1\nwindow = [14, \nquick")
    with pytest.raises(ConfigurationError, match=rf"^{re.escape(str(file))}: is not valid TOML: .*line 3"):
        Settings.resolve(file)


def test_unreadable_files_are_refused(tmp_path):
    """A missing file, a folder and text in another encoding get one sentence each."""
    missing = tmp_path / "none.toml"
    with refusal(f"{missing}: there is no such file; check the path"):
        Settings.resolve(missing)
    with refusal(f"{tmp_path}: this is a folder; give a file"):
        Settings.resolve(tmp_path)
    latin = tmp_path / "latin.toml"
    latin.write_bytes(b"[labels]\ndisorder_unit = '\xb5eV'\n")
    with refusal(f"{latin}, line 2: byte 0xb5 is not valid UTF-8; save the file as UTF-8"):
        Settings.resolve(latin)


@pytest.mark.parametrize(
    "settings",
    [
        Settings(),
        Settings(("power-law",), (14.1, 19.0), 8.0, 11, True, 2, {}, 500),
        Settings(smallest_size=1e-7, labels={"observable": 'a "quoted" \\r \u00e4', "ergodic_value": None}),
        Settings(labels={"dimension": 3, "disorder_kind": "none", "localised_value": 0.3863}),
    ],
)
def test_configuration_file_gives_the_settings_back(tmp_path, settings):
    """What is written as TOML is read back as an equal object, quotes and backslashes included."""
    assert Settings.resolve(write(tmp_path, to_toml(settings))) == settings


def curves():
    """Three sizes on one grid."""
    grid = np.linspace(1.0, 5.0, 9)
    return Curves([Curve(size, grid, np.tanh(3 - grid) * size, np.full(9, 0.1)) for size in (8, 12, 16)])


def test_select_keeps_the_asked_part():
    """Window and smallest size cut the curves, ends included."""
    part = Settings(window=(2.0, 4.0), smallest_size=12.0).select(curves())
    assert part.sizes.tolist() == [12.0, 16.0]
    assert part.disorder_range == (2.0, 4.0)


def test_select_says_what_is_left_when_it_is_too_little():
    """A smallest size that leaves one size, and a window that leaves too few disorders, are refused with the remedy."""
    with refusal("smallest size 16 leaves 1 of the sizes 8, 12, 16, and 2 are needed; choose 12 or less"):
        Settings(smallest_size=16.0).select(curves())
    with pytest.raises(ConfigurationError, match=r"^size 8: the window from 2 to 2\.9 holds 2 .*widen the window"):
        Settings(window=(2.0, 2.9)).select(curves())


def test_suggestions():
    """Near names are offered; where nothing is near, all of them."""
    assert suggestion("smalest_size", ["smallest_size", "seed"]) == "did you mean smallest_size?"
    assert suggestion("zzz", ["seed", "jobs"]) == "known are: seed, jobs"
