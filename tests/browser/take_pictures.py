#!/usr/bin/env python3
"""Take the README's pictures from the running app: ``.venv-test/bin/python tests/browser/take_pictures.py [--bank DEMO.db]``.

Builds the demo bank unless one is given, lays two sample sheets on the desk, and photographs the pages at 1440 x 900 in the light theme.
The pictures go to web/pictures/.
"""

import argparse
import io
import json
import sys
import tempfile
import time
import urllib.request
import uuid
from pathlib import Path

from PIL import Image

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(Path(__file__).resolve().parent))

from conftest import FLAGS, Server  # noqa: E402

SAMPLES = ROOT / "samples"
OUT = ROOT / "web" / "pictures"


def call(address: str, method: str, path: str, body: bytes | None = None, kind: str = "application/json") -> dict:
    request = urllib.request.Request(address + path, data=body, method=method, headers={"Content-Type": kind})
    with urllib.request.urlopen(request, timeout=120) as answer:
        return json.load(answer)


def lay_on_desk(address: str, name: str) -> str:
    """Upload a sample's scan, open a draft with its recipe, run it; returns the desk's path."""
    doc = json.loads((SAMPLES / f"{name}.recipe.json").read_text())
    scan = SAMPLES / doc["sheet"]["file"]
    edge = uuid.uuid4().hex
    head = (
        f'--{edge}\r\nContent-Disposition: form-data; name="file"; filename="{scan.name}"\r\nContent-Type: application/octet-stream\r\n\r\n'
    )
    body = head.encode() + scan.read_bytes() + f"\r\n--{edge}--\r\n".encode()
    sheet = call(address, "POST", "/api/sheets", body, f"multipart/form-data; boundary={edge}")
    draft = call(address, "POST", "/api/drafts", json.dumps({"doc": doc, "sheet_sha256": sheet["sha256"]}).encode())
    job = call(address, "POST", f"/api/drafts/{draft['id']}/run", b"{}")
    until = time.monotonic() + 300
    while job["state"] in ("queued", "running"):
        assert time.monotonic() < until, job
        time.sleep(0.5)
        job = call(address, "GET", f"/api/jobs/{job['id']}")
    assert job["state"] == "done", job
    return f"/desk/{draft['id']}"


def keep(png: bytes, name: str) -> None:
    """Store a picture with a palette: a drawing needs no more, and the repository stays small."""
    OUT.mkdir(exist_ok=True)
    picture = Image.open(io.BytesIO(png)).convert("RGB").quantize(192, dither=Image.Dither.NONE)
    picture.save(OUT / f"{name}.png", optimize=True)
    print(f"web/pictures/{name}.png", (OUT / f"{name}.png").stat().st_size // 1024, "kB")


def main() -> None:
    import os
    import subprocess

    from playwright.sync_api import sync_playwright

    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--bank", type=Path, help="a demo bank made before")
    asked = parser.parse_args()
    browser_path = os.environ.get("CURVEBANK_BROWSER", "/usr/bin/chromium")
    with tempfile.TemporaryDirectory() as folder:
        bank = asked.bank or Path(folder) / "demo.db"
        if asked.bank is None:
            command = [sys.executable, "-m", "curvebank.cli", "demo", "--no-serve", "--bank", str(bank), "--samples", str(SAMPLES)]
            subprocess.run(command, check=True, cwd=ROOT)
        server = Server(bank)
        server.start()
        try:
            sound = lay_on_desk(server.address, "lark-wm-150")
            doubtful = lay_on_desk(server.address, "tarnbeck-st-65")
            with sync_playwright() as play:
                browser = play.chromium.launch(executable_path=browser_path, args=FLAGS)
                page = browser.new_page(viewport={"width": 1440, "height": 900}, color_scheme="light")
                for name, path, key in [
                    ("desk-curves", sound, "4"),
                    ("desk-family", doubtful, "5"),
                    ("desk-fit", sound, "6"),
                    ("pump", "/pumps/LARK-WM-150", None),
                    ("catalogue", "/pumps", None),
                ]:
                    page.goto(server.address + path)
                    page.wait_for_load_state("networkidle")
                    if key:
                        page.locator("#paper").focus()
                        page.keyboard.press(key)
                        page.mouse.move(470, 420)
                    page.wait_for_timeout(2000)
                    keep(page.screenshot(), name)
                browser.close()
        finally:
            server.kill()


if __name__ == "__main__":
    main()
