"""One run as a time series: where it starts to be stationary, how correlated it is.

Array layer: NumPy and SciPy only.
"""
