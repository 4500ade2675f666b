"""The whole site file as one frozen object."""

from __future__ import annotations

from functools import cached_property
from zoneinfo import ZoneInfo

from pydantic import Field

from ingest.site.calls import Answers, CallLine, Duty, LifeSign, Person, TestMessage
from ingest.site.identity import Identity
from ingest.site.records import Records
from ingest.site.section import Section
from ingest.site.sensors import Sensor
from ingest.site.services import Board, Broker, CentralStore, Intake, Store
from ingest.site.species import SpeciesOverride
from ingest.site.tanks import MAIN_HALL, Hall, Tank
from ingest.site.waters import Analysis, SourceWater


class Site(Section):
    """What is installed at a site. Loaded by `ingest.site.loading`; nothing here can change."""

    identity: Identity = Field(alias="site", description="id, name, time_zone")
    store: Store = Field(Store(), description="path, hot_days, commit_interval_s")
    intake: Intake = Field(Intake(), description="largest_payload_kB")
    broker: Broker = Field(Broker(), description="host, port, protocol, tls, user, secret, client_id")
    records: Records = Field(
        Records(), description="correct_above_percent, correct_above_mS_cm, correct_above_K, calibration_valid_days"
    )
    board: Board = Field(Board(), description="host, port, allowed_hosts, public_url")
    central: CentralStore | None = Field(None, description="url, bucket, organisation, token_secret, ca_file")
    source_waters: tuple[SourceWater, ...] = Field((), description="a list of {id, name, kind}")
    analyses: tuple[Analysis, ...] = Field((), description="a list of {id, name, ions}")
    halls: tuple[Hall, ...] = Field(
        (Hall(id=MAIN_HALL, name="Main hall"),), min_length=1, description="a list of {id, name}"
    )
    tanks: tuple[Tank, ...] = Field((), description="a list of {id, name, hall, volume_L, water, set_point}")
    sensors: tuple[Sensor, ...] = Field((), description="a list of {id, tank, topic, fields}")
    species: tuple[SpeciesOverride, ...] = Field((), description="a list of {animal, figures, author, reason}")
    people: tuple[Person, ...] = Field((), description="a list of {id, name, channels}")
    duty: Duty = Field(Duty(), description="shifts, holidays, stand_ins, quiet_hours")
    call_out: tuple[CallLine, ...] = Field((), description="a list of {who, by, wait_min}")
    acknowledgements: Answers | None = Field(None, description="host, port, topic, user, secret, tls, ca_file")
    heartbeat: LifeSign | None = Field(None, description="url_secret, every_s")
    test_message: TestMessage | None = Field(None, description="at")

    @property
    def id(self) -> str:
        """Return the site's id."""
        return self.identity.id

    @property
    def name(self) -> str:
        """Return the site's name."""
        return self.identity.name

    @property
    def client_id(self) -> str:
        """Return the fixed MQTT client id on which the durable session hangs."""
        return self.broker.client_id or f"euryhale-{self.id}"

    @cached_property
    def zone(self) -> ZoneInfo:
        """Return the site's time zone."""
        return ZoneInfo(self.identity.time_zone)

    @cached_property
    def sensor_index(self) -> dict[str, int]:
        """Return the place of each sensor id in `sensors`."""
        return {sensor.id: index for index, sensor in enumerate(self.sensors)}

    @cached_property
    def tank_index(self) -> dict[str, int]:
        """Return the place of each tank id in `tanks`."""
        return {tank.id: index for index, tank in enumerate(self.tanks)}

    def sensor(self, sensor_id: str) -> Sensor:
        """Return the sensor of this id; KeyError if there is none."""
        return self.sensors[self.sensor_index[sensor_id]]

    def tank(self, tank_id: str) -> Tank:
        """Return the tank of this id; KeyError if there is none."""
        return self.tanks[self.tank_index[tank_id]]

    def sensors_of_tank(self, tank_id: str) -> tuple[Sensor, ...]:
        """Return the sensors that sit in this tank, in the order of the file."""
        return tuple(sensor for sensor in self.sensors if sensor.tank == tank_id)

    def water_of(self, sensor: Sensor) -> str:
        """Return the kind of water in which *sensor* sits."""
        if sensor.tank is not None:
            return self.tank(sensor.tank).water
        return next(water.kind for water in self.source_waters if water.id == sensor.source_water)
