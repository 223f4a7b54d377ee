"""Pump laws as pure functions on numbers and arrays. Import the module you need: this package loads nothing by itself."""
