from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from pipeline.problems import SettingsProblem
from pipeline.process import process_cruise
from pipeline.settings import Settings, read_settings
from pipeline.tables import floats
from pipeline.usable import Rows
from tests.invented import EXPOCODE, bottle_file, cast_file, read

if TYPE_CHECKING:
    from pathlib import Path

    import pyarrow as pa

    from pipeline.process import ProcessedCruise


def settings(**corrections: dict[str, object]) -> Settings:
    of_cruise = {name: {"reason": "invented", **one} for name, one in corrections.items()}
    return Settings.model_validate({"corrections": {EXPOCODE: of_cruise}})


def processed(given: Settings, *rows: dict[str, str]) -> ProcessedCruise:
    deliveries = [read(bottle_file(*rows)), read(cast_file(), "cruise_ct1.csv")]
    return process_cruise(EXPOCODE, deliveries, given)


def samples(given: Settings, *rows: dict[str, str]) -> pa.Table:
    return processed(given, *rows).tables["samples"]


def test_the_corrected_value_stands_beside_the_delivered_one_and_is_what_is_used() -> None:
    given = settings(bottle_oxygen={"factor": 0.99}, nitrate={"add": -0.5})
    plain, table = samples(Settings()), samples(given)
    assert floats(table, "bottle_oxygen").tolist() == [200.0]
    assert floats(table, "bottle_oxygen_corrected").tolist() == [198.0]
    assert floats(table, "nitrate_corrected").tolist() == [29.5]
    assert floats(table, "oxygen").tolist() == [198.0]
    assert floats(table, "aou")[0] == pytest.approx(floats(plain, "aou")[0] + 2.0)
    assert floats(table, "n_star")[0] == pytest.approx(floats(plain, "n_star")[0] - 0.5)
    assert not [name for name in plain.column_names if name.endswith("_corrected")]


def test_a_corrected_salinity_goes_into_the_densities() -> None:
    plain, table = samples(Settings()), samples(settings(bottle_salinity={"add": 0.01}))
    assert floats(table, "practical_salinity")[0] == pytest.approx(34.511)
    assert floats(table, "sigma4")[0] > floats(plain, "sigma4")[0] + 0.005


def test_flags_and_checks_are_those_of_the_delivered_value() -> None:
    given = settings(nitrate={"factor": 3.0})  # beyond what is plausible, which is for the delivered value
    table = samples(given, {}, {"NITRAT_FLAG_W": "4"}, {"NITRAT": "-999.0", "NITRAT_FLAG_W": "9"})
    assert table.column("nitrate_check").to_pylist() == [1, 1, 9]
    np.testing.assert_array_equal(floats(table, "nitrate_corrected"), [90.0, 90.0, np.nan])
    np.testing.assert_array_equal(Rows(table, given.use).usable("nitrate"), [90.0, np.nan, np.nan])


def test_the_metadata_and_a_finding_say_what_was_done_and_why() -> None:
    made = processed(settings(bottle_oxygen={"add": -3.0}, ctd_salinity={"factor": 1.0001}))
    field = made.tables["samples"].schema.field("bottle_oxygen_corrected")
    assert field.metadata[b"correction"] == b"lowered by 3.0 umol kg-1"
    assert field.metadata[b"correction_reason"] == b"invented"
    assert field.metadata[b"units"] == b"umol kg-1"
    assert "ctd_salinity_corrected" in made.tables["casts"].column_names
    told = {f.variable: f.message for f in made.findings if f.check == "corrected"}
    assert told["bottle_oxygen"] == (
        f"{EXPOCODE}: bottle_oxygen of 1 sample was lowered by 3.0 umol kg-1, as the settings say (invented); the"
        " delivered values stand beside it."
    )
    assert "ctd_salinity of 1 sample and 2 CTD levels was multiplied by 1.0001" in told["ctd_salinity"]


def test_a_correction_of_what_was_not_delivered_is_told() -> None:
    (told,) = [
        f for f in processed(settings(silicate={"factor": 0.9})).findings if f.check == "correction-unused"
    ]
    assert told.message == (
        f"{EXPOCODE}: the settings correct silicate, which this cruise did not deliver; nothing was done; remove the"
        " correction, or correct the name of its quantity."
    )


def test_no_other_cruise_changes_anything() -> None:
    other = Settings.model_validate(
        {"corrections": {"ZZV999": {"nitrate": {"factor": 0.9, "reason": "invented"}}}}
    )
    assert samples(other).equals(samples(Settings()))


def test_what_a_cruise_depends_on_holds_its_own_corrections_alone() -> None:
    plain = Settings()
    both = Settings.model_validate(
        {
            "crossovers": {"reference": ["ZZVA"]},
            "corrections": {
                "ZZVA": {"nitrate": {"factor": 0.9, "reason": "invented"}},
                "ZZVB": {"dic": {"add": 4.0, "reason": "invented"}},
            },
        }
    )
    assert both.for_cruise("ZZVC").sha256 == plain.for_cruise("ZZVC").sha256 == plain.sha256
    assert both.for_cruise("ZZVA").sha256 not in {plain.sha256, both.for_cruise("ZZVB").sha256}
    assert both.for_cruise("ZZVA").corrections_of("ZZVA") == {
        "nitrate": {"factor": 0.9, "reason": "invented"}
    }
    assert both.for_cruise("ZZVA").corrections_of("ZZVB") == {}


@pytest.mark.parametrize(
    ("written", "sentence"),
    [
        (
            'bottle_oxigen]\nfactor = 0.9\nreason = "r"',
            "line 1: 'corrections.ZZVA.bottle_oxigen' is 'bottle_oxigen'; expected a measured quantity by its column,"
            " such as bottle_oxygen; correct it.",
        ),
        (
            'temperature]\nadd = 0.1\nreason = "r"',
            "line 1: 'corrections.ZZVA.temperature' is 'temperature'; expected a measured quantity by its column,"
            " such as bottle_oxygen; correct it.",
        ),
        (
            'nitrate]\nfactor = 0.9\nadd = 1.0\nreason = "r"',
            "line 1: 'corrections.ZZVA.nitrate' is {'factor': 0.9, 'add': 1.0, 'reason': 'r'}; expected either"
            " 'factor' or 'add', and not both; correct it.",
        ),
        (
            'nitrate]\nreason = "r"',
            "line 1: 'corrections.ZZVA.nitrate' is {'reason': 'r'}; expected either 'factor' or 'add', and not both;"
            " correct it.",
        ),
        (
            'nitrate]\nfactor = 0.0\nreason = "r"',
            "line 2: 'corrections.ZZVA.nitrate.factor' is 0.0; expected greater than 0; correct it.",
        ),
        (
            'nitrate]\nadd = nan\nreason = "r"',
            "line 2: 'corrections.ZZVA.nitrate.add' is nan; expected a finite number; correct it.",
        ),
        ("nitrate]\nadd = 1.0", "line 1: the key 'corrections.ZZVA.nitrate.reason' is missing; add it."),
    ],
)
def test_a_correction_that_cannot_be_used_is_one_sentence(
    tmp_path: Path, written: str, sentence: str
) -> None:
    path = tmp_path / "settings.toml"
    path.write_text(f"[corrections.ZZVA.{written}\n", encoding="utf-8")
    with pytest.raises(SettingsProblem) as told:
        read_settings(path, {})
    assert str(told.value) == f"{path}, {sentence}"
