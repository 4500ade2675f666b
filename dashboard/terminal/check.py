"""`euryhale check FILE`: everything that is wrong with a site file, or a short word on what is installed."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ingest.site.loading import load
from ingest.site.problems import SiteFileError

if TYPE_CHECKING:
    import argparse
    from collections.abc import Sequence

    from ingest.site.models import Site
    from ingest.site.problems import Problem
    from ingest.site.sensors import Sensor

HELP = "check a site file and say what is installed"
BROKEN = 1


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("check", help=HELP, description=HELP)
    parser.add_argument("file", type=Path, metavar="FILE", help="the site file")
    parser.add_argument("--json", action="store_true", help="print one JSON object")


def run(args: argparse.Namespace) -> int:
    """Check the file; 0 if it can be used, 1 if not."""
    try:
        site = load(args.file)
    except SiteFileError as error:
        _print_problems(error.problems, as_json=args.json)
        return BROKEN
    if args.json:
        print(json.dumps({"file": str(args.file), "is_usable": True, "problems": [], "installed": installed(site)}))
    else:
        print("\n".join(summary(site)))
    return 0


def _print_problems(problems: Sequence[Problem], *, as_json: bool) -> None:
    if as_json:
        found = [problem._asdict() for problem in problems]
        print(json.dumps({"file": problems[0].file, "is_usable": False, "problems": found, "installed": None}))
        return
    for problem in problems:
        print(problem, file=sys.stderr)
    print(f"{_count(len(problems), 'problem')}; nothing was changed", file=sys.stderr)


def installed(site: Site) -> dict[str, Any]:
    """Return what a site file installs, as numbers and ids."""
    return {
        "site": site.id,
        "time_zone": site.identity.time_zone,
        "broker": f"{site.broker.host}:{site.broker.port}",
        "halls": [hall.id for hall in site.halls],
        "source_waters": [water.id for water in site.source_waters],
        "tanks": [tank.id for tank in site.tanks],
        "sensors": [sensor.id for sensor in site.sensors],
        "tanks_without_sensor": [tank.id for tank in site.tanks if not site.sensors_of_tank(tank.id)],
        "tanks_without_set_point": [tank.id for tank in site.tanks if tank.set_point is None],
    }


def summary(site: Site) -> list[str]:
    """Return what a site file installs, in lines for a person."""
    broker = site.broker
    secure = ", encrypted" if broker.tls else ""
    lines = [
        f"{site.name} ({site.id}), {site.identity.time_zone}",
        f"{_count(len(site.tanks), 'tank')} in {_count(len(site.halls), 'hall')}, "
        f"{_count(len(site.sensors), 'sensor')}, {_count(len(site.source_waters), 'source water')}",
        f"broker {broker.host}, port {broker.port}, MQTT {broker.protocol}{secure}, as {site.client_id}",
    ]
    ids = [tank.id for tank in site.tanks] + [water.id for water in site.source_waters]
    width = max(map(len, ids), default=0)
    lines += [f"  {tank.id:<{width}}  {_about(site, tank.id)}" for tank in site.tanks]
    for water in site.source_waters:
        sensors = [sensor for sensor in site.sensors if sensor.source_water == water.id]
        if sensors:
            lines.append(f"  {water.id:<{width}}  {water.kind}, source water; {_sensors(sensors)}")
    unwatched = [tank.id for tank in site.tanks if not site.sensors_of_tank(tank.id)]
    if unwatched:
        lines.append(f"no sensor sits in: {', '.join(unwatched)}")
    lines.append("the file can be used")
    return lines


def _about(site: Site, tank_id: str) -> str:
    """Return one tank's water, set point, stock and sensors in a line."""
    tank = site.tank(tank_id)
    parts = [f"{tank.volume_L:,.0f} L {tank.water}"]
    if tank.set_point is None:
        parts.append("no set point")
    elif tank.set_point.tidal_band is not None:
        low, high = tank.set_point.tidal_band
        parts.append(f"salinity {low:g} to {high:g} with the tide")
    elif tank.set_point.salinity is not None:
        band = tank.set_point.band
        parts.append(f"salinity {tank.set_point.salinity:g}" + (f" ± {band:g}" if band is not None else ""))
    if tank.first_stock is not None:
        parts.append(f"{tank.first_stock.number:,} {tank.first_stock.animal}")
    parts.append(_sensors(site.sensors_of_tank(tank_id)))
    return "; ".join(parts)


def _sensors(sensors: Sequence[Sensor]) -> str:
    return ", ".join(f"{sensor.id} ({sensor.reports})" for sensor in sensors) or "no sensor"


def _count(number: int, thing: str) -> str:
    return f"{number} {thing}{'' if number == 1 else 's'}"
