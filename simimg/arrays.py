"""Array types used throughout, and the one way in which a value keeps an array to itself."""

from __future__ import annotations

from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.floating[Any]]
ComplexArray = NDArray[np.complexfloating[Any, Any]]
AnyArray = NDArray[Any]

_Scalar = TypeVar("_Scalar", bound=np.generic)


def frozen(array: NDArray[_Scalar]) -> NDArray[_Scalar]:
    """A read-only copy, for keeping inside a frozen value."""
    copy = np.array(array, copy=True)
    copy.setflags(write=False)
    return copy
