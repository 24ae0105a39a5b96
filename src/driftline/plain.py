"""Results as plain data: what `to_dict` of every result is made of, and so what `result.json` holds."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np


def plain(value: Any) -> Any:
    """`value` in the types of JSON; a number that is not finite becomes None, an object is asked for its `to_dict`.

    Raises
    ------
    TypeError
        If JSON has no place for it.

    Examples
    --------
    >>> import numpy as np
    >>> plain({"sizes": np.array([8.0, 12.0]), "nu": np.nan, "window": (1, 5)})
    {'sizes': [8.0, 12.0], 'nu': None, 'window': [1, 5]}
    """
    if hasattr(value, "to_dict"):
        return plain(value.to_dict())
    if isinstance(value, Mapping):
        return {str(name): plain(part) for name, part in value.items()}
    if isinstance(value, np.ndarray | np.generic):
        return plain(value.tolist())
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [plain(part) for part in value]
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if value is None or isinstance(value, str | int):
        return value
    raise TypeError(f"there is no place for a {type(value).__name__} in plain data")


def attributes(value: Any, *names: str) -> dict[str, Any]:
    """The attributes of these names as plain data, in this order; None for all of them where `value` is None.

    Examples
    --------
    >>> attributes(3 + 4j, "real", "imag"), attributes(None, "real")
    ({'real': 3.0, 'imag': 4.0}, {'real': None})
    """
    return {name: None if value is None else plain(getattr(value, name)) for name in names}
