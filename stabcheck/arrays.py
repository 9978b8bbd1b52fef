"""Shapes by name. The first axis is always the draw; nothing here or below it may depend on how many rows there are."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
"""Any array of doubles."""
PerDraw = NDArray[np.float64]
"""(draw,)"""
DrawPlanet = NDArray[np.float64]
"""(draw, planet), planets in the order of the ensemble's bodies"""
DrawPair = NDArray[np.float64]
"""(draw, planet - 1), entry k belongs to planets k and k + 1"""
DrawBodyVector = NDArray[np.float64]
"""(draw, body, 3), body 0 is the star"""
Integers = NDArray[np.int64]
Flags = NDArray[np.bool_]
AnyArray = NDArray[Any]
