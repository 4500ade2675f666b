"""/export/tank.csv: the readings behind a chart, as they stand in the store."""

from __future__ import annotations

import csv
import io
import math
from typing import TYPE_CHECKING

from starlette.concurrency import run_in_threadpool
from starlette.responses import PlainTextResponse, Response
from starlette.routing import Route

from dashboard.browser import house
from dashboard.browser.tank_chart import stretch_of
from ingest.clock import to_datetime
from ingest.store.errors import MissingStoreError

if TYPE_CHECKING:
    from starlette.requests import Request

    from dashboard.browser.access import Access
    from dashboard.browser.sights import TankSight
    from ingest.store.queries import History

HEAD = (
    "time_utc",
    "sensor",
    "salinity",
    "salinity_min",
    "salinity_max",
    "temperature_degC",
    "temperature_min_degC",
    "temperature_max_degC",
    "osmolality_mOsm_kg",
    "quality",
)


async def tank_csv(request: Request) -> Response:
    """Return the history of all probes of a tank between `from` and `to` (seconds since 1970, UTC)."""
    return await run_in_threadpool(_answer, dict(request.query_params))


def _answer(query: dict[str, str]) -> Response:
    access = house.access()
    tank = access.snapshot().tank(query.get("id", ""))
    if tank is None:
        return PlainTextResponse("there is no tank of this id", status_code=404)
    try:
        text = tank_table(access, tank, query)
    except MissingStoreError as error:
        return PlainTextResponse(str(error), status_code=404)
    headers = {"Content-Disposition": f'attachment; filename="{tank.id}.csv"'}
    return Response(text, media_type="text/csv; charset=utf-8", headers=headers)


def tank_table(access: Access, tank: TankSight, query: dict[str, str]) -> str:
    """Return the table: single readings, or means with extremes where the stretch is long, as on the chart."""
    stretch = stretch_of(query, now_s=access.clock.now_us() / 1e6)
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(HEAD)
    for sensor in tank.sensors:
        history = access.history(sensor.id, from_us=round(stretch.from_s * 1e6), to_us=round(stretch.to_s * 1e6))
        for i in range(len(history.time_us)):
            writer.writerow(_row(sensor.id, history, i))
    return out.getvalue()


def _row(sensor: str, history: History, i: int) -> tuple[str, ...]:
    values = (
        (history.salinity[i], 4),
        (history.salinity_min[i], 4),
        (history.salinity_max[i], 4),
        (history.temperature_degC[i], 4),
        (history.temperature_min[i], 4),
        (history.temperature_max[i], 4),
        (history.osmolality_mOsm_kg[i], 2),
    )
    time = to_datetime(int(history.time_us[i])).isoformat().replace("+00:00", "Z")
    cells = ("" if math.isnan(value) else f"{value:.{decimals}f}" for value, decimals in values)
    return time, sensor, *cells, str(int(history.quality[i]))


ROUTES = [Route("/export/tank.csv", tank_csv)]
