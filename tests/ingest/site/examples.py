"""Site files of an invented hatchery, for the tests of everything that needs one."""

from __future__ import annotations

SMALL = """\
site: {id: larkfen, name: Larkfen, time_zone: Europe/Lisbon}
tanks:
  - {id: t1, name: Tank 1, volume_L: 800, set_point: {salinity: 30}}
sensors:
  - id: t1-ct
    tank: t1
    topic: larkfen/t1
    fields: {conductivity: ec, temperature: temp}
"""

FULL = """\
site:
  id: larkfen
  name: Larkfen Shore Hatchery
  time_zone: Europe/Lisbon
  position: {latitude: 38.5, longitude: -9.0}
  elevation_m: 4
  default_actor: {name: Duty, role: operator}
  horizon: {past_h: 8760, future_min: 10}
  salinity_label: ppt
store: {path: run/store, hot_days: 400, commit_interval_s: 0.02}
intake: {largest_payload_kB: 32}
broker:
  host: 127.0.0.1
  port: 1883
  protocol: 5
  tls: false
  ca_file: null
  user: larkfen
  secret: broker-password
  client_id: larkfen-worker
board: {host: 127.0.0.1, port: 8501, allowed_hosts: [127.0.0.1, localhost], public_url: null}
source_waters:
  - {id: intake, name: Tidal intake, kind: seawater}
  - {id: well, name: Borehole, kind: borehole}
analyses:
  - id: borehole
    name: Borehole, deep
    ions: {Na: 1500, K: 12, Ca: 210, Mg: 95, Cl: 2600, SO4: 240, HCO3: 310}
    unit: mg/L
    temperature_degC: 25
    density_kg_m3: 1002.1
    sampled_on: 2026-03-01
halls:
  - {id: larval, name: Larval hall}
tanks:
  - id: l3
    name: L3
    hall: larval
    volume_L: 1000
    water: seawater
    set_point: {salinity: 31, band: 2, temperature_degC: 28.5, temperature_band_K: 2}
    first_stock: {id: l3-a, animal: penaeus-vannamei/pl10, number: 80000, used_to_salinity: 31, since: 2026-11-20}
  - {id: p1, name: Pond 1, hall: larval, volume_L: 500000, water: borehole, set_point: {tidal_band: [2, 6]}}
sensors:
  - id: l3-ct
    tank: l3
    since: 2026-01-01
    topic: larkfen/larval/l3/ct
    payload: json
    fields: {conductivity: ec.value, temperature: temp, pressure: null, time: t}
    time_format: iso
    conductivity_unit: mS/cm
    temperature_unit: degC
    pressure_unit: dbar
    reports: compensated
    compensation: {method: linear, coefficient_percent_per_K: 1.91, reference_temperature_degC: 25}
    interval_s: 10
    accuracy: {conductivity_percent: 0.5, conductivity_mS_cm: 0.01, temperature_K: 0.1}
    span: {conductivity_mS_cm: [0, 80], temperature_degC: [0, 40]}
    channels:
      oxygen: {field: do.mg, unit: mg/L, low: 4.5, high: null}
  - id: intake-ct
    source_water: intake
    topic: larkfen/intake
    payload: number
    fields: {conductivity: ec, temperature: temp}
    conductivity_unit: uS/cm
    interval_s: 30
    pair_within_s: 8
  - {id: p1-ct, tank: p1, topic: larkfen/gateway, payload: senml-cbor, fields: {conductivity: p1-ec, temperature: p1-t}}
  - {id: p1-low, tank: p1, topic: larkfen/gateway, payload: senml-cbor, fields: {conductivity: p2-ec, temperature: p2-t}}
species:
  - animal: penaeus-vannamei/pl10
    figures: {tolerable_low_ppt: 6}
    author: M. Lark
    reason: twelve batches without loss at 6
"""
