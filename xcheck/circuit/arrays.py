"""Array types used throughout. Frequency is the last axis of every array, in Hz."""

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]
