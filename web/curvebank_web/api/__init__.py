"""The API: one blueprint per noun. Views parse, call and serialise; what they call lives beside this package."""

from . import drafts, jobs, sheets

BLUEPRINTS = (sheets.blueprint, drafts.blueprint, jobs.blueprint)
