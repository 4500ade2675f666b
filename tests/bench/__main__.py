"""`make bench`: prints the figures of this machine, in this hour."""

from __future__ import annotations

import tempfile
from pathlib import Path

from tests.analysis.sensor.quality import speed
from tests.bench import road


def print_road(folder: Path) -> None:
    found = road.road(folder / "road", readings=60_000, sensors=100)
    print(f"bare paho loop that only acknowledges   {found.bare:9,.0f} readings/s")
    print(f"the whole worker, wire to committed row {found.worker:9,.0f} readings/s")
    print(f"ratio                                   {found.ratio:9.2f}   (asked for: at least 0.5)")
    total = sum(found.steps.values())
    for step, spent in sorted(found.steps.items(), key=lambda item: -item[1]):
        print(
            f"   {step:<12} {100 * spent / total:5.1f} % of the worker's own steps, {spent / 60_000 * 1e6:6.2f} us a reading"
        )


def print_lateness(folder: Path) -> None:
    median, high, worst = road.lateness(folder / "late", sensors=1000, seconds=30)
    print(
        f"publish to committed row, 1,000 sensors at 1 Hz, 30 s: median {median:.3f} s, 99 % {high:.3f} s, worst {worst:.3f} s"
    )


def print_memory(folder: Path) -> None:
    found = road.memory(folder, sensors=1000, seconds=3600, marks=(60, 600, 1800, 3600))
    print("memory of the worker, 1,000 sensors, an hour's worth of readings:")
    for seconds, megabytes in found.items():
        print(f"   after {seconds / 60:4.0f} min of readings {megabytes:7.1f} MB")


def print_quality() -> None:
    print(
        "a million readings through conversion, uncertainty and all quality tests (asked for: less than 8 times bare):"
    )
    for line in speed.measure().lines():
        print(f"   {line}")


def main() -> None:
    print_quality()
    with tempfile.TemporaryDirectory(prefix="euryhale-bench-") as name:
        folder = Path(name)
        print_road(folder)
        print_lateness(folder)
        print_memory(folder)


if __name__ == "__main__":
    main()
