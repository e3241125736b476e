"""Judging rooms: pure functions from values to findings."""
