"""The command line: exit codes, messages, and what is and is not written."""

import json
import os
import shlex
import signal
import subprocess
import sys
import time

import click
import pytest
from analyses import OPENING, made_analysis, made_curves
from terminals import COMMAND

import driftline
from driftline import analysis as analysis_module
from driftline.cli import COMMANDS, main
from driftline.cli import driftline as group
from driftline.figures import style
from driftline.progress import part
from driftline.report import writers
from driftline.report.summary import summary

HEADER = "size,disorder,mean,error\n"
REAL_OPTIONS = ("--seed", "3", "--window", "2.2", "4")


@pytest.fixture
def data(tmp_path, monkeypatch):
    """A working folder with a data file in it."""
    monkeypatch.chdir(tmp_path)
    path = tmp_path / "made.csv"
    size, disorder, mean, error = made_curves().flat()
    rows = zip(size.tolist(), disorder.tolist(), mean.tolist(), error.tolist(), strict=True)
    path.write_text(HEADER + "".join(",".join(map(repr, row)) + "\n" for row in rows))
    return path


@pytest.fixture
def prepared(monkeypatch):
    """The estimators replaced by a hand-built result, so that only the command line itself is at work."""
    calls = []

    def analyse(curves, *, settings, progress):
        calls.append(settings)
        return made_analysis(code="drifting", settings=settings)

    monkeypatch.setattr(analysis_module, "analyse", analyse)
    # the figures take seconds and have their own tests; the run of the whole job below draws them
    monkeypatch.setattr(writers, "WRITERS", tuple(each for each in writers.WRITERS if each.title != "figures"))
    return calls


def run(*arguments, **options):
    """The installed command in a process of its own."""
    command = [*COMMAND, *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, check=False, timeout=300, **options)


def test_help_imports_no_numerics():
    """`driftline --help` loads neither numpy nor scipy nor matplotlib, nor what draws progress bars."""
    code = (
        "import sys; from driftline.cli import main; code = main(['--help']); "
        "print(code, [name for name in ('numpy', 'scipy', 'matplotlib', 'h5py', 'rich') if name in sys.modules])"
    )
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert result.stdout.endswith("0 []\n")
    assert "Usage: driftline" in result.stdout


def test_public_names_are_lazy_and_complete():
    """Importing the package loads no numerics, and every public name can be had."""
    code = "import sys, driftline; driftline.Settings; print([n for n in ('scipy', 'matplotlib') if n in sys.modules])"
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert result.stdout == "[]\n"
    for name in driftline.__all__:
        assert getattr(driftline, name) is not None
    with pytest.raises(AttributeError, match=r"^module 'driftline' has no attribute 'analyze'$"):
        _ = driftline.analyze


def test_version(capsys):
    """The version is that of the installed package."""
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"driftline {driftline.__version__}\n"


def test_analyse_writes_the_folder_and_prints_the_summary(data, prepared, capsys):
    """The terminal shows what `summary.txt` holds, without colour where it is not a terminal."""
    assert main(["analyse", str(data), "--seed", "4", "--ansatz", "power-law"]) == 0
    out, err = capsys.readouterr()
    assert out.startswith(OPENING)
    text = (data.parent / "made-driftline" / "summary.txt").read_text(encoding="utf-8")
    assert out == text + f"\nWritten to made-driftline{os.sep}\n"
    assert "\x1b" not in out
    assert err == ""
    assert prepared[0].seed == 4
    assert prepared[0].ansatze == ("power-law",)


def test_all_options_reach_the_settings(data, prepared):
    """Every option of the command ends up where it belongs, over the file's."""
    (data.parent / "run.toml").write_text("seed = 1\ndraws = 300\njobs = 1\n")
    assert main(
        ["analyse", str(data), "--config", "run.toml", "--out", "o", "--ansatz", "power-law", "--ansatz",
         "power-law:corrected", "--window", "14", "19", "--smallest-size", "8", "--seed", "2", "--quick", "--jobs", "2"]
    ) == 0  # fmt: skip
    (settings,) = prepared
    assert settings == driftline.Settings(
        ("power-law", "power-law:corrected"), (14.0, 19.0), 8.0, 2, True, 2, {}, 300
    )  # fmt: skip
    assert (data.parent / "o" / "result.json").is_file()


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (["--window", "19", "14"], "option --window: the low end 19 must lie below the high end 14"),
        (["--seed", "-1"], "option --seed: must be at least 0, not -1"),
        (["--jobs", "0"], "option --jobs: must be at least 1, not 0"),
        (["--smallest-size", "14"], "smallest size 14 leaves 1 of the sizes 6, 8, 10, 12, 14, and 2 are needed; "
                                    "choose 12 or less"),
        (["--out", "none/out"], "{cwd}/none: is not a folder, so the output cannot be put there; make it first"),
        (["--out", "full"], "full: is not empty; give --force to replace it or choose another with --out"),
        (["--out", "full", "--force"], "full: holds no result.json, so it is not an output folder and --force does not "
                                       "delete it; choose another place with --out"),
        (["--config", "none.toml"], "none.toml: there is no such file; check the path"),
    ],
)  # fmt: skip
def test_bad_options_are_one_sentence_and_nothing_is_computed(data, prepared, capsys, arguments, sentence):
    """Exit code 1, one line on standard error, no file, and no computation before the refusal."""
    full = data.parent / "full"
    full.mkdir()
    (full / "mine.txt").write_text("mine")
    before = sorted(data.parent.rglob("*"))
    assert main(["analyse", str(data), *arguments]) == 1
    out, err = capsys.readouterr()
    assert err == f"driftline: {sentence.format(cwd=data.parent)}\n"
    assert out == ""
    assert prepared == []
    assert sorted(data.parent.rglob("*")) == before


def test_unknown_ansatz(data, prepared, capsys):
    """A misspelt ansatz is refused with a suggestion before anything is computed."""
    assert main(["analyse", str(data), "--ansatz", "power-low"]) == 1
    err = capsys.readouterr().err
    assert err.startswith("driftline: option --ansatz: ansatz 'power-low'")
    assert err.endswith("did you mean 'power-law'?\n")
    assert prepared == []


@pytest.mark.parametrize(
    "content",
    [
        "",
        "size,disorder,mean\n8,1,0.5\n",
        HEADER + "8,1,0.5,x\n",
        HEADER + "8,1,nan,0.1\n",
        HEADER + "8,1,0.5,-0.1\n",
        HEADER + "".join(f"8,{w},0.5,0.1\n" for w in range(1, 9)),
    ],
)
def test_bad_data_is_one_sentence_with_the_place(data, capsys, content):
    """Exit code 1, one line that begins with the file, no traceback and no folder."""
    data.write_text(content)
    for command in (["analyse", str(data)], ["inspect", str(data)]):
        assert main(command) == 1
        out, err = capsys.readouterr()
        assert out == ""
        assert err.startswith(f"driftline: {data}")
        assert err.count("\n") == 1
    assert list(data.parent.iterdir()) == [data]


def test_missing_data(tmp_path, capsys):
    """A path that leads nowhere gets its sentence."""
    assert main(["analyse", str(tmp_path / "none.csv"), "--out", str(tmp_path / "out")]) == 1
    assert capsys.readouterr().err == f"driftline: {tmp_path / 'none.csv'}: there is no such file; check the path\n"


@pytest.mark.parametrize(
    "arguments", [["analyse"], ["analyse", "x.csv", "--nosuch"], ["analyse", "x.csv", "--seed", "many"], ["nosuch"]]
)
def test_wrong_usage(arguments, capsys):
    """What the command line does not know ends with exit code 2 and a usage line."""
    assert main(arguments) == 2
    assert "Usage: driftline" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("arguments", "suggested"),
    [
        (["analyze", "x.csv"], "there is no command 'analyze'; did you mean analyse"),
        (["frobnicate"], "there is no command 'frobnicate'; known are: analyse, "),
        (["analyse", "x.csv", "--sead", "1"], "--seed"),
        (["collapse", "x.csv", "--ansats", "kt"], "--ansatz"),
        (["simulate", "x.csv", "--disordr", "1", "2", "9"], "--disorder"),
    ],
)
def test_mistyped_commands_and_options_get_a_suggestion(arguments, suggested, capsys):
    """Wrong usage names what was probably meant, or all there is."""
    assert main(arguments) == 2
    out, err = capsys.readouterr()
    assert suggested in err.rpartition("Error: ")[2]
    assert out == ""


@pytest.mark.parametrize("name", COMMANDS)
def test_help_of_every_command(name, capsys):
    """A sentence, every option explained, and examples that call this command with options that it has."""
    assert main([name, "--help"]) == 0
    text = capsys.readouterr().out
    command = group.get_command(click.Context(group), name)
    assert all(option.help for option in command.params if isinstance(option, click.Option))
    examples = [line.strip() for line in text.partition("Examples:\n")[2].splitlines()]
    assert examples, "give the command an epilog=examples(...)"
    for line in examples:
        words = shlex.split(line.partition(" | ")[0])
        assert words[:2] == ["driftline", name]
        command.make_context(name, words[2:]).close()


def test_quiet_prints_nothing(data, prepared, capsys):
    """The folder is written as ever, and neither stream gets a character."""
    assert main(["analyse", str(data), "--quiet"]) == 0
    assert capsys.readouterr() == ("", "")
    assert (data.parent / "made-driftline" / "result.json").is_file()
    assert main(["analyse", str(data), "--quiet"]) == 1
    assert capsys.readouterr().err.startswith("driftline: made-driftline: is not empty")


@pytest.mark.parametrize("out", [[], ["--out", "folder"]])
def test_json_on_standard_output(data, prepared, capsys, out):
    """Standard output gets `result.json` byte for byte; a folder is written only where --out asks for it."""
    assert main(["analyse", str(data), "--json", *out]) == 0
    text, err = capsys.readouterr()
    assert (json.loads(text)["schema"], err) == ("driftline-result/1", "")
    assert {path.name for path in data.parent.iterdir()} == {"made.csv", *out[1:]}
    if out:
        assert (data.parent / "folder" / "result.json").read_text(encoding="utf-8") == text


def test_a_reader_that_has_seen_enough():
    """A closed pipe, as `head` leaves it, is no failure and no traceback."""
    reader, writer = os.pipe()
    os.close(reader)
    result = subprocess.run([*COMMAND, "--help"], stdout=writer, stderr=subprocess.PIPE, check=False, timeout=60)
    os.close(writer)
    assert (result.returncode, result.stderr) == (0, b"")


def test_a_full_disk():
    """Output that cannot be written is one sentence and exit code 1; /dev/full is a disk without room."""
    with open("/dev/full", "w") as full:  # noqa: PTH123 - a device
        result = subprocess.run([*COMMAND, "--help"], stdout=full, stderr=subprocess.PIPE, check=False, timeout=60)
    assert result.returncode == 1
    assert result.stderr.startswith(b"driftline: the output cannot be written (")
    assert result.stderr.count(b"\n") == 1


def test_force_replaces_an_earlier_output(data, prepared):
    """A second run is refused, and with force it replaces the first."""
    assert main(["analyse", str(data)]) == 0
    assert main(["analyse", str(data), "--seed", "9"]) == 1
    assert main(["analyse", str(data), "--seed", "9", "--force"]) == 0
    assert json.loads((data.parent / "made-driftline" / "result.json").read_text())["seed"] == 9
    assert {path.name for path in data.parent.iterdir()} == {"made.csv", "made-driftline"}


def test_interruption_inside(data, monkeypatch, capsys):
    """An interrupt during the computation gives exit code 130, one line, and no folder."""

    def analyse(curves, *, settings, progress):
        raise KeyboardInterrupt

    monkeypatch.setattr(analysis_module, "analyse", analyse)
    assert main(["analyse", str(data)]) == 130
    assert capsys.readouterr().err == "driftline: interrupted, nothing was written\n"
    assert list(data.parent.iterdir()) == [data]


def interrupt(process):
    """Send the signal, and again after a while: a compiled library that is just being loaded may swallow one."""
    for _ in range(4):
        process.send_signal(signal.SIGINT)
        try:
            return process.communicate(timeout=20)
        except subprocess.TimeoutExpired:
            continue
    process.kill()
    return process.communicate()


def test_interruption_from_outside(data):
    """The same for a process that gets the signal while it computes."""
    process = subprocess.Popen(
        [*COMMAND, "analyse", str(data)], stderr=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    )  # fmt: skip
    time.sleep(2.5)  # past the start of the interpreter, far from the end of a full analysis
    out, err = interrupt(process)
    # CPython ends itself by the signal if the interrupt passed through code run from a string, which some libraries
    # contain and run while they are loaded; a shell reports both as 130
    assert process.returncode in (130, -signal.SIGINT)
    assert (out, err) == ("", "driftline: interrupted, nothing was written\n")
    assert list(data.parent.iterdir()) == [data]


def test_an_interrupt_that_python_can_only_report_still_ends_the_run(data, monkeypatch, capsys):
    """Raised in a destructor, as in a callback of the import system, it is not lost, and no traceback is shown."""

    class Interrupted:
        def __del__(self):
            raise KeyboardInterrupt

    def analyse(curves, *, settings, progress):
        Interrupted()
        time.sleep(5)
        raise AssertionError("the interrupt was lost")

    monkeypatch.setattr(analysis_module, "analyse", analyse)
    hook = sys.unraisablehook
    assert main(["analyse", str(data)]) == 130
    assert capsys.readouterr().err == "driftline: interrupted, nothing was written\n"
    assert sys.unraisablehook is hook


def test_bugs_are_not_hidden(data, monkeypatch):
    """An exception that no user can cause is passed on, so that its traceback is seen."""

    def analyse(curves, *, settings, progress):
        raise ZeroDivisionError

    monkeypatch.setattr(analysis_module, "analyse", analyse)
    with pytest.raises(ZeroDivisionError):
        main(["analyse", str(data)])


def test_inspect_prints_what_is_read_and_writes_nothing(data, capsys):
    """The report on the input names file and sizes."""
    assert main(["inspect", data.name]) == 0
    out = capsys.readouterr().out
    assert data.name in out
    assert "14" in out
    assert list(data.parent.iterdir()) == [data]


def test_ansatze_lists_every_form(data, capsys):
    """Each ansatz is shown with formula, parameters and priors; with a path, those of the data."""
    from driftline.scaling.ansatz import available

    assert main(["ansatze"]) == 0
    out = capsys.readouterr().out
    assert all(f"\n{name}  (" in out for name in available())
    assert "uniform from -1.5 to 13.5" in out  # 1 to 11, a quarter wider on each side
    assert max(map(len, out.splitlines())) <= 80
    assert main(["ansatze", str(data)]) == 0
    assert "uniform from 11.25 to 21.75" in capsys.readouterr().out  # 13 to 20 likewise


def test_narrow_encodings_do_not_stop_the_summary(data):
    """A terminal that lacks a letter gets a question mark and no traceback."""
    text = data.read_text()
    data.write_text(f"# disorder_unit: \N{GREEK SMALL LETTER MU}eV\n{text}", encoding="utf-8")
    result = run("inspect", data, env={**os.environ, "PYTHONIOENCODING": "latin-1", "PYTHONUTF8": "0"})
    assert (result.returncode, result.stderr) == (0, "")
    assert "?eV" in result.stdout


@pytest.fixture(scope="module")
def real(tmp_path_factory):
    """One real run of the whole job on synthetic curves, and the folder it was made in."""
    place = tmp_path_factory.mktemp("real")
    truth = ("--set", "W_c=3", "--set", "nu=1.2", "--sizes", "8,12,18", "--disorder", "2", "4", "9", "--seed", "2")
    assert main(["simulate", str(place / "data.csv"), "--quiet", *truth]) == 0
    first = run("analyse", "data.csv", *REAL_OPTIONS, "--quick", "--ansatz", "power-law:corrected", cwd=place)
    return place, first


def parts(text):
    """The parts of `result.json`, but for the timing."""
    return {name: part for name, part in json.loads(text).items() if name != "timing"}


def test_the_whole_job(real):
    """From a file to a folder: exit code 0, the truth inside the interval, and no word on standard error."""
    place, first = real
    assert (first.returncode, first.stderr) == (0, "")
    result = json.loads((place / "data-driftline" / "result.json").read_text(encoding="utf-8"))
    interval = result["crossover"]["disorder"]
    # the five-sigma equivalent of the 95 % interval: a chance of one in a million to fail for another data set
    half = 2.55 * (interval["high95"] - interval["low95"]) / 2
    assert abs(interval["median"] - 3.0) < half
    assert result["input"]["disorder_range"] == [2.25, 4.0]
    assert first.stdout.startswith((place / "data-driftline" / "summary.txt").read_text(encoding="utf-8"))


def test_the_written_configuration_reproduces_the_result(real, monkeypatch, capsys):
    """`analysis.toml` given back makes the same `result.json`, byte for byte but for the timing at its end."""
    place, _ = real
    monkeypatch.chdir(place)
    assert main(["analyse", "data.csv", "--config", "data-driftline/analysis.toml", "--json"]) == 0
    new = capsys.readouterr().out.split('"timing"')[0]
    assert (place / "data-driftline" / "result.json").read_text().split('"timing"')[0] == new
    assert len(new) > 1000


def test_parts_give_the_numbers_of_the_whole_job(real, monkeypatch, capsys):
    """Crossings, drift and collapse by themselves, with the same seed and options, are those of `result.json`."""
    place, _ = real
    monkeypatch.chdir(place)
    whole = parts((place / "data-driftline" / "result.json").read_text())
    assert main(["crossings", "data.csv", *REAL_OPTIONS, "--json"]) == 0
    located = parts(capsys.readouterr().out)
    assert main(["collapse", "data.csv", *REAL_OPTIONS, "--quick", "--json"]) == 0
    fitted = parts(capsys.readouterr().out)
    for found, keys in ((located, ["crossings", "drift"]), (fitted, ["collapse"])):
        assert list(found) == ["schema", "software", "input", "seed", "config", *keys]
        assert [key for key in ("software", "input", "seed", *keys) if found[key] != whole[key]] == []
        assert found["config"].items() <= whole["config"].items()


def test_folders_of_the_parts(real, monkeypatch, capsys):
    """Each part writes its numbers, tables, figures and configuration, and prints where."""
    place, _ = real
    monkeypatch.chdir(place)
    # drawn, but not rendered twice each: the files of figures have their own tests
    monkeypatch.setattr(style, "save", lambda figure, path: path.write_text(type(figure).__name__))
    common = {"result.json", "summary.txt", "analysis.toml", "tables", "figures"}
    expected = {
        "crossings": (common, {"curves", "drift"}, {"crossings", "drift"}),
        "collapse": (common | {"posterior.h5"}, {"collapse-power-law_corrected"}, {"ansatze", "costs",
                                                                                   "collapsed-points"}),
    }  # fmt: skip
    for name, (files, figures, tables) in expected.items():
        arguments = [name, "data.csv", *REAL_OPTIONS, "--out", name] + ["--quick"] * (name == "collapse")
        assert main(arguments) == 0
        out = capsys.readouterr().out
        assert out.endswith(f"\nWritten to {name}{os.sep}\n")
        # curves that merely drift collapse as well, so a collapse under transition forms alone comes with a caution
        assert ("  priors: W_c uniform from 1.8125 to 4.4375; nu " in out) == (name == "collapse")
        assert ("A good collapse is no evidence of a transition by itself" in " ".join(out.split())) == (
            name == "collapse"
        )
        assert {path.name for path in (place / name).iterdir()} == files
        assert {path.name for path in (place / name / "figures").iterdir()} == {
            f"{figure}.{kind}" for figure in figures for kind in ("pdf", "png")
        }
        assert {path.stem for path in (place / name / "tables").iterdir()} == tables


def test_progress_of_a_part():
    """A part of a job moves the bar from its own start to its own end."""
    told = []
    inner = part(lambda text, fraction: told.append((text, fraction)), 0.5, 1.0)
    inner("a", 0.0)
    inner("b", 1.0)
    assert told == [("a", 0.5), ("b", 1.0)]


def test_summary_is_public():
    """What the command prints can be had from Python."""
    analysis = made_analysis()
    assert driftline.summary(analysis) == summary(analysis)
