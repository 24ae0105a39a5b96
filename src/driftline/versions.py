"""Which program computed a result: its version, and those of the packages that can change a number."""

from __future__ import annotations

import platform
from importlib.metadata import version
from typing import Any

PACKAGES = ("numpy", "scipy", "lmfit", "emcee", "numba")


def software() -> dict[str, Any]:
    """Name and version of the program, of Python, and of the packages behind the numbers.

    Examples
    --------
    >>> list(software())
    ['name', 'version', 'python', 'packages']
    """
    return {
        "name": "driftline",
        "version": version("driftline"),
        "python": platform.python_version(),
        "packages": {name: version(name) for name in PACKAGES},
    }
