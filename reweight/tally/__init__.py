"""Runs reduced to weights on a few energy nodes: the exact estimator at the cost of a histogram.

Array layer: NumPy only; knows nothing of xarray, files or units.
"""
