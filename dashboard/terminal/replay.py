"""`euryhale replay FILE --sensor ID`: publish a recorded logger file to the broker as the sensor would."""

from __future__ import annotations

import argparse
import math
import sys
import threading
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path
from typing import TYPE_CHECKING, Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from tqdm import tqdm

from analysis.errors import InvalidInputError
from ingest.clock import MICROSECONDS_PER_SECOND, SystemClock, to_datetime
from ingest.mqtt import Access
from ingest.secrets import read_secret
from ingest.simulator.payloads import QUANTITIES, TIME, Readings, encoder_for
from ingest.simulator.publishing import Publisher, PublishingError
from ingest.simulator.record import Record, Survey
from ingest.site.loading import load

if TYPE_CHECKING:
    from collections.abc import Iterator

    from ingest.clock import Clock
    from ingest.simulator.payloads import Encoder, Message
    from ingest.site.models import Site
    from ingest.site.sensors import Sensor

HELP = "publish a recorded logger file as a sensor would"
EPILOG = (
    "Rows without any value are skipped and counted. Times are shifted so that the last row is measured at the moment "
    "it is sent; --keep-times leaves them as they are and goes with: euryhale watch --clock replay."
)
US_PER_HOUR = 3600 * MICROSECONDS_PER_SECOND


def add_parser(subparsers: Any) -> None:
    """Add this command to the parser."""
    parser = subparsers.add_parser("replay", help=HELP, description=HELP, epilog=EPILOG)
    parser.add_argument("file", type=Path, metavar="FILE", help="the record: any delimited table")
    parser.add_argument("--sensor", required=True, metavar="ID", help="the sensor of the site file that it stands for")
    parser.add_argument("--site", type=Path, default=Path("site.yaml"), help="the site file (default: site.yaml)")
    parser.add_argument(
        "--speed", type=_speed, default=math.inf, metavar="N|max", help="times faster than life, from 1 (default: max)"
    )
    parser.add_argument("--keep-times", action="store_true", help="state the times of the record, not shifted ones")
    parser.add_argument(
        "--column",
        action="append",
        default=[],
        type=_column,
        metavar="QUANTITY=NAME",
        help=f"which column holds {', '.join((TIME, *QUANTITIES))}; time twice for date and time of day "
        "(default: the usual names)",
    )
    parser.add_argument("--zone", type=_zone, help="zone of times without an offset (default: the site's)")


def run(args: argparse.Namespace) -> int:
    """Publish the record and say what became of its rows."""
    site = load(args.site)
    sensor = _sensor(site, args.sensor)
    if not _states_time(sensor) and not math.isclose(args.speed, 1.0):
        allowed = f"1, since sensor {sensor.id} sends no time of its own: its rows are stored at the time they arrive"
        raise InvalidInputError("--speed", found=_speed_text(args.speed), allowed=allowed)
    columns: dict[str, list[str]] = {}
    for quantity, name in args.column:
        columns.setdefault(quantity, []).append(name)
    record = Record(args.file, sensor, columns=columns, zone=args.zone or site.zone)
    survey = record.survey()
    clock = SystemClock()
    pace = Pace.starting(clock.now_us(), survey, speed=args.speed, keeps_times=args.keep_times)
    for line in _said_before(record, survey, pace, site=site):
        print(line, file=sys.stderr)
    with Publisher(_access(site, sensor, site_file=args.site)) as publisher:
        publisher.wait_connected()
        count = _publish(record, survey, pace, publisher, encoder=encoder_for(sensor), clock=clock)
    refused = f"{publisher.refused} refused by the broker, {count.without_time} without a time that can be read"
    print(f"{count.sent} rows sent and acknowledged; {count.blank} blank rows skipped; {refused}")
    return 1 if publisher.refused else 0


@dataclass
class Count:
    """What became of the rows."""

    sent: int = 0
    blank: int = 0
    without_time: int = 0


@dataclass(frozen=True)
class Pace:
    """When each row is sent, and which time it states.

    Parameters
    ----------
    start_us : int
        When the first row is sent. [us since 1970, UTC]
    first_us : int
        The oldest time of the record.
    speed : float
        Times faster than life, 1 or more; infinite for as fast as it goes.
    shift_us : int
        Added to the record's times.
    """

    start_us: int
    first_us: int
    speed: float
    shift_us: int

    @classmethod
    def starting(cls, now_us: int, survey: Survey, *, speed: float, keeps_times: bool) -> Pace:
        """Return the pace of a record that is started now: its last row states the time at which it is sent."""
        lasts_us = (survey.last_us - survey.first_us) / speed
        shift_us = 0 if keeps_times else now_us + round(lasts_us) - survey.last_us
        return cls(now_us, survey.first_us, speed, shift_us)

    def due_us(self, recorded_us: int) -> int:
        """Return when a row of the record is to be sent."""
        return self.start_us + round((recorded_us - self.first_us) / self.speed)


def _publish(
    record: Record, survey: Survey, pace: Pace, publisher: Publisher, *, encoder: Encoder, clock: Clock
) -> Count:
    count, pause = Count(), threading.Event()
    with tqdm(total=survey.rows, unit="row", disable=None, leave=False) as progress:
        for block in record.blocks():
            for due_us, messages in _rows(block.readings, pace, encoder):
                if (wait_s := (due_us - clock.now_us()) / MICROSECONDS_PER_SECOND) > 0.0:
                    pause.wait(wait_s)
                for topic, payload in messages:
                    if not publisher.publish(topic, payload):
                        raise PublishingError("the broker has stopped acknowledging; rows are missing from here on")
                count.sent += 1
                progress.update()
            count.blank += block.blank
            count.without_time += block.refused
            progress.update(block.blank)
    publisher.confirm()
    return count


def _rows(readings: Readings, pace: Pace, encoder: Encoder) -> Iterator[tuple[int, list[Message]]]:
    """Yield the moment at which each row is due, and its messages."""
    stated = Readings(readings.time_us + pace.shift_us, readings.conductivity, readings.temperature, readings.pressure)
    for recorded_us, messages in zip(readings.time_us.tolist(), encoder(stated), strict=True):
        yield pace.due_us(recorded_us), messages


def _said_before(record: Record, survey: Survey, pace: Pace, *, site: Site) -> Iterator[str]:
    for quantity, names in record.columns.items():
        unit = f" [{record.units[quantity]}]" if quantity in record.units else ""
        yield f"{quantity} from column {' and '.join(names)}{unit}"
    first, last = to_datetime(survey.first_us + pace.shift_us), to_datetime(survey.last_us + pace.shift_us)
    yield f"{survey.rows} rows, stated as measured from {first:%Y-%m-%d %H:%M:%S}Z to {last:%Y-%m-%d %H:%M:%S}Z"
    oldest_us = pace.start_us - round(site.identity.horizon.past_h * US_PER_HOUR)
    if survey.first_us + pace.shift_us < oldest_us:
        hours = site.identity.horizon.past_h
        yield f"note: rows older than site.horizon.past_h ({hours:g} h) will be refused by a worker on the system's clock"


def _states_time(sensor: Sensor) -> bool:
    """Return True when the sensor's payload bears its own time."""
    return sensor.payload.startswith("senml") or (sensor.payload == "json" and sensor.fields.time is not None)


def _sensor(site: Site, sensor_id: str) -> Sensor:
    known = [sensor.id for sensor in site.sensors]
    if sensor_id not in known:
        near = get_close_matches(sensor_id, known, n=1)
        hint = f"; nearest: {near[0]}" if near else ""
        raise InvalidInputError("--sensor", found=sensor_id, allowed=f"one of: {', '.join(known)}{hint}")
    return site.sensor(sensor_id)


def _access(site: Site, sensor: Sensor, *, site_file: Path) -> Access:
    broker = site.broker
    return Access(
        host=broker.host,
        port=broker.port,
        client_id=f"{site.client_id}-replay-{sensor.id}",
        is_version_5=broker.protocol == "5",
        user=broker.user,
        password=None if broker.secret is None else read_secret(broker.secret, site_file=site_file),
        is_tls=broker.tls,
        ca_file=None if broker.ca_file is None else (site_file.parent / broker.ca_file).resolve(),
    )


def _speed(text: str) -> float:
    try:
        speed = math.inf if text == "max" else float(text)
    except ValueError:
        speed = math.nan
    if not speed >= 1.0:
        raise argparse.ArgumentTypeError(f"found {text!r}; allowed: max, or a number from 1 up")
    return speed


def _speed_text(speed: float) -> str:
    return "max" if math.isinf(speed) else f"{speed:g}"


def _column(text: str) -> tuple[str, str]:
    quantity, separator, name = text.partition("=")
    if not separator or not name:
        raise argparse.ArgumentTypeError(f"found {text!r}; allowed: QUANTITY=NAME, such as time=Timestamp")
    return quantity.strip(), name.strip()


def _zone(text: str) -> ZoneInfo:
    try:
        return ZoneInfo(text)
    except (ZoneInfoNotFoundError, ValueError) as error:
        raise argparse.ArgumentTypeError(
            f"found {text!r}; allowed: a zone of the IANA list, as Europe/Lisbon"
        ) from error
