"""Short addresses of the pages, for mails and for people: /tank?id=l3 leads to the page itself."""

from __future__ import annotations

from typing import TYPE_CHECKING
from urllib.parse import urlencode

from starlette.responses import RedirectResponse
from starlette.routing import Route

from dashboard.browser.pages import ROOMS

if TYPE_CHECKING:
    from starlette.requests import Request


async def way(request: Request) -> RedirectResponse:
    """Lead to the page of this name, with whatever else the address says."""
    page = request.url.path.rsplit("/", 1)[-1]
    query = {**request.query_params, "page": page}
    return RedirectResponse(f"./?{urlencode(query)}")


ROUTES = [Route(f"/{page}", way) for page in ROOMS]
