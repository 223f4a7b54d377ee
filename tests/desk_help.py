"""What several browser tests ask of a served desk: drafts over HTTP, and the one check of accessibility."""

import json
import urllib.request

RULES = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]


def axe_is_content(page):
    from axe_playwright_python.sync_playwright import Axe

    found = Axe().run(page, options={"runOnly": RULES})
    assert [f"{v['id']}: {[n['html'][:120] for n in v['nodes'][:3]]}" for v in found.response["violations"]] == []


def ask(server, path, body=None):
    """JSON from the app."""
    data = None if body is None else json.dumps(body).encode()
    request = urllib.request.Request(server.address + path, data=data, headers={"Content-Type": "application/json"})
    with urllib.request.urlopen(request) as answer:
        return json.load(answer)


def lay(server, data, doc):
    """A draft with a whole recipe on an uploaded sheet; its id."""
    edge = b'--edge\r\nContent-Disposition: form-data; name="file"; filename="chart.png"\r\nContent-Type: image/png\r\n\r\n'
    request = urllib.request.Request(
        f"{server.address}/api/sheets",
        data=edge + data + b"\r\n--edge--\r\n",
        headers={"Content-Type": "multipart/form-data; boundary=edge"},
    )
    with urllib.request.urlopen(request) as answer:
        sha = json.load(answer)["sha256"]
    return ask(server, "/api/drafts", {"doc": doc, "sheet_sha256": sha})["id"]


def doc_of(server, desk, draft):
    """The draft's document once every step is in the file."""
    desk.kept()
    return ask(server, f"/api/drafts/{draft}")["doc"]
