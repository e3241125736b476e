"""Two-zone bound of released gas that stays where it goes (methods F1)."""
import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, positive


def breathing_zone_volume(floor_area: ArrayLike, height: ArrayLike, *, net_share: ArrayLike = 1.0, zone_height: float = 1.5) -> Floats:
    """Volume below the height that people breathe at."""
    tall = np.minimum(positive("height", height), zone_height)
    return positive("floor_area", floor_area) * tall * net_share


def ceiling_zone_volume(floor_area: ArrayLike, height: ArrayLike, *, net_share: ArrayLike = 1.0, zone_height: float = 1.5) -> Floats:
    """Volume above the height that people breathe at."""
    tall = positive("height", height)
    above = np.where(tall > zone_height, tall - zone_height, tall)
    return positive("floor_area", floor_area) * above * net_share
