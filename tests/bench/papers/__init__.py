"""Invented pump charts drawn with exact truth, then spoiled the way print, paper, copiers, cameras and fax machines do.

A chart (``chart``) is a list of strokes and words, placed on the page by smooth geometry (``geometry``), painted by one of two engines
that differ in how they turn lines to pixels (``paint``: distance to every pixel; ``agg``: area coverage) and spoiled (``damage``).
``kinds`` is the door. Truth is the geometry, never the picture. Pixel convention: the centre of the top-left pixel is (0, 0).
"""
