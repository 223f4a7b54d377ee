"""Every sample sheet by name."""

from . import blueprint, colours, contours, copies, metric, photo, vector

SHEETS = {
    "lark-wm-150": metric.stacked,
    "tarnbeck-st-65": metric.mislabelled,
    "ormsgarth-d-400": copies.photocopy,
    "quillon-nt-80": colours.printed,
    "pellwright-tn-300": colours.millimetre,
    "corvane-dv-250": contours.composite,
    "stavering-6x5": copies.fax,
    "ebbrook-vl-200": vector.plotted,
    "marrowby-pf-500": blueprint.speeds,
    "garrowell-kg-65": photo.lettered,
}
