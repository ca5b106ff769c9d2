"""The array types that every room speaks."""

from typing import TypeAlias

import numpy as np
import numpy.typing as npt

RealArray: TypeAlias = npt.NDArray[np.float64]
ComplexArray: TypeAlias = npt.NDArray[np.complex128]
IndexArray: TypeAlias = npt.NDArray[np.intp]
Mask: TypeAlias = npt.NDArray[np.bool_]
