"""/health: whether the board answers, and whether somebody watches behind it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from starlette.concurrency import run_in_threadpool
from starlette.responses import JSONResponse
from starlette.routing import Route

from dashboard.browser import house

if TYPE_CHECKING:
    from starlette.requests import Request


async def health(_request: Request) -> JSONResponse:
    """Return what a supervisor needs to know; 200 as long as the board itself works."""
    snapshot = await run_in_threadpool(house.access().snapshot)
    return JSONResponse(
        {
            "board": "up",
            "has_store": snapshot.has_store,
            "is_worker_running": snapshot.is_worker_running,
            "tanks": len(snapshot.tanks),
        }
    )


ROUTES = [Route("/health", health)]
