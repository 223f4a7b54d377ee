"""Draw the sample sheets: pumps, charts, ink, lettering, ageing, and the exact record of what was drawn."""
