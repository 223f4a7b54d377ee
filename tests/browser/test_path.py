"""The whole path by mouse, from a scan to a number a script reads; and what happens when things break in mid-work."""

import json
import os
import subprocess
import sys
import urllib.request

import chart
import pytest
from axe_playwright_python.sync_playwright import Axe

pytestmark = pytest.mark.browser

CORNERS = chart.to_px(0, 1), chart.to_px(200, 0)
READ = """
import curvebank, json, sys
pump = curvebank.open(sys.argv[1]).pump(sys.argv[2])
print(json.dumps({
    "head": pump.head(flow_m3h=100.0, diameter_mm=320),
    "between": pump.head(flow_m3h=100.0, diameter_mm=305),
    "efficiency": pump.efficiency(flow_m3h=115.0, diameter_mm=320),
    "u": pump.head.uncertainty(100.0, diameter_mm=320, of="print"),
}))
"""


def set_up_axes(desk):
    """Name the pump, draw the panel with two value axes, place seven marks (three of the two scales share crossings)."""
    desk.fill("maker", "Fenwright")
    desk.page.keyboard.press("Tab")
    desk.fill("model", "DP 80")
    desk.page.keyboard.press("Tab")
    desk.fill("speed", 1450)
    desk.enter()
    desk.step("panel")
    desk.draw_panel(*CORNERS)
    desk.page.select_option("#slip [name=another]", "efficiency")
    desk.page.wait_for_selector("#slip [name=unit-efficiency]")
    desk.step("marks")
    desk.mark(chart.to_px(0, 0), flow=0, head=0)
    desk.mark(chart.to_px(100, 0), flow=100)
    desk.mark(chart.to_px(200, 0), flow=200, efficiency=0)
    desk.mark(chart.to_px(0, 0.5), head=30)
    desk.mark(chart.to_px(0, 1), head=60)
    desk.mark(chart.to_px(200, 0.5), efficiency=50)
    desk.mark(chart.to_px(200, 1), efficiency=100)


def trace(desk, name):
    """Click along one printed line, say what it is, wait for its trace, keep it."""
    flow, share = chart.LINES[name]
    for k, i in enumerate((20, 200, 380)):
        place = chart.to_px(flow[i], share(flow[i]))
        if k == 0:
            desk.page.keyboard.down("Shift")
        desk.click(place)
        desk.page.keyboard.up("Shift")
    desk.page.wait_for_selector("#slip [name=quantity]")
    quantity = "efficiency" if name[0] == "E" else "head"
    if desk.page.input_value("#slip [name=quantity]") != quantity:
        desk.page.select_option("#slip [name=quantity]", quantity)
    desk.fill("diameter", name[2:])
    desk.page.wait_for_selector("#over path.k-trace.preview")
    desk.enter()
    desk.page.wait_for_selector("#slip [name=quantity]", state="detached")


def axe_is_content(page):
    found = Axe().run(page, options={"runOnly": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]})
    said = [f"{v['id']}: {[n['html'][:120] for n in v['nodes'][:3]]}" for v in found.response["violations"]]
    assert said == []


def document_of(server, page):
    with urllib.request.urlopen(f"{server.address}/api/drafts/{page.url.split('/')[-1].split('#')[0]}") as answer:
        return json.load(answer)["doc"]


def test_from_scan_to_script(desk, server, chart_png):
    """Upload, panel, marks, curves, check, fit, release; then the pump's page and a script give the drawn head."""
    page = desk.page
    page.goto(server.address)
    page.wait_for_selector("#block dt")
    axe_is_content(page)
    desk.upload("chart.png", chart_png)
    axe_is_content(page)
    set_up_axes(desk)
    axe_is_content(page)
    desk.step("curves")
    for name in chart.LINES:
        trace(desk, name)
    page.wait_for_function("() => document.querySelector('[data-step=curves] small')?.textContent === '3 of 3'")
    axe_is_content(page)

    page.click("#slip .btn.main")
    page.wait_for_selector('[data-step="family"][aria-current="step"]')
    page.wait_for_selector("#slip [name=carry]", timeout=90_000)
    assert page.locator("#over path.ghost").count() >= 2
    assert page.locator("#plot path.ghost").count() >= 2
    axe_is_content(page)
    desk.step("fit")
    page.select_option("#slip [name=fit-curve]", label="head Ø 320")
    page.wait_for_selector("#slip [name=order] option:has-text('auto:')", state="attached")
    axe_is_content(page)
    desk.step("submit")
    desk.fill("why", "read from the drawn chart")
    page.keyboard.press("Tab")
    desk.fill("who", "T. Brandt")
    page.keyboard.press("Tab")
    page.click("#slip .btn.main")
    page.wait_for_selector("#pump-link", timeout=60_000)
    page.click("#pump-link")
    page.wait_for_selector(".chip.released")
    page.wait_for_selector("#plots path.asked")
    page.fill("#slip [name=diameter]", "305")
    page.keyboard.press("Enter")
    page.fill("#slip [name=lift]", "20")
    page.keyboard.press("Tab")
    page.fill("#slip [name=loss]", "10")
    page.keyboard.press("Tab")
    page.fill("#slip [name=at]", "100")
    page.keyboard.press("Enter")
    page.wait_for_selector("#plots path.system")
    page.wait_for_function("() => document.querySelector('#answer h2')?.textContent === 'What a delivered pump will do here'")
    # H = 20 + 0.001 Q^2 meets 50 (305/320)^2 - 0.0012 Q^2 at Q = sqrt((45.42 - 20) / 0.0022) = 107.5 m3/h
    flow = float(page.inner_text("#answer tbody tr:first-child td b").split()[0])
    assert flow == pytest.approx(107.5, rel=0.02)
    axe_is_content(page)
    page.goto(f"{server.address}/pumps")
    page.wait_for_selector("#hits tr.row")
    assert "Fenwright DP 80" in page.inner_text("#hits")
    axe_is_content(page)

    answer = subprocess.run(
        [sys.executable, "-c", READ, str(server.bank), "FENWRIGHT-DP-80"], check=True, capture_output=True, text=True, env=dict(os.environ)
    )
    got = json.loads(answer.stdout)
    assert got["head"] == pytest.approx(float(chart.head_m(100, 320)), rel=0.004)
    assert got["between"] == pytest.approx(float(chart.head_m(100, 305)), rel=0.006)
    assert got["efficiency"] == pytest.approx(0.78, rel=0.006)
    assert abs(got["head"] - float(chart.head_m(100, 320))) < 3 * got["u"]


def test_killed_server_loses_no_click(desk, server, chart_png, watch):
    """kill -9 in mid-work: the desk goes on, says so, and hands everything over when the server is back; undo still works."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    set_up_axes(desk)
    desk.kept()
    before = document_of(server, page)
    watch.server_may_be_away = True
    server.kill()
    desk.step("curves")
    flow, share = chart.LINES["H-320"]
    clicked = [chart.to_px(flow[i], share(flow[i])) for i in (20, 120, 220, 380)]
    for place in clicked:
        desk.click(place)
    page.wait_for_selector('[data-problem="away"]')
    page.wait_for_function("() => /kept in this browser, 4 steps not yet in the file/i.test(document.getElementById('kept').textContent)")
    assert "safe in this browser" in page.inner_text('[data-problem="away"]')
    desk.fill("diameter", 320)
    desk.enter()
    page.wait_for_selector("#slip [name=quantity]", state="detached")
    server.start()
    page.wait_for_selector('[data-problem="away"]', state="detached")
    desk.kept()
    after = document_of(server, page)
    assert after["panels"] == before["panels"]
    (curve,) = after["curves"]
    assert curve["diameter_mm"] == 320
    assert len(curve["clicks"]) == 4
    for got, wanted in zip(curve["clicks"], clicked, strict=True):
        assert got == pytest.approx(list(wanted), abs=1.5)
    page.reload()
    page.wait_for_selector("#paper[data-view]")
    page.wait_for_selector("#over [data-curve='H-320'] path.k-trace")
    page.click("#undo")
    page.wait_for_function("() => !document.querySelector(\"#over [data-curve='H-320'] text\")")
    desk.kept()
    assert document_of(server, page)["curves"] == []
    page.click("#redo")
    desk.kept()
    assert len(document_of(server, page)["curves"]) == 1


def test_closed_window_loses_no_click(desk, server, chart_png, open_page, watch):
    """The server dies, then the window too: the steps wait in the browser and reach the file from the next window."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    desk.step("panel")
    desk.kept()
    watch.server_may_be_away = True
    server.kill()
    desk.draw_panel(*CORNERS)
    page.wait_for_selector('[data-problem="away"]')
    address = page.url
    page.close()
    server.start()
    again = open_page()
    again.goto(address)
    again.wait_for_function("() => /^Kept/.test(document.getElementById('kept').textContent)")
    assert len(document_of(server, again)["panels"]) == 1


def test_two_windows_keep_both_versions(desk, server, chart_png, open_page, watch):
    """A draft changed in two windows: the second is told, and may lay its version on top; nothing is lost."""
    desk.upload("chart.png", chart_png)
    desk.step("panel")
    desk.kept()
    other = open_page()
    other.goto(desk.page.url)
    other.wait_for_selector("#paper[data-view]")
    desk.draw_panel(*CORNERS)
    desk.kept()
    other.click('[data-step="sheet"]')
    other.fill("#slip [name=maker]", "Fenwright")
    other.keyboard.press("Tab")
    other.wait_for_selector('[data-problem="conflict"]')
    assert "both versions are kept" in other.inner_text('[data-problem="conflict"]')
    other.click('[data-problem="conflict"] .btn >> nth=1')
    other.wait_for_function("() => document.querySelector('[data-step=panel] small')?.textContent === '1'")
    watch.complaints = [c for c in watch.complaints if "409" not in c]


def test_paper_and_plot_stand_at_equal_heights(desk, server, chart_png):
    """The straightedge leaves the paper and enters the re-plot at the same height, zoomed or not; the fold reads the axis there."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    set_up_axes(desk)
    desk.step("curves")
    page.wait_for_selector("#plot .frame")
    for zoom in range(3):
        page.mouse.move(*desk.screen(chart.to_px(110, 0.6)))
        page.wait_for_selector("#plot-cursor line", state="attached")
        heights = page.evaluate(
            """() => {
              const level = document.querySelectorAll('#over-cursor path.k-ink')[1].getAttribute('d').match(/-?[\\d.]+/g).map(Number);
              return [level[3], Number(document.querySelectorAll('#plot-cursor line')[1].getAttribute('y1'))];
            }"""
        )
        assert heights[0] == pytest.approx(heights[1], abs=0.5), zoom
        assert float(page.inner_text("#fold .reading.near b").split()[0]) == pytest.approx(36.0, abs=0.15)
        page.mouse.wheel(0, -300)
        page.wait_for_timeout(150)


def test_a_mistyped_mark_is_named(desk, server, chart_png):
    """Three marks on a scale, one wrong: the sentence names the value that would fit, and one press puts it right."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    desk.step("panel")
    desk.draw_panel(*CORNERS)
    desk.step("marks")
    for place, values in [
        (chart.to_px(0, 0), {"flow": 0, "head": 0}),
        (chart.to_px(100, 0), {"flow": 100}),
        (chart.to_px(160, 0), {"flow": 160}),
        (chart.to_px(200, 0), {"flow": 250}),
        (chart.to_px(0, 1), {"head": 60}),
    ]:
        desk.mark(place, **values)
    page.wait_for_selector("#findings .finding")
    assert "flow mark typed 250" in page.inner_text("#findings")
    page.get_by_role("button", name="Change it to 200").click()
    page.wait_for_selector("#findings .finding", state="detached")
    marks = document_of(server, page)["panels"][0]["axes"]["flow"]["marks"]
    assert [m["value"] for m in marks] == [0, 100, 160, 200]


def test_what_is_typed_stays_typed(desk, server, chart_png):
    """A blank that is no number says so below it and keeps the text."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    desk.step("panel")
    desk.draw_panel(*CORNERS)
    desk.step("marks")
    desk.click(chart.to_px(100, 0))
    desk.fill("mark-flow", "12o")
    desk.enter()
    assert page.inner_text("#slip .under") == "“12o” is not a number. Did you mean 120?"
    assert page.input_value("#slip [name=mark-flow]") == "12o"
    desk.fill("mark-flow", "12,5")
    desk.enter()
    page.wait_for_selector('#slip [name^="mark-"]', state="detached")
    desk.kept()
    assert document_of(server, page)["panels"][0]["axes"]["flow"]["marks"][0]["value"] == 12.5


def test_a_file_that_is_no_scan_is_refused_in_words(desk, server, watch):
    """A text file: the problem stands on the page, with a way on."""
    page = desk.page
    page.goto(server.address)
    page.set_input_files("#file", files=[{"name": "notes.png", "mimeType": "image/png", "buffer": b"no picture"}])
    page.wait_for_selector('[data-problem="lay"]')
    assert "Choose another file" in page.inner_text('[data-problem="lay"]')
    axe_is_content(page)
    watch.complaints = [c for c in watch.complaints if "status of 4" not in c]


def test_the_path_by_keyboard_alone(desk, server, chart_png):
    """Panel, a mark and a curve without the mouse: arrow keys move the hand, P puts down, Enter keeps."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    page.keyboard.press("2")
    hand = [0.0, 0.0]

    def go(place):
        """From where the hand is to a sheet pixel: steps of 8 px, then of 1 px."""
        x, y = desk.screen(place)
        for k, wanted in enumerate((x, y)):
            far = wanted - hand[k]
            keys = ("ArrowRight", "ArrowLeft") if k == 0 else ("ArrowDown", "ArrowUp")
            key = keys[0] if far > 0 else keys[1]
            for _ in range(int(abs(far) // 8)):
                page.keyboard.press(key)
            for _ in range(round(abs(far) % 8)):
                page.keyboard.press(f"Shift+{key}")
            hand[k] = wanted

    page.locator("#paper").focus()
    box = page.locator("#paper").bounding_box()
    hand[:] = [box["x"] + box["width"] / 2, box["y"] + box["height"] / 2]
    for corner in CORNERS:
        go(corner)
        page.keyboard.press("p")
    page.wait_for_selector("#slip [name=which]")
    page.locator("#paper").focus()
    page.keyboard.press("3")
    page.wait_for_selector('[data-step="marks"][aria-current="step"]')
    page.wait_for_timeout(100)
    for place, values in [((0, 0), {"flow": 0, "head": 0}), ((200, 0), {"flow": 200}), ((0, 1), {"head": 60})]:
        go(chart.to_px(*place))
        page.keyboard.press("p")
        page.wait_for_selector('#slip [name^="mark-"]:focus')
        names = page.locator('#slip [name^="mark-"]').evaluate_all("inputs => inputs.map(i => i.name)")
        for name in names:
            if name[5:] in values:
                page.keyboard.type(str(values[name[5:]]))
            page.keyboard.press("Tab" if name != names[-1] else "Enter")
        page.wait_for_selector('#slip [name^="mark-"]', state="detached")
        assert page.evaluate("document.activeElement.id") == "paper"
    desk.kept()
    axes = document_of(server, page)["panels"][0]["axes"]
    assert [m["value"] for m in axes["flow"]["marks"]] == [0, 200]
    assert [m["value"] for m in axes["head"]["marks"]] == [0, 60]
    assert axes["flow"]["marks"][1]["at"] == pytest.approx(list(chart.to_px(200, 0)), abs=1.2)


@pytest.mark.parametrize("size", [(1024, 768), (768, 1024), (480, 800)])
def test_dark_and_small_pages_are_accessible(open_page, desk_of, server, chart_png, size, watch):
    """The desk with marks and the empty pages, in the dark and in small windows."""
    page = open_page()
    page.emulate_media(color_scheme="dark")
    page.set_viewport_size({"width": size[0], "height": size[1]})
    window = desk_of(page)
    window.upload("chart.png", chart_png)
    window.step("panel")
    window.draw_panel(*CORNERS)
    window.step("marks")
    window.mark(chart.to_px(0, 0), flow=0, head=0)
    axe_is_content(page)
    for address in ("/", "/pumps", "/pumps/NOT-THERE", "/nothing-here"):
        page.goto(server.address + address)
        page.wait_for_timeout(300)
        axe_is_content(page)
    watch.complaints = [c for c in watch.complaints if "status of 404" not in c]


def test_a_line_begun_on_a_kept_trace_leaves_that_trace_alone(desk, server, chart_png):
    """Contours begin on head curves: the kept curve is chosen, never bent, the two clicks begin a line; guides are asked for by name."""
    page = desk.page
    desk.upload("chart.png", chart_png)
    set_up_axes(desk)
    desk.step("curves")
    trace(desk, "H-320")
    desk.kept()
    before = document_of(server, page)["curves"]
    flow, share = chart.LINES["H-320"]
    on, off = chart.to_px(flow[200], share(flow[200])), chart.to_px(flow[200], share(flow[200]) - 0.1)
    page.wait_for_selector("#over [data-curve='H-320'] path.k-trace")
    desk.click(on)
    page.wait_for_selector("#slip button:has-text('Draw a guide')")
    desk.click(off)
    page.wait_for_selector("#slip button:has-text('Keep curve')")
    desk.kept()
    after = document_of(server, page)
    assert after["curves"] == before
    begun = after["x-desk"]["curve"]["clicks"]
    assert [begun[0], begun[1]] == [pytest.approx(list(on), abs=1.5), pytest.approx(list(off), abs=1.5)]
    page.click("#slip button:has-text('Let go')")
    page.wait_for_selector("#slip [name=quantity]", state="detached")
    desk.click(on)
    page.click("#slip button:has-text('Draw a guide')")
    desk.click(off)
    desk.kept()
    (curve,) = document_of(server, page)["curves"]
    assert curve["clicks"] == before[0]["clicks"]
    assert curve["guides"] == [pytest.approx(list(off), abs=1.5)]
