"""The page on `result.json`, field by field."""

from __future__ import annotations

from importlib.resources import files


def result_fields() -> str:
    """Every field of `result.json` with type, unit and meaning, as Markdown.

    Examples
    --------
    >>> print(result_fields().splitlines()[0])
    # The fields of `result.json`
    """
    return files("driftline.report").joinpath("result_fields.md").read_text(encoding="utf-8")
