"""Edits on the paper: masks, guides dragged from a trace, locked stretches, the one click that settles a doubt; by mouse and keyboard."""

import chart
import pytest
from desk_help import axe_is_content, doc_of, lay

pytestmark = pytest.mark.browser


@pytest.fixture
def traced(desk, server, chart_png, chart_recipe):
    """A window on a draft with three traced curves; the draft's id."""
    draft = lay(server, chart_png, chart_recipe)
    desk.page.goto(f"{server.address}/desk/{draft}#curves")
    desk.page.wait_for_selector("#over [data-curve='H-290'] path.k-trace:not(.preview)")
    desk.page.wait_for_selector("#over [data-curve='H-320'] path.k-trace:not(.preview)")
    return draft


def place(name, i, off=0.0):
    flow, share = chart.LINES[name]
    return chart.to_px(flow[i], share(flow[i]) + off)


def drag(desk, *places):
    page = desk.page
    page.mouse.move(*desk.screen(places[0]))
    page.mouse.down()
    for p in places[1:]:
        page.mouse.move(*desk.screen(p), steps=4)
    page.mouse.up()


def test_a_guide_is_drawn_from_the_trace_moved_and_taken_away(desk, server, traced):
    page = desk.page
    drag(desk, place("H-320", 150), place("H-320", 150, 0.012))
    page.wait_for_selector("#slip >> text=This is the first guide of")
    curve = doc_of(server, desk, traced)["curves"][0]
    assert curve["guides"] == [pytest.approx(list(place("H-320", 150, 0.012)), abs=1.5)]
    assert curve["clicks"] == [list(c) for c in curve["clicks"]] and len(curve["clicks"]) == 3
    shapes = page.locator("#over [data-curve='H-320'] [data-part]").evaluate_all("marks => marks.map(m => [m.tagName, m.dataset.part])")
    assert ["circle", "guide"] in shapes and ["rect", "click"] in shapes
    page.locator("#paper").focus()
    page.keyboard.press("Shift+ArrowUp")
    page.wait_for_function("() => !document.querySelector(\"#over [data-curve='H-320'] path.preview\")")
    moved = doc_of(server, desk, traced)["curves"][0]["guides"][0]
    assert moved[1] == pytest.approx(curve["guides"][0][1] - 1.0, abs=0.05)
    axe_is_content(page)
    page.click("#slip button:has-text('Remove the guide')")
    assert "guides" not in doc_of(server, desk, traced)["curves"][0]
    page.locator("#paper").focus()
    page.keyboard.press("u")
    assert doc_of(server, desk, traced)["curves"][0]["guides"] == [moved]


def test_a_stretch_is_locked_and_unlocked(desk, server, traced):
    """Two points on the trace lock what lies between; the padlock is drawn; dragging there is refused; the key unlocks."""
    page = desk.page
    desk.click(place("H-320", 200))
    page.click("#slip button:has-text('Lock a stretch')")
    desk.click(place("H-320", 220))
    page.wait_for_selector("#slip >> text=Now click where it ends")
    desk.click(place("H-320", 330))
    page.wait_for_selector("#over [data-part=lock]")
    (lock,) = doc_of(server, desk, traced)["curves"][0]["locked"]
    assert lock["pixels"][0] == pytest.approx(list(place("H-320", 220)), abs=2)
    assert lock["pixels"][-1] == pytest.approx(list(place("H-320", 330)), abs=2)
    assert 0 < lock["sigma_px"] < 1
    drag(desk, place("H-320", 280), place("H-320", 280, 0.05))
    assert "guides" not in doc_of(server, desk, traced)["curves"][0]
    page.mouse.move(*desk.screen(place("H-320", 280)))
    page.locator("#paper").focus()
    page.keyboard.press("l")
    page.wait_for_selector("#over [data-part=lock]", state="detached")
    assert "locked" not in doc_of(server, desk, traced)["curves"][0]


def test_masks_are_brushed_listed_erased_and_undone(desk, server, traced):
    """A mask over a click is said at its place; the eraser takes it away there; undo brings it back."""
    page = desk.page
    page.locator("#paper").focus()
    page.keyboard.press("x")
    page.wait_for_selector("#slip [name=brush]")
    before = float(page.input_value("#slip [name=width]"))
    page.keyboard.press("]")
    page.wait_for_function("least => Number(document.querySelector('#slip [name=width]').value) > least", arg=before)
    width = float(page.input_value("#slip [name=width]"))
    at = place("H-320", 200)
    drag(desk, at + [-40, 0], at, at + [40, 0])
    page.wait_for_selector("#over [data-mask]", state="attached")
    (mask,) = doc_of(server, desk, traced)["sheet"]["masks"]
    assert mask["width_px"] == width and mask["brush"][0] == pytest.approx(list(at + [-40, 0]), abs=1.5)
    page.wait_for_selector("#findings >> text=A mask lies over the second click of Ø 320")
    page.wait_for_function("() => !document.querySelector(\"#over [data-curve='H-320'] path.preview\")")
    axe_is_content(page)
    page.select_option("#slip [name=brush]", "erase")
    page.locator("#paper").focus()
    drag(desk, at + [0, -30], at + [0, 30])
    page.wait_for_function("() => document.querySelectorAll('#over [data-mask]').length === 2")
    page.wait_for_selector("#findings >> text=A mask lies over", state="detached")
    page.keyboard.press("u")
    page.wait_for_function("() => document.querySelectorAll('#over [data-mask]').length === 1")
    page.click("#beside button:has-text('remove')")
    page.wait_for_selector("#over [data-mask]", state="detached")
    assert "masks" not in doc_of(server, desk, traced)["sheet"]
    page.mouse.move(*desk.screen(at + [0, 60]))
    page.locator("#paper").focus()
    page.keyboard.press("e")
    page.wait_for_selector("#slip >> text=stamps, notes and stains")
    page.keyboard.press("p")
    for _ in range(4):
        page.keyboard.press("ArrowRight")
    page.keyboard.press("p")
    page.wait_for_selector("#over [data-mask]", state="attached")
    page.keyboard.press("Escape")
    page.wait_for_selector("#slip [name=brush]", state="detached")
    assert len(doc_of(server, desk, traced)["sheet"]["masks"]) == 1


def test_the_ring_of_a_doubtful_trace_takes_the_one_click(desk, server, chart_png, chart_recipe):
    """The server's doubt about one line, as it would tell of it: said in words, stepped to by key, settled by a click by the ring."""
    page, ring, sent = desk.page, place("H-290", 280), []

    def doubt(route):
        question = route.request.post_data_json
        answer = route.fetch()
        body = answer.json()
        curve = body.get("curve")
        if curve and curve["id"] == "H-290":
            sent.append(question["curve"])
            if len(question["curve"]["clicks"]) == 3:
                curve |= {
                    "flagged": True,
                    "confidence": 0.62,
                    "hint_click": list(ring),
                    "stretches": [[200, 260, "two lines run as one here"]],
                }
        route.fulfill(response=answer, json=body)

    page.route("**/preview", doubt)
    draft = lay(server, chart_png, chart_recipe)
    page.goto(f"{server.address}/desk/{draft}#curves")
    page.wait_for_selector("#findings >> text=Ø 290: two lines run as one here")
    scale = float(page.get_attribute("#paper", "data-view").split()[0])
    page.locator("#paper").focus()
    page.keyboard.press("n")
    page.wait_for_function(f"() => Number(document.getElementById('paper').dataset.view.split(' ')[0]) > {1.05 * scale}")
    assert "one click here would settle it" in page.text_content("#over")
    axe_is_content(page)
    desk.click(ring + [3, 2])
    page.wait_for_selector("#over .hint-ring", state="detached")
    clicks = doc_of(server, desk, draft)["curves"][1]["clicks"]
    assert len(clicks) == 4 and clicks[2] == pytest.approx(list(ring + [3, 2]), abs=1.5)
    page.wait_for_selector("#findings >> text=two lines run as one here", state="detached")
    desk.click(place("H-290", 100))
    page.wait_for_selector("#slip >> text=The trace is")
