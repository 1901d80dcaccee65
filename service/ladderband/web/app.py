"""The web application."""

from __future__ import annotations

import threading

from flask import Flask, Response, request

from ladderband.settings import Settings, load_settings
from ladderband.usecases.limits import Limits
from ladderband.web import bench, jobs, operations, pages, problems, sweeps
from ladderband.web.desk import Desk
from ladderband.web.desk import install as install_desk
from ladderband.web.guide.routes import blueprint as guide_blueprint
from ladderband.web.resource import blueprint_of
from ladderband.web.resources import RESOURCES
from ladderband.web.reuse import Kept


def create_app(settings: Settings | None = None, desk: Desk | None = None) -> Flask:
    """A ready application; ``READY`` in its config is an event that /readyz looks at.

    Without a ``desk`` every request is answered in this process and jobs are refused.
    """
    settings = load_settings() if settings is None else settings
    app = Flask("ladderband", static_folder=None)
    app.config["SETTINGS"] = settings
    app.config["LIMITS"] = Limits(work_s=settings.work_s, table_elements=settings.table_elements)
    app.config["READY"] = threading.Event()
    app.config["READY"].set()
    app.config["DESK"] = desk
    app.config["KEPT"] = Kept()
    problems.install(app)
    operations.install(app, settings.log_requests)
    install_desk(app)
    app.register_blueprint(bench.blueprint)
    app.register_blueprint(pages.blueprint)
    app.register_blueprint(guide_blueprint)
    app.register_blueprint(jobs.blueprint)
    app.register_blueprint(sweeps.blueprint)
    for resource in RESOURCES:
        app.register_blueprint(blueprint_of(resource))
    if settings.origins:
        _allow_origins(app, settings.origins)
    return app


def _allow_origins(app: Flask, origins: frozenset[str]) -> None:
    @app.after_request
    def add(response: Response) -> Response:
        origin = request.headers.get("Origin")
        response.headers.add("Vary", "Origin")
        if origin is None or not ("*" in origins or origin in origins):
            return response
        response.headers["Access-Control-Allow-Origin"] = "*" if "*" in origins else origin
        response.headers["Access-Control-Expose-Headers"] = (
            "ETag, X-Request-ID, Retry-After, Location, Content-Range"
        )
        if request.method == "OPTIONS":
            response.headers["Access-Control-Allow-Methods"] = response.headers.get("Allow", "")
            allowed = (
                "Content-Type, Authorization, If-None-Match, Prefer, X-Request-ID, Idempotency-Key, "
                "Last-Event-ID, Range"
            )
            response.headers["Access-Control-Allow-Headers"] = allowed
            response.headers["Access-Control-Max-Age"] = "3600"
        return response
