"""Arm sums to statistics to tallies, in blocks, on all cores."""
