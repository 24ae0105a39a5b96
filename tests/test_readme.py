"""The README's commands and paths are those of the repository."""

import re
import shlex
import subprocess
from pathlib import Path

import click
import pytest

from driftline.cautions import RULES
from driftline.cli import COMMANDS
from driftline.cli import driftline as command
from driftline.readers.findings import RULES as RAW_RULES
from driftline.report.writers import WRITERS

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def block(mark):
    """The code block after the comment `mark`."""
    return re.search(rf"^<!-- {mark} -->\n```sh\n(.*?)\n```$", README, re.MULTILINE | re.DOTALL).group(1)


def test_ci_runs_the_command_of_the_readme():
    """The script of the continuous integration takes the test command out of the README as it stands."""
    shown = subprocess.run(["bash", ROOT / ".ci" / "run", "--show"], capture_output=True, text=True, check=True)
    assert shown.stdout == block("test") + "\n"


@pytest.mark.parametrize("mark", ["run", "test"])
def test_set_up_is_one_line_from_a_fresh_environment(mark):
    """Each set-up command makes its environment and installs the package itself."""
    line = block(mark)
    assert "\n" not in line
    assert line.startswith("python3 -m venv .venv && .venv/bin/pip install ")


def test_the_main_job_of_the_readme_is_understood():
    """The data exist and the options are those of the command."""
    words = shlex.split(block("run").rpartition("&&")[2])
    assert words[:2] == [".venv/bin/driftline", "analyse"]
    analyse = command.get_command(click.Context(command), "analyse")
    with analyse.make_context("analyse", words[2:]) as context:
        assert (ROOT / context.params["path"]).is_file()


def test_paths_exist():
    """Every path into the data sets and every linked file is there."""
    paths = set(re.findall(r"datasets/[\w./-]*\w", README)) | set(re.findall(r"\]\(([\w./-]+)\)", README))
    assert paths
    assert [path for path in paths if not (ROOT / path).exists()] == []


def test_options_are_documented():
    """Each command and option of the program stands in the README."""
    for name in COMMANDS:
        assert f"driftline {name}" in README
        for option in command.get_command(click.Context(command), name).params:
            if option.param_type_name == "option":
                assert option.opts[0] in README, option.opts


def test_warnings_are_documented():
    """Each warning that can be raised has its row."""
    files = [ROOT / "src" / "driftline" / name for name in ("cautions.py", "readers/findings.py")]
    source = "".join(file.read_text(encoding="utf-8") for file in files)
    codes = set(re.findall(r'^ +"([A-Z]+(?:_[A-Z]+)*)",$', source, re.MULTILINE))
    assert len(codes) == len(RULES) + len(RAW_RULES)
    assert sorted(code for code in codes if f"`{code}`" not in README) == []


def test_outputs_are_documented():
    """Each file that the report writes has its row."""
    for writer in WRITERS:
        assert writer.title in README


def test_top_level():
    """The top level holds what the design says and nothing else."""
    names = {path.name for path in ROOT.iterdir() if not path.name.startswith(".")}
    kept = {"README.md", "DEVELOPERS.md", "pyproject.toml", "src", "tests", "datasets", "LICENSE"}
    made = {name for name in names if name in ("build", "dist") or name.endswith(("-driftline", ".egg-info"))}
    assert names - made == kept


def test_no_file_says_where_it_was_made():
    """Neither README nor notes nor script hold a path of one machine."""
    for name in ("README.md", "DEVELOPERS.md", ".ci/run"):
        text = (ROOT / name).read_text(encoding="utf-8")
        assert not re.search(r"(?<![\w.])/(home|work|root|tmp|Users)/", text), name
