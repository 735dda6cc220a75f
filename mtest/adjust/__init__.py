"""Adjustment procedures: pure functions on arrays."""
