from __future__ import annotations

import numpy as np
import pytest

from pipeline.checking import check
from pipeline.settings import Settings, UseSettings
from pipeline.tables import with_columns
from pipeline.usable import Rows, usable
from pipeline.working import working_columns
from tests.invented import bottle_file, read

SETTINGS = Settings()


@pytest.mark.parametrize(
    ("changed", "name", "used"),
    [
        ({}, "nitrate", True),
        ({"NITRAT_FLAG_W": "6"}, "nitrate", True),
        ({"NITRAT_FLAG_W": "7"}, "nitrate", False),
        ({"NITRAT_FLAG_W": "0"}, "nitrate", False),
        ({"NITRAT_FLAG_W": "3"}, "nitrate", False),
        ({"NITRAT_FLAG_W": ""}, "nitrate", True),
        ({"CTDSAL_FLAG_W": "7"}, "ctd_salinity", True),
        ({"CTDSAL_FLAG_W": "1"}, "ctd_salinity", False),
        ({"BTLNBR_FLAG_W": "4"}, "nitrate", False),
        ({"BTLNBR_FLAG_W": "4"}, "ctd_salinity", True),
        ({"BTLNBR_FLAG_W": "9"}, "temperature", True),
        ({"NITRAT": "99.0"}, "nitrate", False),
    ],
)
def test_what_may_be_used(changed: dict[str, str], name: str, used: bool) -> None:
    table = read(bottle_file(changed)).table
    table = with_columns(table, check(table, SETTINGS).flags)
    assert np.isfinite(usable(table, name, SETTINGS.use)).tolist() == [used]
    assert table.column(name)[0].as_py() is not None


def test_doubtful_values_are_used_only_where_the_settings_say_so() -> None:
    table = read(bottle_file({"NITRAT_FLAG_W": "2"})).table
    table = with_columns(table, {"nitrate_check": [3]})
    assert np.isnan(usable(table, "nitrate", UseSettings())).all()
    assert usable(table, "nitrate", UseSettings(doubtful=True)).tolist() == [30.0]


def test_the_working_salinity_is_the_bottles_else_the_ctds_else_none() -> None:
    table = read(
        bottle_file(
            {"SALNTY": "35.1", "CTDSAL": "35.2"},
            {"SALNTY": "35.1", "SALNTY_FLAG_W": "4", "CTDSAL": "35.2"},
            {"SALNTY_FLAG_W": "4", "CTDSAL_FLAG_W": "4"},
        )
    ).table
    columns = working_columns(Rows(table, SETTINGS.use))
    np.testing.assert_array_equal(columns["practical_salinity"], [35.1, 35.2, np.nan])
    assert columns["practical_salinity_source"].tolist() == ["bottle", "ctd", None]
    assert columns["oxygen_source"].tolist() == ["bottle"] * 3


def test_usable_values_are_found_once_and_cannot_be_spoiled() -> None:
    data = Rows(read(bottle_file({"NITRAT_FLAG_W": "4"}, {})).table, SETTINGS.use)
    values = data.usable("nitrate")
    assert data.usable("nitrate") is values
    assert np.isnan(values).tolist() == [True, False]
    with pytest.raises(ValueError, match="read-only"):
        values[0] = 1.0
