"""Ratios and figures, measured."""
