"""Derived quantities, one a file; each says which moments it needs, its value and its gradient.

Array layer: NumPy only.  Everything that asks (curves, peaks, crossings, files, figures) works for every quantity
without knowing which.
"""
