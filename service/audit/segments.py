"""Segments of a course, cut at a moment."""

import numpy as np

from service.physics.arrays import Floats, Integers, Mask


def cut_at(durations: Floats, moments: Floats) -> tuple[Floats, Integers, Mask]:
    """Segments with one more cut; which segment each was part of, and which come after the cut."""
    ends = np.cumsum(durations, axis=1)
    cuts = np.minimum(moments, ends[:, -1])
    all_ends = np.sort(np.column_stack([ends, cuts]), axis=1)
    begins = np.concatenate([np.zeros((all_ends.shape[0], 1)), all_ends[:, :-1]], axis=1)
    passed = ends[:, np.newaxis, :] <= begins[:, :, np.newaxis]
    which = np.minimum(passed.sum(axis=2, dtype=np.int64), durations.shape[1] - 1)
    return all_ends - begins, which, begins >= moments[:, np.newaxis]
