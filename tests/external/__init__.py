"""Tests against values published elsewhere."""
