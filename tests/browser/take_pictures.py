#!/usr/bin/env python3
"""Take the README's pictures from the running app: ``.venv-test/bin/python tests/browser/take_pictures.py BANK``.

BANK is a bank as ``curvebank demo --no-serve`` leaves it; it is copied first. The pictures go to web/pictures/, 1440 x 900, light theme.
"""

import argparse
import io
import shutil
import sys
import tempfile
from pathlib import Path

from PIL import Image
from playwright.sync_api import sync_playwright

sys.path.insert(0, str(Path(__file__).resolve().parent))

from photograph import BROWSER, FLAGS, Server, pages  # noqa: E402

OUT = Path(__file__).resolve().parents[2] / "web" / "pictures"
WANTED = {
    "LARK-WM-150": {"desk-marks": "desk-marks", "pump": "pump", "catalogue": "catalogue"},
    "TARNBECK-ST-65-250": {"desk-family": "desk-family"},
}
"""Pump -> screen -> name of its picture."""


def keep(png: bytes, name: str) -> None:
    """Store a picture in full colour: a palette would lose either the paper or the few strokes of a rare colour."""
    OUT.mkdir(exist_ok=True)
    Image.open(io.BytesIO(png)).convert("RGB").save(OUT / f"{name}.png", optimize=True)
    print(f"web/pictures/{name}.png", (OUT / f"{name}.png").stat().st_size // 1024, "kB")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("bank", type=Path)
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as room, sync_playwright() as tool:
        server = Server(Path(shutil.copy(asked.bank, Path(room) / "bank.db")))
        server.start()
        browser = tool.chromium.launch(executable_path=BROWSER, args=FLAGS)
        try:
            page = browser.new_page(viewport={"width": 1440, "height": 900}, color_scheme="light", reduced_motion="reduce")
            for key, screens in WANTED.items():
                addresses = pages(server.address, key)
                for screen, name in screens.items():
                    page.goto("about:blank")
                    page.goto(server.address + addresses[screen].replace("?flow=150&head=32", ""))
                    page.wait_for_load_state("networkidle")
                    if screen.startswith("desk-") and (paper := page.locator("#paper").bounding_box()):
                        page.mouse.move(paper["x"] + 0.5 * paper["width"], paper["y"] + 0.45 * paper["height"])
                    page.wait_for_timeout(600)
                    keep(page.screenshot(), name)
        finally:
            browser.close()
            server.stop()


if __name__ == "__main__":
    main()
