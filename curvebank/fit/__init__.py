"""Polynomials that stand for curves, with their uncertainty."""

from .polynomial import fit_curve
from .solver import polynomial

__all__ = ["fit_curve", "polynomial"]
