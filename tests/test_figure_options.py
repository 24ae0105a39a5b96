"""The table `[figure]`: what can be asked of figures, and the sentences for what cannot."""

import re

import pytest

from driftline.errors import ConfigurationError
from driftline.figure_options import FIGURE_NAMES, LARGEST_STYLE, FigureOptions, read_style
from driftline.report.configuration import to_toml
from driftline.settings import Settings


def refusal(text):
    """Match the whole of an error message."""
    return pytest.raises(ConfigurationError, match=f"^{re.escape(text)}$")


def resolve(folder, text):
    """Settings from a TOML file with this text."""
    (folder / "run.toml").write_text(text, encoding="utf-8")
    return Settings.resolve(folder / "run.toml")


def test_options_are_read_and_written_back(tmp_path):
    """Every option reaches the settings, and the resolved configuration gives them back from another folder."""
    (tmp_path / "paper.mplstyle").write_text("font.size: 7\n")
    settings = resolve(
        tmp_path,
        '[figure]\nwidth = "single"\nformat = "svg"\nfont_size = 7.5\nfigures = ["misfit", "curves"]\n'
        'style = "paper.mplstyle"\n',
    )
    options = settings.figure
    assert options == FigureOptions("single", ("svg",), 7.5, ("curves", "misfit"), str(tmp_path / "paper.mplstyle"))
    (tmp_path / "elsewhere").mkdir()
    assert resolve(tmp_path / "elsewhere", to_toml(settings)) == settings


def test_defaults():
    """All figures at their own widths, as PDF and PNG; no option of figures is part of the numbers' configuration."""
    options = Settings().figure
    assert (options.inches, options.format, options.figures) == (None, ("pdf", "png"), FIGURE_NAMES)
    assert "figure" not in Settings().to_dict()
    assert FigureOptions(width=4).inches == 4.0


@pytest.mark.parametrize(
    ("line", "sentence"),
    [
        ("widht = 3", "unknown key 'widht'; did you mean width?"),
        ('width = "tripel"', '.width: must be "single", "double" or inches from 2.5 to 20, not \'tripel\''),
        ("width = 0.1", '.width: must be "single", "double" or inches from 2.5 to 20, not 0.1'),
        ("font_size = 50", ".font_size: must be points from 5 to 16, not 50"),
        ("font_size = true", ".font_size: must be points from 5 to 16, not True"),
        ('format = ["pfd"]', ".format: there is no 'pfd'; did you mean pdf?"),
        ("format = 3", ".format: must be a list of names, not 3"),
        ("figures = []", f".figures: is empty; give at least one of {', '.join(FIGURE_NAMES)} or leave the key out"),
        ('figures = ["colapse"]', ".figures: there is no 'colapse'; did you mean collapse?"),
        ("style = 3", ".style: must be the path of a matplotlib style file, not 3"),
    ],
)
def test_what_cannot_be_used_is_named_with_its_place(tmp_path, line, sentence):
    """Every bad value is refused with file, key, rule and value."""
    place = f"{tmp_path / 'run.toml'}, figure"
    with refusal(f"{place}{sentence}" if sentence.startswith(".") else f"{place}: {sentence}"):
        resolve(tmp_path, f"[figure]\n{line}\n")


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"font.size: 7\nfont.seize: 7\n", ", line 2: matplotlib has no setting 'font.seize'; did you mean font.size?"),
        (b"what is this", ", line 1: must read 'name: value', not 'what is this'"),
        (b"text.usetex: True", ", line 1: text.usetex is not supported, for labels are mathtext; leave it out "
         "(mathtext.fontset: cm has the letters of TeX)"),
        (b"\xff\xfe", ": is not UTF-8 text at byte 1; save it as UTF-8"),
        (b"#" * (LARGEST_STYLE + 1), f": is larger than {LARGEST_STYLE} bytes, too large for a style file"),
    ],
)  # fmt: skip
def test_a_bad_style_file_is_refused_with_its_line(tmp_path, content, sentence):
    """A misspelt setting is not passed over, as matplotlib itself would with a note."""
    path = tmp_path / "bad.mplstyle"
    path.write_bytes(content)
    with refusal(f"{path}{sentence}"):
        FigureOptions(style=str(path))


def test_a_bad_value_in_a_style_file_is_refused(tmp_path):
    """The reason is matplotlib's own, after file and line."""
    path = tmp_path / "bad.mplstyle"
    path.write_text("lines.linewidth: thick\n")
    with pytest.raises(ConfigurationError, match=rf"^{re.escape(str(path))}, line 1: .*'thick'"):
        read_style(path)


def test_a_missing_style_file_is_refused(tmp_path):
    """Before anything is computed."""
    path = tmp_path / "none.mplstyle"
    with refusal(f"{path}: cannot be read (No such file or directory); give a matplotlib style file"):
        resolve(tmp_path, '[figure]\nstyle = "none.mplstyle"\n')


def test_comments_quotes_and_settings_without_looks(tmp_path):
    """Comments end a line, a quoted hash sign does not begin one, and the backend is not the style's business."""
    path = tmp_path / "good.mplstyle"
    path.write_text('# mine\naxes.edgecolor: "#336699"  # blue\n\nbackend: tkagg\nfigure.figsize: 9, 9\n')
    assert read_style(path) == {"axes.edgecolor": "#336699"}
