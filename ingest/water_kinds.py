"""The kinds of water a site names, each made once; the table of a laboratory analysis is kept on disk."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import msgspec
import numpy as np

from analysis.water.properties import Seawater, WaterKind
from analysis.water.sodium_chloride_water import SodiumChlorideWater
from ingest.site.waters import SEAWATER, SODIUM_CHLORIDE

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from ingest.site.models import Site
    from ingest.site.waters import Analysis


def kinds_of(site: Site, *, tables: Path) -> Mapping[str, WaterKind]:
    """Return every kind of water that the site's tanks and source waters name, seawater first, by its word in the site file.

    Parameters
    ----------
    site : Site
    tables : Path
        Folder in which tables of laboratory analyses are kept.

    Raises
    ------
    MissingPackageError
        If a table has to be made and the chemistry engine is not installed.
    InvalidInputError
        If an analysis cannot be right.
    """
    named = {tank.water for tank in site.tanks} | {water.kind for water in site.source_waters}
    kinds: dict[str, WaterKind] = {SEAWATER: Seawater()}
    if SODIUM_CHLORIDE in named:
        kinds[SODIUM_CHLORIDE] = SodiumChlorideWater()
    for analysis in site.analyses:
        if analysis.id in named:
            kinds[analysis.id] = _analysed(analysis, tables)
    return kinds


def _analysed(analysis: Analysis, folder: Path) -> WaterKind:
    # Opened only where it is needed: the interpolation behind it takes a second to load, and most sites have no such water.
    from analysis.water.ionic_table import TABLE_VERSION, IonicTable, tabulate
    from analysis.water.ionic_water import IonicWater

    description = analysis.ion_analysis()
    content = msgspec.json.encode([TABLE_VERSION, analysis.model_dump(mode="json")], order="deterministic")
    path = folder / f"{analysis.id}-{hashlib.sha256(content).hexdigest()[:16]}.npz"
    if path.exists():
        with np.load(path, allow_pickle=False) as stored:
            table = IonicTable.from_arrays(analysis.id, dict(stored))
    else:
        table = tabulate(description)
        folder.mkdir(parents=True, exist_ok=True)
        fresh = path.with_suffix(".new.npz")
        np.savez(fresh, **table.to_arrays())  # type: ignore[arg-type]
        fresh.replace(path)
    return IonicWater(table).fitted_to(description)
