"""A better scan by mouse and keyboard: laid, carried over, looked at, taken; undo brings the old one back."""

import io

import chart
import pytest
from desk_help import ask, axe_is_content, doc_of, lay
from PIL import Image

pytestmark = pytest.mark.browser

SCALE = 1.5


def test_a_better_scan_is_laid_looked_at_taken_and_undone(desk, server, chart_png, chart_recipe):
    page = desk.page
    draft = lay(server, chart_png, chart_recipe)
    page.goto(f"{server.address}/desk/{draft}#sheet")
    page.click("#better-scan")
    page.wait_for_url("**/scan")
    page.wait_for_selector("#drop-title >> text=Lay the better scan here")
    axe_is_content(page)
    picture = Image.open(io.BytesIO(chart_png))
    finer = io.BytesIO()
    picture.resize((round(picture.width * SCALE), round(picture.height * SCALE)), Image.Resampling.BICUBIC).save(finer, "PNG")
    page.set_input_files("#file", files=[{"name": "finer.png", "mimeType": "image/png", "buffer": finer.getvalue()}])
    page.wait_for_selector("#slip button:has-text('Carry over')")
    axe_is_content(page)
    page.click("#slip button:has-text('Carry over')")
    page.wait_for_selector("#report table", timeout=120_000)
    assert page.locator("#report tbody tr").count() == len(chart.LINES)
    assert "The same paper" in page.inner_text("#slip")
    chosen = page.inner_text("#report tr.chosen .name")
    page.keyboard.press("j")
    page.wait_for_function(f"() => document.querySelector('#report tr.chosen .name').textContent !== '{chosen}'")
    for tone in ("k-ink", "k-trace"):
        assert page.locator(f"#one svg path.{tone}").count() >= len(chart.LINES)
    axe_is_content(page)
    page.click("#slip button:has-text('Take this scan')")
    page.wait_for_url("**/desk/*#curves")
    page.wait_for_selector("#over [data-curve='H-320'] path.k-trace:not(.preview)", timeout=60_000)
    taken = doc_of(server, desk, draft)
    assert taken["sheet"]["file"] == "finer.png"
    before = chart_recipe["curves"][0]["clicks"][1]
    assert taken["curves"][0]["clicks"][1] == pytest.approx([(v + 0.5) * SCALE - 0.5 for v in before], abs=1.0)
    page.locator("#paper").focus()
    page.keyboard.press("u")
    page.wait_for_function("() => document.getElementById('block').textContent.includes('900 × 700')")
    assert ask(server, f"/api/drafts/{draft}")["doc"]["sheet"]["file"] == "chart.png"


def test_halves_are_tied_by_keyboard(desk, server, chart_png):
    """The second half of a sheet: a point of each half, put down in the middle of the scan in focus, makes a pair."""
    page = desk.page
    desk.upload("left.png", chart_png)
    page.click("#second-half")
    page.wait_for_url("**/scan#half")
    page.wait_for_selector("#drop-title >> text=Lay the other half here")
    page.set_input_files("#file", files=[{"name": "right.png", "mimeType": "image/png", "buffer": chart_png}])
    page.click("#slip button:has-text('Tie points myself')")
    page.wait_for_selector("#slip >> text=Click a place that both halves show")
    for half in ("#one", "#two"):
        page.locator(half).focus()
        page.keyboard.press("ArrowLeft")
        page.keyboard.press("p")
    page.wait_for_selector("#slip >> text=1 pair")
    axe_is_content(page)
    page.click("#slip button:has-text('Take the last away')")
    page.wait_for_selector("#slip >> text=0 pairs")
