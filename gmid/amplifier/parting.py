"""One condition out of what was measured in several together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields, is_dataclass, replace
from typing import Any, TypeVar

import numpy as np

Value = TypeVar("Value")


def take_condition(value: Value, k: int, axes: int) -> Value:
    """Take what belongs to one place on the first axis of a batch.

    Parameters
    ----------
    value : ndarray, mapping or dataclass
        Figures; an array of fewer axes than the batch is the same in all conditions.
    k : int
        The place.
    axes : int
        Number of axes of the batch.

    Returns
    -------
    ndarray, mapping or dataclass
        The same without the first axis.

    Examples
    --------
    >>> take_condition({"vop": np.array([[1.0, 2.0], [3.0, 4.0]])}, 1, 2)["vop"].tolist()
    [3.0, 4.0]
    """
    found: Any = value
    if isinstance(value, np.ndarray):
        if value.ndim >= axes:
            found = value[k if value.shape[0] > 1 else 0]
    elif isinstance(value, Mapping):
        found = {name: take_condition(one, k, axes) for name, one in value.items()}
    elif is_dataclass(value) and not isinstance(value, type):
        parts = {one.name: take_condition(getattr(value, one.name), k, axes)
                 for one in fields(value)}  # fmt: skip
        found = replace(value, **parts)
    return found  # type: ignore[no-any-return]
