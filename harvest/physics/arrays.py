"""Types of the arrays that everything inside is made of."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    FloatArray = NDArray[np.float64]
    IntArray = NDArray[np.int64]
    BoolArray = NDArray[np.bool_]
    ObjectArray = NDArray[np.object_]
else:
    # importing numpy's typing takes a sixth of a second estimate, and nothing asks for it at run time
    FloatArray = IntArray = BoolArray = ObjectArray = np.ndarray
