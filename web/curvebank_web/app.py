"""Assembly of the app: settings, guards, services, blueprints. No view lives here."""

import mimetypes
from typing import Any

from flask import jsonify
from flask_openapi import Info, OpenAPI
from werkzeug.wrappers import Response

from curvebank import __version__

from . import pages, problems, security, services
from .api import BLUEPRINTS
from .api.models import ProblemModel

UPLOAD_LIMIT = 200_000_000


def build(config: dict[str, Any]) -> OpenAPI:
    """See ``curvebank_web.create_app``."""
    mimetypes.add_type("text/javascript", ".js")  # some Windows registries say text/plain, and browsers refuse such modules
    mimetypes.add_type("image/svg+xml", ".svg")
    app = OpenAPI(
        "curvebank_web",
        info=Info(
            title="Curvebank", version=__version__, description="The local web app's interface. Every error is RFC 9457 problem details."
        ),
        doc_ui=False,
        validation_error_model=ProblemModel,
        validation_error_callback=problems.refuse_invalid,
    )
    app.config.from_mapping({"MAX_CONTENT_LENGTH": UPLOAD_LIMIT, "MAX_FORM_PARTS": 20, **config})
    app.url_map.strict_slashes = False
    problems.register(app)
    security.register(app)
    services.start(app)
    for blueprint in BLUEPRINTS:
        app.register_api(blueprint)
    app.register_blueprint(pages.blueprint)

    @app.get("/api/openapi.json", doc_ui=False)
    def openapi() -> Response:
        return jsonify(openapi_document(app))

    @app.get("/healthz", doc_ui=False)
    def health() -> Response:
        return jsonify({"ok": True, "version": __version__})

    return app


def openapi_document(app: OpenAPI) -> dict[str, Any]:
    """The OpenAPI document, with errors declared as what they are: one problem object, of one media type."""
    document = app.api_doc
    schema = {"$ref": "#/components/schemas/ProblemModel"}
    for path in document["paths"].values():
        for operation in path.values():
            operation["responses"].pop("422", None)
            operation["responses"]["default"] = {
                "description": "What went wrong (RFC 9457)",
                "content": {problems.MEDIA_TYPE: {"schema": schema}},
            }
    return document
