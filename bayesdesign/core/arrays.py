"""Named array types. Axes are named N (sample sizes), M (nuisance nodes), K (effects), A (auxiliary nodes)."""

import numpy as np
import numpy.typing as npt

type FloatArray = npt.NDArray[np.float64]
type BoolArray = npt.NDArray[np.bool_]
type IntArray = npt.NDArray[np.int64]
