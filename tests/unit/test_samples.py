"""The sample sheets: the script still draws what is committed, and what is committed is consistent with itself.

Geometry is drawn again and compared; the scans themselves are only decoded, because pixels may differ by a rounding
between versions of the image libraries while the truth must not.
"""

import hashlib
import importlib.util
import json
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy.ndimage import map_coordinates

from curvebank import recipe as recipes
from curvebank import sheet as sheets

SAMPLES = Path(__file__).resolve().parents[2] / "samples"
GRAVITY_MS2 = 9.80665  # 3rd CGPM 1901


def _draw():
    spec = importlib.util.spec_from_file_location("sample_draw", SAMPLES / "draw.py")
    module = importlib.util.module_from_spec(spec)
    before = list(sys.path)
    spec.loader.exec_module(module)
    sys.path[:] = before
    return module


DRAW = _draw()
NAMES = list(DRAW.SHEETS)


def committed(name, kind):
    return json.loads((SAMPLES / f"{name}.{kind}.json").read_text(encoding="utf-8"))


def decoded(name):
    doc = committed(name, "recipe")["sheet"]
    data = (SAMPLES / doc["file"]).read_bytes()
    return sheets.load(data, page=doc["page"], dpi=doc.get("dpi", 300), turn=doc.get("turn", 0))


def differences(a, b, path=""):
    """Places where two documents differ by more than 0.011 px or 1e-5 of a value (the last digits written)."""
    if isinstance(a, dict) and isinstance(b, dict):
        if a.keys() != b.keys():
            return [f"{path}: keys {sorted(a.keys() ^ b.keys())}"]
        return [d for k in a for d in differences(a[k], b[k], f"{path}/{k}")]
    if isinstance(a, list) and isinstance(b, list):
        if len(a) != len(b):
            return [f"{path}: {len(a)} items, not {len(b)}"]
        return [d for i, (x, y) in enumerate(zip(a, b, strict=True)) for d in differences(x, y, f"{path}/{i}")]
    if isinstance(a, int | float) and isinstance(b, int | float) and not isinstance(a, bool):
        return [] if abs(a - b) <= 0.011 + 1e-5 * abs(b) else [f"{path}: {a} is not {b}"]
    return [] if a == b else [f"{path}: {a!r} is not {b!r}"]


def test_every_sheet_is_in_the_script_and_the_readme():
    assert sorted(p.name[: -len(".recipe.json")] for p in SAMPLES.glob("*.recipe.json")) == sorted(NAMES)
    assert len(NAMES) >= 7
    readme = (SAMPLES / "README.md").read_text(encoding="utf-8")
    for name in NAMES:
        doc = committed(name, "recipe")["sheet"]
        assert f"`{doc['file']}`" in readme
        assert doc["sha256"] in readme, f"README.md gives another SHA-256 for {doc['file']}; run samples/draw.py and copy it"


@pytest.mark.parametrize("name", NAMES)
def test_truth_and_recipe_are_drawn_again(name):
    sheet = DRAW.SHEETS[name]()
    truth = json.loads(DRAW.record.dump(sheet.truth()))
    assert differences(truth, committed(name, "truth"))[:5] == []
    recipe = committed(name, "recipe")
    again = json.loads(DRAW.record.dump(sheet.recipe(truth, recipe["sheet"]["sha256"])))
    assert differences(again, recipe)[:5] == []


@pytest.mark.parametrize("name", NAMES)
def test_recipe_fits_its_scan_and_holds_no_truth(name):
    recipe, truth = committed(name, "recipe"), committed(name, "truth")
    path = SAMPLES / recipe["sheet"]["file"]
    data = path.read_bytes()
    assert hashlib.sha256(data).hexdigest() == recipe["sheet"]["sha256"]
    assert len(data) < 600_000
    parsed = recipes.parse((SAMPLES / f"{name}.recipe.json").read_bytes())
    assert [c.id for c in parsed.curves] == [c["id"] for c in truth["curves"]]
    assert set(recipe) == {"recipe", "sheet", "pump", "panels", "curves"}
    for panel in recipe["panels"]:
        assert all(len(axis["marks"]) == 3 for axis in panel["axes"].values())
    for curve, drawn in zip(recipe["curves"], truth["curves"], strict=True):
        assert len(curve["clicks"]) == (5 if curve["closed"] else 3)
        assert "line" not in curve
        line = np.array(drawn["line"])[:, :2]
        miss = [np.hypot(*(line - c).T).min() for c in curve["clicks"]]
        assert max(miss) < 3.6  # a hand's click, not the truth itself
        assert max(miss) > 0.2
    loaded = decoded(name)
    assert loaded.pixels.shape[:2] == (truth["height"], truth["width"])


@pytest.mark.parametrize("name", NAMES)
def test_ink_lies_where_the_truth_says(name):
    """Weigh the ink across each line in the decoded scan: it balances on the true line to a tenth of a pixel."""
    pixels = decoded(name).pixels.astype(float)
    gray = pixels if pixels.ndim == 2 else pixels.mean(2)
    offsets = np.arange(-6, 6.01, 0.25)
    for curve in committed(name, "truth")["curves"]:
        line = np.array(curve["line"])[:, :2]
        at = np.linspace(0.04, 0.96, 160) * (len(line) - 1)
        i = np.clip(at.astype(int), 1, len(line) - 2)
        along = line[i + 1] - line[i - 1]
        normal = np.stack([-along[:, 1], along[:, 0]], -1) / np.hypot(*along.T)[:, None]
        spots = line[i][:, None] + offsets[:, None] * normal[:, None]
        profile = map_coordinates(gray, [spots[..., 1], spots[..., 0]], order=1, mode="nearest")
        contrast = np.abs(profile - np.median(profile, axis=1, keepdims=True))
        contrast = contrast[contrast.max(1) > 40]  # dash and label gaps hold no ink to weigh
        assert len(contrast) >= 60
        weight = np.where(contrast > 0.5 * contrast.max(axis=1, keepdims=True), contrast, 0)
        centre = (weight * offsets).sum(1) / weight.sum(1)
        assert abs(np.median(centre)) < 0.12, f"{name} {curve['id']}: ink lies {np.median(centre):+.2f} px beside the truth"


def true_curve(name, curve_id):
    """(flow, value) of a line in printed units."""
    line = next(c for c in committed(name, "truth")["curves"] if c["id"] == curve_id)["line"]
    return np.array(line)[:, 2], np.array(line)[:, 3]


@pytest.mark.parametrize(
    ("name", "size", "flow_m3h", "head_m", "power_kw", "density_kgm3"),
    [
        ("lark-wm-150", "330", 1, 1, 1, 999.1),
        ("ormsgarth-d-400", "400", 1, 1, 1, 998.2),
        ("quillon-nt-80", "169", 1, 1, 1, 998.2),
        ("stavering-6x5", "13", 3.785411784e-3 * 60, 0.3048, 0.7456998715822702, 998.2),  # NIST SP 811, appendix B
    ],
)
def test_power_head_and_efficiency_close(name, size, flow_m3h, head_m, power_kw, density_kgm3):
    q, head = true_curve(name, f"H-{size}")
    q_eta, eta = true_curve(name, f"E-{size}")
    q_power, power = true_curve(name, f"P-{size}")
    at = np.linspace(q_eta[0], min(q[-1], q_eta[-1]), 40)
    hydraulic = density_kgm3 * GRAVITY_MS2 * at * flow_m3h / 3600 * np.interp(at, q, head) * head_m / 1000
    shaft = np.interp(at, q_power, power) * power_kw
    assert np.allclose(hydraulic / (np.interp(at, q_eta, eta) / 100), shaft, rtol=2e-3)


@pytest.mark.parametrize("name", NAMES)
def test_pumps_are_plausible(name):
    """Shut-off head coefficient 0.5 to 0.65 for radial and mixed-flow wheels: common practice, no source."""
    unit_m = 0.3048 if name == "stavering-6x5" else 1.0
    truth = committed(name, "truth")
    heads = [c for c in truth["curves"] if c["quantity"] == "head"]

    def size(curve):  # wheels known by letter only go by their shut-off head
        return curve["diameter_mm"] or curve["line"][0][3], curve["rpm"]

    largest = max(heads, key=size)
    tip_ms = np.pi * truth["affinity"]["dmax_mm"] / 1000 * largest["rpm"] / 60
    assert 0.5 <= largest["line"][0][3] * unit_m * GRAVITY_MS2 / tip_ms**2 <= 0.65
    ends = [(c["line"][0][3], c["line"][-1][2]) for c in sorted(heads, key=size)]
    assert ends == sorted(ends), "a larger or faster wheel gives more head and reaches further"


def test_one_diameter_is_wrong_and_only_the_truth_says_so():
    truth = committed("tarnbeck-st-65", "truth")
    wrong = truth["affinity"]["mislabelled"]
    assert 0.02 < wrong["shown"] / wrong["true"] - 1 < 0.04
    diameters = [c["diameter_mm"] for c in committed("tarnbeck-st-65", "recipe")["curves"]]
    assert wrong["shown"] in diameters
    assert wrong["true"] not in diameters
    q, head = true_curve("tarnbeck-st-65", "H-264")
    ratio = wrong["true"] / 264
    q_wrong, head_wrong = true_curve("tarnbeck-st-65", f"H-{wrong['shown']}")
    carried = np.interp(q_wrong, q * ratio ** truth["affinity"]["a"], head * ratio ** truth["affinity"]["b"])
    assert np.allclose(carried, head_wrong, rtol=1e-3)


def test_letters_stay_letters():
    for curve in committed("garrowell-kg-65", "recipe")["curves"]:
        assert curve["diameter_mm"] is None
        assert curve["applies_to"] == "unknown"
        assert curve["label"] == {"by": "letter", "printed": curve["id"][-1]}
