"""Words about calibration curves and bands that are no findings."""

UNNAMED_BAND = "not named by this source"
"""Stands for a range of LIC between or outside the ranges that a source names."""
