"""The local web app of curvebank."""
