"""The examples in the docstrings run and give what they say."""

import doctest
import importlib
import pkgutil

import numpy as np
import pytest

import driftline

FLAGS = doctest.NORMALIZE_WHITESPACE | doctest.ELLIPSIS


def examples():
    """Every docstring of the package that holds an example."""
    finder = doctest.DocTestFinder(exclude_empty=True)
    for found in pkgutil.walk_packages(driftline.__path__, "driftline."):
        module = importlib.import_module(found.name)
        for test in finder.find(module, found.name, module=module):
            if test.examples:
                test.globs.setdefault("np", np)
                yield pytest.param(test, id=test.name.removeprefix("driftline."))


@pytest.mark.parametrize("test", list(examples()))
def test_example(test):
    """The example in this docstring gives the result that stands there."""
    runner = doctest.DocTestRunner(optionflags=FLAGS, verbose=False)
    lines = []
    runner.run(test, out=lines.append)
    assert runner.failures == 0, "".join(lines)


def test_a_wrong_example_fails():
    """Negative control: the runner notices a result that is not the one written down."""
    wrong = doctest.DocTestParser().get_doctest(">>> 1 + 1\n3\n", {}, "wrong", None, 0)
    runner = doctest.DocTestRunner(verbose=False)
    runner.run(wrong, out=lambda _: None)
    assert runner.failures == 1


def test_the_steps_of_the_job_have_an_example():
    """Whoever calls help() on the functions that compute sees how they are called."""
    steps = ("analyse", "find_crossings", "fit_drift", "fit_collapse", "collapse_costs")
    assert [name for name in steps if ">>>" not in getattr(driftline, name).__doc__] == []
