"""Completion: what each shell sends, by the protocol of its script, and what it gets."""

import os
import shlex
import subprocess

import pytest
from terminals import COMMAND

from driftline.cli import COMMANDS, main
from driftline.cli.completion import VARIABLE
from driftline.drift import LAWS
from driftline.scaling.ansatz import available, check_ansatz_name
from driftline.truths import FUNCTIONS, TRUTHS


@pytest.fixture
def ask(monkeypatch, capfd):
    """A function that says what a shell offers at the end of a line."""

    def bash(line):
        monkeypatch.setenv("COMP_WORDS", line)
        return [tuple(row.split(",", 1)) for row in answer("bash_complete").splitlines()]

    def zsh(line):
        words = line.split(" ")
        monkeypatch.setenv("COMP_WORDS", line)
        monkeypatch.setenv("COMP_CWORD", str(len(words) - 1))
        rows = answer("zsh_complete").splitlines()
        return [(kind, name.replace("\\:", ":")) for kind, name in zip(rows[::3], rows[1::3], strict=True)]

    def fish(line):
        monkeypatch.setenv("COMP_WORDS", line)
        monkeypatch.setenv("COMP_CWORD", line.rpartition(" ")[2])
        return [tuple(row.partition("\t")[0].split(",", 1)) for row in answer("fish_complete").splitlines()]

    def answer(instruction):
        monkeypatch.setenv(VARIABLE, instruction)
        assert main([]) == 0
        return capfd.readouterr().out

    return {"bash": bash, "zsh": zsh, "fish": fish}


def plain(*names):
    return [("plain", name) for name in names]


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_what_every_shell_completes(ask, shell):
    """Commands, options, names out of the registries, and files, each where it is due."""
    offered = ask[shell]
    assert offered("driftline ") == plain(*COMMANDS)
    assert offered("driftline ana") == plain("analyse")
    assert offered("driftline analyse x.csv --wi") == plain("--window")
    assert offered("driftline analyse ") == [("file", "")]
    assert offered("driftline analyse x.csv --config ") == [("file", "")]
    assert offered("driftline crossings x.csv --law in") == plain("inverse", "inverse-power")
    assert offered("driftline crossings x.csv --law inverse --law in") == plain("inverse-power")  # not twice
    assert offered("driftline crossings x.csv --law ") == plain(*LAWS)
    assert offered("driftline simulate x.csv --truth ") == plain(*TRUTHS)
    assert offered("driftline simulate x.csv --function ") == plain(*FUNCTIONS)


@pytest.mark.parametrize(("shell", "kept", "kept_of_option"), [("bash", "kt:", "kt:"), ("zsh", "", ""),
                                                              ("fish", "", "-")])  # fmt: skip
def test_names_with_colons(ask, shell, kept, kept_of_option):
    """Bash wants what follows its last break of a word; zsh the name; fish the token, with the option before it."""
    names = ["kt:inverse-drift", "kt:inverse-drift:corrected", "kt:inverse-drift:amplitude",
             "kt:inverse-drift:corrected:amplitude"]  # fmt: skip
    line = "driftline collapse x.csv --ansatz"
    assert ask[shell](f"{line} kt:inv") == plain(*(name.removeprefix(kept) for name in names))
    before = "--ansatz=" if kept_of_option == "-" else ""
    assert ask[shell](f"{line}=kt:inv") == plain(*(before + name.removeprefix(kept_of_option) for name in names))


def test_every_offered_ansatz_is_understood(ask):
    """All forms are offered, and each name that is offered is one that the program takes."""
    offered = [name for _, name in ask["bash"]("driftline analyse x.csv --ansatz ")]
    assert set(available()) < set(offered)
    for name in offered:
        check_ansatz_name(name)


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_scripts(shell, monkeypatch, capfd):
    """The script to install names the command and the variable; an unknown shell is an error."""
    monkeypatch.setenv(VARIABLE, f"{shell}_source")
    assert main([]) == 0
    script = capfd.readouterr().out
    assert f"{VARIABLE}={shell}_complete" in script
    assert "driftline" in script.replace(VARIABLE, "")
    monkeypatch.setenv(VARIABLE, "nosuchshell_source")
    assert main([]) == 1


def test_in_bash_itself(tmp_path):
    """The script in a real bash: the function fills in what readline would insert."""
    program = tmp_path / "driftline"
    program.write_text(f'#!/bin/sh\nexec {shlex.join(COMMAND)} "$@"\n')
    program.chmod(0o755)
    line = "driftline collapse 'a file.csv' --ansatz power-law:lin"
    script = f"""
        eval "$({VARIABLE}=bash_source driftline)"
        COMP_LINE={shlex.quote(line + " and more")} COMP_POINT={len(line)}
        _driftline_completion driftline
        printf '%s\\n' "${{COMPREPLY[@]}}"
        complete -p driftline
    """
    path = f"{tmp_path}{os.pathsep}{os.environ['PATH']}"
    done = subprocess.run(
        ["bash", "--norc", "-c", script], capture_output=True, text=True, check=True, env={**os.environ, "PATH": path},
        timeout=60,
    )  # fmt: skip
    *names, registered = done.stdout.splitlines()
    assert names == [f"linear-drift{tail}" for tail in ("", ":corrected", ":amplitude", ":corrected:amplitude")]
    assert registered == "complete -o nosort -F _driftline_completion driftline"
    assert done.stderr == ""
