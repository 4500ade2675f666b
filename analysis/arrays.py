"""Names for the arrays that travel through the project."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

FloatArray: TypeAlias = NDArray[np.float64]
IntArray: TypeAlias = NDArray[np.int64]
FlagArray: TypeAlias = NDArray[np.uint32]
QualityArray: TypeAlias = NDArray[np.uint8]
BoolArray: TypeAlias = NDArray[np.bool_]

MICROSECONDS_PER_SECOND = 1_000_000
