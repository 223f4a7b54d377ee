"""Polynomials that stand for curves, with domain and uncertainty."""
