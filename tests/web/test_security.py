"""Other sites and other machines stay out."""

import pytest

CSP = {
    "default-src": "'none'",
    "script-src": "'self'",
    "style-src": "'self' 'unsafe-inline'",
    "img-src": "'self' data: blob:",
    "connect-src": "'self'",
    "font-src": "'self'",
    "base-uri": "'none'",
    "form-action": "'self'",
    "frame-ancestors": "'none'",
}
URLS = ["/", "/nowhere", "/healthz", "/api/drafts", "/api/nothing", "/api/openapi.json", "/static/css/tokens.css", "/static/nothing.js"]


@pytest.mark.parametrize("url", URLS)
def test_every_response_carries_the_headers(client, url):
    with client.get(url) as response:
        headers = response.headers
    assert dict(part.strip().split(" ", 1) for part in headers["Content-Security-Policy"].split(";")) == CSP
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert headers["Referrer-Policy"] == "no-referrer"
    assert headers["Cross-Origin-Resource-Policy"] == "same-origin"


@pytest.mark.parametrize("host", ["127.0.0.1", "127.0.0.1:8470", "localhost", "LOCALHOST:1", "[::1]", "[::1]:8470"])
def test_this_machine_is_answered(client, host):
    assert client.get("/healthz", headers={"Host": host}).status_code == 200


@pytest.mark.parametrize(
    "host", ["example.org", "localhost.example.org", "127.0.0.1.example.org", "127.0.0.2", "", "a b", "[::2]", "localhost:x"]
)
def test_a_foreign_host_is_refused(client, is_problem, host):
    is_problem(client.get("/api/drafts", headers={"Host": host}), 400, "host")
    assert client.get("/", headers={"Host": host}).status_code == 400


FOREIGN = [
    {"Origin": "https://example.org"},
    {"Origin": "null"},
    {"Origin": "http://localhost:9999"},
    {"Origin": "https://localhost"},
    {"Sec-Fetch-Site": "cross-site"},
    {"Sec-Fetch-Site": "same-site"},
    {"Sec-Fetch-Site": "cross-site", "Origin": "http://localhost"},
]


@pytest.mark.parametrize("headers", FOREIGN)
@pytest.mark.parametrize("method", ["POST", "PUT", "DELETE", "PATCH"])
def test_writes_from_another_site_are_refused(client, is_problem, headers, method):
    is_problem(client.open("/api/drafts", method=method, headers=headers, json={"doc": {}}), 403, "cross-site")
    assert client.get("/api/drafts").json == {"items": []}


@pytest.mark.parametrize("headers", [{"Origin": "http://localhost"}, {"Sec-Fetch-Site": "same-origin"}, {"Sec-Fetch-Site": "none"}, {}])
def test_own_pages_and_scripts_may_write(client, headers):
    assert client.post("/api/drafts", headers=headers, json={"doc": {}}).status_code == 201


def test_modules_are_sent_as_javascript(client, app, tmp_path):
    import mimetypes

    assert mimetypes.guess_type("page.js")[0] == "text/javascript"


def test_nothing_outside_the_static_folder_is_served(client):
    for url in ("/static/../app.py", "/static/%2e%2e/app.py", "/static/..%2fapp.py"):
        assert client.get(url).status_code in (400, 404)
