"""Histogram reweighting."""
