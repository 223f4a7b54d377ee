"""The API: one blueprint per noun. Views parse, call and serialise; what they call lives beside this package."""

from . import drafts, jobs, pumps, scans, settings, sheets

BLUEPRINTS = (sheets.blueprint, drafts.blueprint, scans.blueprint, pumps.blueprint, jobs.blueprint, settings.blueprint)
