"""Error bars: influence functions, automatic windows, t intervals.

Array layer: NumPy and SciPy only.
"""
