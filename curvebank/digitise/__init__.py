"""Recipe and sheet bytes to curves, fits and findings."""
