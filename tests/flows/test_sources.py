"""The command that judges a catalogue before any cruise is run."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import pytest

from tests.flows.conftest import FIXTURES, call

if TYPE_CHECKING:
    from pathlib import Path

INVENTED = FIXTURES / "sources.toml"
SOURCE = """
[[source]]
code = "{code}"
name = "Invented water"
[source.properties]
{heat} = {{ value = {t}, uncertainty = 0.1 }}
{salt} = {{ value = {s}, uncertainty = 0.01 }}
oxygen = {{ value = {o}, uncertainty = 3.0 }}
silicate = {{ value = {si}, uncertainty = 1.0 }}
"""
SET = """
[[set]]
name = "{name}"
sources = ["NOR", "NOE", "SOU"]
properties = ["conservative_temperature", "preformed_salinity", "oxygen"{more}]
"""
NAMES = ("conservative_temperature", "preformed_salinity")
PUBLISHED = ("potential_temperature", "practical_salinity")
STATE = "[catalogue.reference_state]\nlongitude = -30.0\nlatitude = 40.0\npressure = 2000.0\n"


def too_alike(folder: Path, names: tuple[str, str] = NAMES, state: str = "") -> Path:
    """Write a catalogue whose northern waters are told apart by silicate, which its first set does not use."""
    waters = {
        "NOR": (2.0, 35.0, 290.0, 12.0),
        "NOE": (2.1, 34.98, 288.0, 24.0),
        "SOU": (-0.5, 34.7, 250.0, 90.0),
    }
    path = folder / "alike.toml"
    path.write_text(
        f'[catalogue]\ntitle = "Too alike"\nreference = "no real ocean"\n{state}'
        + "".join(
            SOURCE.format(code=code, heat=names[0], salt=names[1], t=t, s=s, o=o, si=si)
            for code, (t, s, o, si) in waters.items()
        )
        + SET.format(name="three", more="")
        + SET.format(name="four", more=', "silicate"'),
        encoding="utf-8",
    )
    return path


def test_a_catalogue_that_can_be_used() -> None:
    outcome = call("sources", "check", INVENTED)
    assert outcome.status == 0
    assert outcome.err == ""
    assert outcome.out.splitlines() == [
        "Source waters of the Mirrel Sea and the Vesper Basin (invented): 5 sources, 1 set",
        "",
        "interior: 5 shares and respiration from 6 properties and the sum of the shares",
        "  condition number 8.8 (limit 1000), rank 5 of 5 (combinations of the unknowns, the sum aside, that are seen "
        "at all)",
        "  standard uncertainty at equal shares: of each share, and of share moved from one source to another",
        "    source  share    OVF    BOT    DEP    MID    CEN",
        "    OVF     0.027      -  0.037  0.010  0.014  0.019",
        "    BOT     0.048  0.037      -  0.039  0.026  0.019",
        "    DEP     0.031  0.010  0.039      -  0.015  0.021",
        "    MID     0.010  0.014  0.026  0.015      -  0.009",
        "    CEN     0.011  0.019  0.019  0.021  0.009      -",
        "    respiration  0.016 umol/kg of phosphate",
        "  without one property, the one that tells most first",
        "    left out                  condition number  largest share uncertainty",
        "    conservative_temperature              1262                         1+",
        "    oxygen                                 239                         1+",
        "    silicate                               127                      0.813",
        "    preformed_salinity                    53.8                      0.288",
        "    nitrate                               11.4                      0.066",
        "    phosphate                              9.6                      0.056",
        "  good  every source can be told from the others",
    ]


def test_sources_too_alike_are_told_in_a_sentence_and_by_the_status(tmp_path: Path) -> None:
    outcome = call("sources", "check", too_alike(tmp_path))
    assert outcome.status == 1
    first, second = outcome.out.split("\nfour: ")
    assert [line for line in first.splitlines() if line.startswith("  problem")] == [
        "  problem  NOR and NOE can be told apart only to 0.29 of the sample with these properties and "
        "uncertainties; add silicate (then 0.13), or join them."
    ]
    assert second.endswith("  good  every source can be told from the others\n")


def test_what_remains_with_fewer_properties() -> None:
    names = ["conservative_temperature", "preformed_salinity", "oxygen", "phosphate", "nitrate"]
    outcome = call("sources", "check", INVENTED, "--properties", *names)
    assert outcome.status == 1
    assert "  problem  the shares of BOT and DEP are known only to 0.36 and 0.81 of the sample" in outcome.out
    assert "silicate" not in outcome.out.split("problem")[0]
    few = call("sources", "check", INVENTED, "--properties", "oxygen", "silicate")
    assert few.status == 1
    assert "there are 6 unknowns (5 shares and respiration) for 3 equations" in few.out


def test_a_set_of_which_no_property_is_left(tmp_path: Path) -> None:
    outcome = call("sources", "check", too_alike(tmp_path), "--properties", "silicate")
    assert outcome.status == 1
    assert outcome.out.splitlines()[2:4] == [
        "three",
        "  problem  none of its properties is left; it needs some of "
        "conservative_temperature, preformed_salinity, oxygen.",
    ]


def test_as_json(tmp_path: Path) -> None:
    outcome = call("sources", "check", too_alike(tmp_path), "--format", "json")
    assert outcome.status == 1
    told = json.loads(outcome.out)
    assert told["title"] == "Too alike"
    assert len(told["sha256"]) == 64
    three, four = told["sets"]
    assert (three["name"], three["unknowns"], three["equations"], three["rank"]) == ("three", 3, 4, 2)
    assert [pair["sources"] for pair in three["told_apart_to"]] == [
        ["NOR", "NOE"],
        ["NOR", "SOU"],
        ["NOE", "SOU"],
    ]
    assert three["told_apart_to"][0]["share"] == pytest.approx(0.29, abs=0.005)
    assert len(three["problems"]) == 1
    assert four["problems"] == []
    assert four["respiration_uncertainty"] is None
    assert {worth["property"] for worth in four["without"]} == {*NAMES, "oxygen", "silicate"}
    unsolved = json.loads(
        call("sources", "check", INVENTED, "--properties", "oxygen", "--format", "json").out
    )
    assert unsolved["sets"][0]["condition_number"] is None, "JSON has no infinity"


def test_what_was_converted_is_told(tmp_path: Path) -> None:
    path = too_alike(tmp_path, PUBLISHED, STATE)
    lines = call("sources", "check", path).out.splitlines()
    assert lines[1] == (
        "  converted  source 'NOR': conservative_temperature 1.9973 degC is made from potential_temperature 2 at -30 "
        "degrees east, 40 degrees north, 2000 dbar."
    )
    assert [line.split()[0] for line in lines[1:7]] == ["converted"] * 6
    assert len(json.loads(call("sources", "check", path, "--format", "json").out)["conversions"]) == 6
    without = call("sources", "check", too_alike(tmp_path, PUBLISHED))
    assert without.status == 2
    assert "no [catalogue.reference_state]; expected a longitude, latitude and pressure there" in without.err


def changed(folder: Path, *changes: tuple[str, str]) -> Path:
    """Write the invented catalogue with passages replaced."""
    text = INVENTED.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    path = folder / "changed.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_a_value_that_looks_like_another_unit_is_a_warning_and_no_fault(tmp_path: Path) -> None:
    path = changed(tmp_path, ("value = 292.0", "value = 6.5"), ("value = 35.45", "value = 0.03545"))
    outcome = call("sources", "check", path)
    assert [line for line in outcome.out.splitlines() if line.startswith("  warning")] == [
        "  warning  source 'CEN': found preformed_salinity 0.03545 g kg-1, where the others have 34.28 to 35.08; "
        "expected more in nearly all sea water; is it in kg/kg? Convert it, or leave it if it is right.",
        "  warning  source 'OVF': found oxygen 6.5 umol kg-1, where the others have 172 to 258; expected more in "
        "nearly all sea water; is it in ml/l or mg/l? Convert it, or leave it if it is right.",
    ]
    told = json.loads(call("sources", "check", path, "--format", "json").out)
    assert len(told["sets"][0]["warnings"]) == 2
    assert outcome.status == (1 if told["sets"][0]["problems"] else 0)
    refused = call("sources", "check", changed(tmp_path, ("value = 1.6,", "value = -300.0,")))
    assert refused.status == 2
    assert (
        "source 'OVF': found conservative_temperature -300; expected -3 to 36 degree_C; correct it."
        in refused.err
    )


def test_a_single_source_tells_nothing(tmp_path: Path) -> None:
    path = changed(tmp_path, ('sources = ["OVF", "BOT", "DEP", "MID", "CEN"]', 'sources = ["OVF"]'))
    outcome = call("sources", "check", path)
    assert outcome.status == 0
    assert outcome.out.splitlines()[-1] == (
        "  warning  there is one source: its share will be 1 in every sample, and only the reduced chi-square tells "
        "whether the sample is of it; add sources to resolve mixtures."
    )
    assert "  good  " not in outcome.out


def test_settings_count(tmp_path: Path) -> None:
    strict = tmp_path / "settings.toml"
    strict.write_text("[mixing]\ncondition_limit = 5.0\n", encoding="utf-8")
    outcome = call("sources", "check", INVENTED, "--settings", strict)
    assert outcome.status == 1
    assert "  condition number 8.8 (limit 5), rank 5 of 5 (comb" in outcome.out


def test_a_property_named_twice_counts_once() -> None:
    names = ["conservative_temperature", "preformed_salinity", "oxygen", "silicate"]
    once = call("sources", "check", INVENTED, "--properties", *names)
    assert call("sources", "check", INVENTED, "--properties", *names, "oxygen").out == once.out
    assert "one named twice counts once" in " ".join(call("sources", "check", "--help").out.split())


def test_respiration_that_nothing_tells_has_no_number() -> None:
    outcome = call(
        "sources", "check", INVENTED, "--properties", "conservative_temperature", "preformed_salinity"
    )
    assert "    respiration  unknown\n" in outcome.out


def test_what_is_uncertain_beside_a_pair_is_told_for_itself(tmp_path: Path) -> None:
    """A twin of OVF makes other shares uncertain too; the reason that is told must be of the shares named."""
    twin = INVENTED.read_text(encoding="utf-8").split("[[source]]")[1].replace('"OVF"', '"OV2"')
    for value, near in (
        ("1.6,", "1.575,"), ("35.08,", "35.0812,"), ("292.0,", "291.4956,"), ("0.96,", "0.957,"), ("13.8,", "13.7722,"),
        ("11.0,", "11.1064,"),
    ):  # fmt: skip
        twin = twin.replace(f"value = {value}", f"value = {near}")
    path = changed(
        tmp_path,
        ('sources = ["OVF", ', 'sources = ["OVF", "OV2", '),
        ("[[set]]", f"[[source]]{twin}\n[[set]]"),
    )

    told, condition = [
        line for line in call("sources", "check", path).out.splitlines() if line.startswith("  problem  ")
    ]
    assert told == (
        "  problem  OVF and OV2 cannot be told apart with these properties and uncertainties: share moved from one to "
        "the other is uncertain by more than the whole sample; add a property in which they differ, or join them."
    )
    assert "the condition number of the weighted system is 6506" in condition


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["sources", "check", "no-such.toml"], "no-such.toml: the source catalogue cannot be read"),
        (
            ["sources", "check", str(INVENTED), "--properties", "dic"],
            "--properties dic: no set of the catalogue has this property; theirs are conservative_temperature,",
        ),
        (["sources", "check"], "the following arguments are required: CATALOGUE"),
        (["sources"], "the following arguments are required: TASK"),
        (["sources", "derive", "archive"], "the following arguments are required: --rules, --out"),
    ],
)
def test_wrong_usage(arguments: list[str], said: str) -> None:
    outcome = call(*arguments)
    assert outcome.status == 2
    assert outcome.out == ""
    assert said in outcome.err


def test_help_shows_how() -> None:
    outcome = call("sources", "check", "--help")
    assert outcome.status == 0
    assert "seawhence sources check sources.toml --properties conservative_temperature" in outcome.out
    assert "1 a set has a problem" in outcome.out
    derive = " ".join(call("sources", "derive", "--help").out.split())
    assert "0 every source was found and the catalogue is written" in derive
    assert "delivery" not in derive
