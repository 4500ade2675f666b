"""Every published value of SenML, against this project's reader."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

import pytest

from ingest.payloads import PayloadError, senml
from ingest.payloads.senml_units import PRIMARY_UNITS, SECONDARY_UNITS, scale_to_declared, to_primary
from tests.reference.published import FOLDER, header

NOW_S = 1_700_000_000


def table() -> list[dict[str, str]]:
    lines = (FOLDER / "rfc_8428.csv").read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def pack(text: str) -> list[senml.Resolved]:
    return senml.resolved(senml.records_from_json(text.encode()), now_s=NOW_S)


def cbor(text: str) -> list[Any]:
    payload = bytes.fromhex(text)
    records = senml.records_from_cbor(payload)
    first = senml.resolved(records, now_s=NOW_S)
    times = [record.time_s for record in first if record.name.endswith("voltage")]
    return [len(payload), len(records), [record.v for record in records], records[0].bver, *times]


def cbor_value(text: str) -> object:
    return senml.resolved(senml.records_from_cbor(bytes.fromhex(text)), now_s=NOW_S)[0].value


def first_time_of(text: str, name: str) -> float:
    return next(record.time_s for record in pack(text) if record.name == name)


def refused(text: str) -> str:
    with pytest.raises(PayloadError) as caught:
        pack(text)
    return caught.value.code


READERS: dict[str, Callable[[str], Any]] = {
    "names_units_values": lambda text: [[r.name.rpartition(":")[2], r.unit, r.value] for r in pack(text)],
    "units": lambda text: [record.unit for record in pack(text)],
    "last_time_and_value": lambda text: [pack(text)[-1].time_s, pack(text)[-1].value],
    "times": lambda text: [record.time_s for record in pack(text)],
    "values": lambda text: [record.value for record in pack(text)],
    "sums": lambda text: [record.sum for record in pack(text)],
    "cbor_length_records_values_version_time": cbor,
    "cbor_value": cbor_value,
    "refused": refused,
    "version_with_secondary_units": lambda _: senml.SECONDARY_UNITS_VERSION,
    "is_name": lambda text: [senml.is_name(name) for name in json.loads(text)],
    "data_value": lambda text: senml.data_value(text).hex(),
    "ratios": lambda text: [to_primary(*pair)[0] for pair in json.loads(text)],
    "registered": lambda text: [unit in PRIMARY_UNITS or unit in SECONDARY_UNITS for unit in json.loads(text)],
}


def test_the_table_names_its_source() -> None:
    assert "RFC 8428" in header("rfc_8428")["source"]


@pytest.mark.parametrize("row", table(), ids=lambda row: row["id"])
def test_published_value(row: dict[str, str]) -> None:
    quantity, _, name = row["quantity"].partition(":")
    found = first_time_of(row["inputs"], name) if name else READERS[quantity](row["inputs"])
    try:
        expected = json.loads(row["expected"])
    except json.JSONDecodeError:
        expected = row["expected"]
    tolerance = float(row["tolerance"])
    if tolerance:
        assert found == pytest.approx(expected, rel=0, abs=tolerance)
    else:
        assert found == expected, row["source"]


def test_the_smallest_absolute_time_is_a_day_in_1978() -> None:
    assert datetime.fromtimestamp(senml.RELATIVE_BELOW_S, UTC) == datetime(1978, 7, 4, 21, 24, 16, tzinfo=UTC)


def test_conductivity_travels_in_siemens_per_metre() -> None:
    """53000 uS/cm is 5.3 S/m: IANA registry of SenML units, looked up; uS/cm itself is not registered."""
    scale = scale_to_declared("S/m", "uS/cm")
    assert scale is not None
    assert 5.3 * scale.factor == pytest.approx(53_000, rel=1e-12)
    assert scale_to_declared("uS/cm", "uS/cm") is None
