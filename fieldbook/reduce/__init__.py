"""Epochs to the mark: pure numbers, no files but grids, no clock. Each step of the reduction in one module."""
