"""Photograph the app's screens at three sizes, light and dark: ``python tests/browser/photograph.py BANK FOLDER``.

BANK is a bank as ``curvebank demo --no-serve`` leaves it; it is copied first. The browser is the one CURVEBANK_BROWSER names. The desk is
shown with the first pump's sheet laid on it again, checked, at every step. Look at the pictures before each release.
"""

import argparse
import json
import os
import shutil
import sys
import tempfile
import urllib.request
from pathlib import Path

os.environ.setdefault("CURVEBANK_BROWSER", shutil.which("chromium") or shutil.which("google-chrome") or "")
sys.path.insert(0, str(Path(__file__).resolve().parent))

from conftest import BROWSER, FLAGS, Server  # noqa: E402

SIZES = ((1440, 900), (1024, 768), (768, 1024))
STEPS = ("sheet", "panel", "marks", "curves", "family", "fit", "submit")


def ask(address: str, path: str, body: object = None) -> dict:
    """JSON from the app."""
    data = None if body is None else json.dumps(body).encode()
    request = urllib.request.Request(address + path, data=data, headers={"Content-Type": "application/json"})
    with urllib.request.urlopen(request) as answer:
        return json.load(answer)


def pages(address: str, key: str) -> dict[str, str]:
    """Name and address of each screen; lays the pump's sheet on the desk again and runs it, so that every step has something to show."""
    draft = ask(address, "/api/drafts", {"from_pump": key})["id"]
    job = ask(address, f"/api/drafts/{draft}/run", {})
    while job["state"] in ("queued", "running"):
        job = ask(address, f"/api/jobs/{job['id']}")
    listed = {"home": "/", "catalogue": "/pumps?flow=150&head=32", "pump": f"/pumps/{key}", "problem": "/nothing-here"}
    listed |= {"scan": f"/desk/{draft}/scan"}
    return listed | {f"desk-{step}": f"/desk/{draft}#{step}" for step in STEPS}


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("bank", type=Path)
    parser.add_argument("folder", type=Path)
    parser.add_argument("--key", help="the pump to show (default: the first of the catalogue)")
    asked = parser.parse_args()
    if not BROWSER:
        print("No browser: name one in CURVEBANK_BROWSER.", file=sys.stderr)
        return 2
    from playwright.sync_api import sync_playwright

    asked.folder.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as room, sync_playwright() as tool:
        server = Server(Path(shutil.copy(asked.bank, Path(room) / "bank.db")))
        server.start()
        browser = tool.chromium.launch(executable_path=BROWSER, args=FLAGS)
        try:
            key = asked.key or ask(server.address, "/api/pumps")["items"][0]["key"]
            shown = pages(server.address, key)
            for scheme in ("light", "dark"):
                for width, height in SIZES:
                    page = browser.new_page(viewport={"width": width, "height": height}, color_scheme=scheme, reduced_motion="reduce")
                    for name, path in shown.items():
                        page.goto("about:blank")
                        page.goto(server.address + path)
                        page.wait_for_load_state("networkidle")
                        if name.startswith("desk-") and (paper := page.locator("#paper").bounding_box()):
                            page.mouse.move(paper["x"] + 0.45 * paper["width"], paper["y"] + 0.4 * paper["height"])
                        page.wait_for_timeout(400)
                        page.screenshot(path=asked.folder / f"{name}-{width}-{scheme}.png")
                    page.close()
        finally:
            browser.close()
            server.stop()
    print(asked.folder)
    return 0


if __name__ == "__main__":
    sys.exit(main())
