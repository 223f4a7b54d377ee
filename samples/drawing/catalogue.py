"""Every sample sheet by name."""

from . import metric

SHEETS = {"lark-wm-150": metric.stacked, "tarnbeck-st-65": metric.mislabelled}
