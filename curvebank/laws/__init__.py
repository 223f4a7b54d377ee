"""Pump laws as pure functions on numbers. Import its modules one by one: laws.family is on the cold path."""
