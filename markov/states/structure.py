"""The structure of success, evaluated over many states at once."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from markov.model import AllOf, AnyOf, AtLeast, Named, Success

_Value = TypeVar("_Value", np.bool_, np.float64)


def structure(success: Success, part: Callable[[str], NDArray[_Value]]) -> NDArray[_Value]:
    """Evaluate a structure over all states: the least, the greatest or the k-th greatest of its parts, shape (n,).

    On flags this is success; on delivered shares it is the delivered share.
    """
    if isinstance(success, Named):
        return part(success.name)
    parts = np.array([structure(each, part) for each in success.of])
    if isinstance(success, AllOf):
        return np.asarray(parts.min(axis=0))
    if isinstance(success, AnyOf):
        return np.asarray(parts.max(axis=0))
    if isinstance(success, AtLeast):
        return np.asarray(np.sort(parts, axis=0)[len(parts) - success.count])
    raise AssertionError(f"unknown structure {success!r}")
