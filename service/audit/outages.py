"""Planned outages by the clock: what stands still at a moment, and when that changes."""

import numpy as np

from service.audit.columns import Moments
from service.physics.arrays import Mask


def out_now(begins: Moments, ends: Moments, at: np.datetime64) -> Mask:
    """Tell which rows, of (rows, most outages), are in an outage at a moment."""
    # Comparisons with not-a-time are false, so what has no outage is never out.
    out: Mask = np.logical_or.reduce((begins <= at) & (ends > at), axis=1)
    return out


def next_outage_turn(begins: Moments, ends: Moments, at: np.datetime64) -> Moments:
    """Next moment, strictly later than now, at which an outage of each row begins or ends."""
    never = np.datetime64("NaT", "us")
    edges = np.concatenate([begins, ends], axis=1)
    later = np.where(edges > at, edges, never)
    turns = np.full(begins.shape[0], never)
    for column in range(later.shape[1]):
        turns = np.fmin(turns, later[:, column])
    return turns
