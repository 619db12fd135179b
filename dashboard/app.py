"""The pages as a Flask application: doors, headers, tokens and errors in one place."""

from __future__ import annotations

import hmac
import secrets
from collections.abc import Sequence
from pathlib import Path

from flask import Flask, Response, abort, current_app, make_response, render_template, request
from werkzeug.exceptions import HTTPException

from dashboard import views, words
from dashboard.models import Doors, Station
from monitor import control
from monitor.clock import SystemClock
from monitor.core.alarms import AlertRule
from monitor.core.errors import FieldsillError
from monitor.record.reader import Record

POLICY = (
    "default-src 'none'; style-src 'self'; script-src 'self'; connect-src 'self'; img-src 'self'; "
    "form-action 'self'; base-uri 'none'; frame-ancestors 'none'"
)
HEADERS = {
    "Content-Security-Policy": POLICY,
    "X-Content-Type-Options": "nosniff",
    "Referrer-Policy": "no-referrer",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
}
LOOPBACK_NAMES = ("localhost", "127.0.0.1", "[::1]")
MAX_FORM_BYTES = 4096


def create_app(
    record_path: Path,
    control_path: Path,
    *,
    name: str = "",
    place: str = "",
    occupancy: str = "public",
    silence_after_s: float = 30.0,
    alerts: Sequence[AlertRule] = (),
    loopback: bool = True,
    doors: Doors | None = None,
) -> Flask:
    """The application over one record and its daemon.

    loopback: the pages are reached from this machine alone; only then do they answer to local
    host names alone, and only then may a person confirm or mute an alarm on them.
    """
    app = Flask(__name__)
    app.config.update(MAX_CONTENT_LENGTH=MAX_FORM_BYTES, SEND_FILE_MAX_AGE_DEFAULT=3600)
    app.json.sort_keys = False  # type: ignore[attr-defined]
    app.jinja_options = {"trim_blocks": True, "lstrip_blocks": True}
    app.extensions["fieldsill"] = views.Context(
        station=Station(
            record_path, control_path, name, place, occupancy, silence_after_s, tuple(alerts)
        ),
        doors=doors or real_doors(),
        token=secrets.token_urlsafe(24),
        may_act=loopback,
    )
    app.jinja_env.globals.update(words=words)
    if loopback:
        app.before_request(_refuse_foreign_hosts)
    app.before_request(_refuse_foreign_forms)
    app.after_request(_add_headers)
    app.register_blueprint(views.pages)
    app.register_error_handler(FieldsillError, _expected_error)
    app.register_error_handler(HTTPException, _http_error)
    return app


def real_doors() -> Doors:
    """The daemon's control socket, the record's reader and the clock of this machine."""
    return Doors(control.ask, Record.open, SystemClock().utc_ns)


def _refuse_foreign_hosts() -> None:
    """A page of another name that resolves to this machine gets nothing (DNS rebinding)."""
    name = request.host
    bare = name if name.endswith("]") else name.rpartition(":")[0] or name
    if bare.lower() not in LOOPBACK_NAMES:
        abort(421, "These pages answer to localhost and 127.0.0.1 alone; use one of them.")


def _refuse_foreign_forms() -> None:
    if request.method != "POST":
        return
    context: views.Context = current_app.extensions["fieldsill"]
    if not context.may_act:
        abort(403, "Alarms are confirmed and muted on the monitor itself (address 127.0.0.1).")
    origin = request.headers.get("Origin")
    if origin not in (None, "null", request.host_url.rstrip("/")):
        abort(403, "This form came from another site; open the monitor's own page and repeat.")
    if not hmac.compare_digest(request.form.get("token", "").encode(), context.token.encode()):
        abort(403, "This form is out of date; open the page again and repeat.")


def _add_headers(response: Response) -> Response:
    response.headers.update(HEADERS)
    if request.endpoint != "static":
        response.headers["Cache-Control"] = "no-store"
    return response


_OWN_WORDS = {
    404: "There is no page at this address. The pages here are Now, History and Spectrum.",
    405: "This address takes no such request; follow a link instead.",
    413: "That is more than a form of these pages holds; open the page again and repeat.",
    500: "The pages have met a fault of their own; open the page again. The monitor goes on.",
}


def _expected_error(error: FieldsillError) -> Response:
    code = 400 if error.exit_code == 2 else 503
    return _error(code, str(error))


def _http_error(error: HTTPException) -> Response:
    return _error(error.code or 500, _OWN_WORDS.get(error.code or 500, error.description or ""))


def _error(code: int, text: str) -> Response:
    """One line of what is wrong: a page for a person, problem details (RFC 9457) for the API."""
    if request.path.startswith(("/api/", "/health")):
        document = {"title": text, "status": code}
        response = make_response(document, code)
        response.mimetype = "application/problem+json"
        return response
    return make_response(render_template("error.html", code=code, text=text), code)
