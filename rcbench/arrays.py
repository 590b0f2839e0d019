"""Names for the array types that signatures and docstrings use."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.floating[Any]]
ComplexArray = NDArray[np.complexfloating[Any, Any]]
IntArray = NDArray[np.integer[Any]]
BoolArray = NDArray[np.bool_]
