from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from analysis.errors import InvalidInputError
from analysis.water import freezing
from analysis.water.seawater import osmolality_from_absolute_salinity


@given(osmolality=st.floats(0.0, 6000.0))
def test_osmolality_to_freezing_point_and_back(osmolality: float) -> None:
    temperature = freezing.freezing_point_from_osmolality(osmolality)
    assert float(freezing.osmolality_from_freezing_point(temperature)) == pytest.approx(osmolality, rel=1e-9, abs=1e-7)


def test_sea_water_freezes_where_teos_10_says() -> None:
    salinity = np.linspace(0.0, 115.0, 50)
    by_osmolality = freezing.freezing_point_from_osmolality(osmolality_from_absolute_salinity(salinity))
    np.testing.assert_allclose(by_osmolality, freezing.seawater_freezing_point(salinity), atol=6e-6)


def test_an_osmometer_reads_nearly_the_thermodynamic_value() -> None:
    # Both departures, of the constant and of the curvature, cancel: -0.03 to +0.11 % (our own figure, regression)
    depression = np.linspace(0.05, 3.0, 60)
    ratio = freezing.osmometer_reading_from_depression(depression) / freezing.osmolality_from_freezing_point_depression(
        depression
    )
    assert np.all(np.abs(ratio - 1.0) < 1.2e-3)
    other = freezing.osmometer_reading_from_depression(
        1.858, cryoscopic_constant=freezing.OTHER_CRYOSCOPIC_CONSTANT_K_KG_MOL
    )
    assert float(other) == pytest.approx(1000.0)


def test_colder_is_more_concentrated() -> None:
    temperature = np.linspace(-12.0, 0.0025, 100)
    assert np.all(np.diff(freezing.osmolality_from_freezing_point(temperature)) < 0.0)


def test_what_cannot_be_is_nan() -> None:
    assert np.isnan(freezing.osmolality_from_freezing_point([0.1, -20.0, np.nan])).all()
    assert np.isnan(freezing.freezing_point_from_osmolality([-1.0, 1e5, np.nan])).all()
    assert np.isnan(freezing.seawater_freezing_point([-1.0, 130.0, np.nan])).all()
    with pytest.raises(InvalidInputError, match="cryoscopic"):
        freezing.osmometer_reading_from_depression(1.0, cryoscopic_constant=1.5)
