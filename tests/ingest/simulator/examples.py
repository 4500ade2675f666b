"""Small sites for the simulator's tests."""

from __future__ import annotations

from ingest.site.loading import load_text
from ingest.site.models import Site


def one_tank(
    sensor_lines: str = "", *, water: str = "seawater", salinity: float = 31.0, volume_L: float = 1000
) -> Site:
    """A site with one tank `t1` and one sensor `t1-ct`, which sends every 60 s."""
    return load_text(
        f"""
site: {{id: sandbank, name: Sandbank, time_zone: Europe/Lisbon}}
tanks:
  - id: t1
    name: T1
    volume_L: {volume_L}
    water: {water}
    set_point: {{salinity: {salinity}, temperature_degC: 25}}
sensors:
  - id: t1-ct
    tank: t1
    topic: sandbank/t1
    interval_s: 60
    {sensor_lines or "fields: {conductivity: cond, temperature: temp, time: t}"}
"""
    )
