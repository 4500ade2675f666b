"""/health and /metrics on this machine only, answered by the worker itself, with or without a board."""

from __future__ import annotations

import threading
from http import HTTPStatus
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from typing import TYPE_CHECKING, Any

import msgspec

if TYPE_CHECKING:
    from ingest.worker.worker import Worker

LOOPBACK = "127.0.0.1"


def condition(worker: Worker) -> dict[str, Any]:
    """Return how the worker is: connected or not, what waits, what went wrong last."""
    intake = worker.intake
    return {
        "is_well": intake.is_connected
        and not worker.last_problem
        and not worker.site_problem
        and not worker.calling.problem,
        "broker_connected": intake.is_connected,
        "waiting_messages": intake.waiting,
        "dropped_by_broker": intake.dropped_by_broker,
        "refused_subscriptions": intake.refused_subscriptions,
        "problem": worker.last_problem or worker.site_problem or intake.last_problem,
        **worker.calling.condition(),
        "site_revision": worker.plant.numbers.revision,
        "schema": worker.store.schema,
    }


def metrics(worker: Worker) -> str:
    """Return the counters in the text exposition format, version 0.0.4."""
    state = condition(worker)
    lines = []
    for name, kind, value in (
        ("broker_connected", "gauge", int(state["broker_connected"])),
        ("waiting_messages", "gauge", state["waiting_messages"]),
        ("dropped_by_broker_total", "counter", state["dropped_by_broker"]),
        ("broker_connects_total", "counter", worker.intake.connects),
    ):
        lines += [f"# TYPE euryhale_{name} {kind}", f"euryhale_{name} {value}"]
    lines.append("# TYPE euryhale_events_total counter")
    lines += [f'euryhale_events_total{{kind="{name}"}} {value}' for name, value in sorted(dict(worker.counts).items())]
    lines.append("# TYPE euryhale_step_seconds_total counter")
    lines += [
        f'euryhale_step_seconds_total{{step="{step}"}} {spent:.6f}' for step, spent in worker.stopwatch.spent_s.items()
    ]
    return "\n".join(lines) + "\n"


def serve(worker: Worker, *, port: int) -> ThreadingHTTPServer:
    """Answer on loopback at *port* (0: any free one) until the server's `shutdown` is called."""

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            if self.path == "/health":
                state = condition(worker)
                status = HTTPStatus.OK if state["is_well"] else HTTPStatus.SERVICE_UNAVAILABLE
                self._answer(status, "application/json", msgspec.json.encode(state))
            elif self.path == "/metrics":
                self._answer(HTTPStatus.OK, "text/plain; version=0.0.4; charset=utf-8", metrics(worker).encode())
            else:
                self._answer(HTTPStatus.NOT_FOUND, "text/plain; charset=utf-8", b"/health or /metrics\n")

        def _answer(self, status: HTTPStatus, kind: str, body: bytes) -> None:
            self.send_response(status)
            self.send_header("Content-Type", kind)
            self.send_header("Content-Length", str(len(body)))
            self.end_headers()
            self.wfile.write(body)

        def log_message(self, *_: Any) -> None:
            """Say nothing: a look at the health is no event."""

    server = ThreadingHTTPServer((LOOPBACK, port), Handler)
    threading.Thread(target=server.serve_forever, name="health", daemon=True).start()
    return server
