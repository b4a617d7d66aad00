"""What a cruise is told about its mixing analysis, and the uncertainties that it has of its own."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from pipeline.mixing import notices_in, resolve
from pipeline.mixing.notices import CHECKS, OUTSIDE_HULL, UNRESOLVED, UNTESTED, UNUSED
from pipeline.problems import BrokenPromise, SettingsProblem
from pipeline.settings import MixingSettings, Settings, read_settings
from pipeline.tables import findings_table

from .catalogues import catalogue
from .test_analysis import mixed, resolved, samples

if TYPE_CHECKING:
    from pathlib import Path

    from pipeline.mixing import Resolution

CRUISE = "ZZV120090214"  # of ``samples``
NO_MEMBERS = Settings(mixing=MixingSettings(members=0))


def _told(answer: Resolution, check: str) -> list[str]:
    return [finding.message for finding in answer.findings if finding.check == check]


def test_a_cruise_that_its_sources_explain_is_told_nothing() -> None:
    assert resolved(mixed(0.7), mixed(0.2, 0.1), settings=NO_MEMBERS).findings == ()


def test_samples_beyond_the_sources_are_counted_and_the_side_is_named() -> None:
    beyond = [mixed(1.5), mixed(1.4), mixed(1.3, 0.1)]
    answer = resolved(*beyond, mixed(0.5), mixed(-0.6), settings=NO_MEMBERS)
    distance = answer.columns["hull_distance"]
    assert (distance[:3] > 5).all()
    assert distance[3] < 1e-6
    farthest = np.nanmax(distance)
    assert _told(answer, OUTSIDE_HULL) == [
        f"source set 'deep': 4 of 5 samples are outside what its sources can mix to, by up to {farthest:.3g} standard "
        "uncertainties (hull_distance); expected at most 0.05 from noise alone; most of them, 3, lie where the share "
        "of SOU would have to be negative: a source water is missing on the side away from SOU, or values of SOU or "
        "the samples are off; look at where in the ocean these samples are, then add a source or narrow [set.valid]."
    ]
    (finding,) = (one for one in answer.findings if one.check == OUTSIDE_HULL)
    assert (finding.count, finding.value, finding.limit) == (4, "4", "0.05")


def test_respiration_that_would_have_to_be_negative_is_named() -> None:
    (told,) = _told(resolved(mixed(0.5, -0.8), mixed(0.5, -0.9), settings=NO_MEMBERS), OUTSIDE_HULL)
    assert "all of them lie where respiration would have to be negative: a source with more oxygen" in told


def test_no_more_samples_outside_than_noise_puts_there_are_not_told() -> None:
    rows = [mixed(1.5), *(mixed(0.1 + 0.008 * i) for i in range(99))]
    assert not _told(resolved(*rows, settings=NO_MEMBERS), OUTSIDE_HULL)
    wary = Settings(mixing=MixingSettings(members=0, hull_probability=0.999))
    assert _told(resolved(*rows, settings=wary), OUTSIDE_HULL)


def test_every_reason_why_samples_are_not_resolved_is_told_with_its_count() -> None:
    gone: dict[str, Any] = dict.fromkeys(("oxygen", "phosphate", "nitrate", "preformed_salinity"))
    rows = [mixed(0.5), mixed(0.4, **gone), mixed(0.3, **gone), mixed(0.2, oxygen=1e30)]
    answer = resolved(*rows, settings=NO_MEMBERS)
    assert _told(answer, UNRESOLVED) == [
        "2 of 4 samples are not resolved into source waters: so many values are missing that there are fewer equations "
        "than unknowns; expected samples that can be resolved; deliver the properties of the set, or add a set that "
        "needs fewer.",
        "1 of 4 samples is not resolved into source waters: a value is infinite, or over a million of its weighted "
        "units from the sources; expected samples that can be resolved; correct these values, or flag them as bad.",
    ]
    counts = {one.value: one.count for one in answer.findings if one.check == UNRESOLVED}
    assert counts == {"incomplete": 2, "absurd": 1}


def test_a_condition_number_above_the_limit_is_told() -> None:
    strict = Settings(mixing=MixingSettings(members=0, condition_limit=1.5))
    (told,) = _told(resolved(mixed(0.5), settings=strict), UNRESOLVED)
    assert told.startswith(
        "1 of 1 sample is not resolved into source waters: the values that are there cannot tell"
    )
    assert told.endswith("run 'seawhence sources check', and add properties to the set or take sources away.")


def test_only_where_all_samples_are_outside_the_sets_is_that_told() -> None:
    shallow = mixed(0.5, pressure=100.0)
    assert not _told(resolved(shallow, mixed(0.5), settings=NO_MEMBERS), UNRESOLVED)
    (told,) = _told(resolved(shallow, shallow, settings=NO_MEMBERS), UNRESOLVED)
    assert told == (
        "2 of 2 samples are not resolved into source waters: no set of the catalogue is valid where the sample was "
        "taken, or it lies in the mixed layer; expected a set for some of them; widen [set.valid], or use other "
        "sources."
    )
    assert resolve(samples(shallow).slice(0, 0), catalogue(), NO_MEMBERS).findings == ()


def test_fits_that_nothing_tests_are_told() -> None:
    gone: dict[str, Any] = dict.fromkeys(("preformed_salinity", "phosphate", "nitrate"))
    answer = resolved(mixed(0.6, 0.2, **gone), mixed(0.5), settings=NO_MEMBERS)
    assert list(answer.columns["tag"]) == ["NOR", "NOR"]
    assert np.isnan(answer.columns["reduced_chi_square"][0])
    (told,) = _told(answer, UNTESTED)
    assert told.startswith(
        "source set 'deep': 1 of 2 samples is fitted without degrees of freedom, so that nothing"
    )


def test_notices_are_found_again_among_all_findings() -> None:
    answer = resolved(mixed(1.5), mixed(0.2, oxygen=1e30), settings=NO_MEMBERS)
    told = [one.message for one in answer.findings]
    assert len(told) == 2
    assert notices_in(findings_table(CRUISE, answer.findings)) == told
    assert notices_in(findings_table(CRUISE, [])) == []
    assert len(set(CHECKS)) == 4


def _with_own(expocode: str, members: int, **own: float) -> Settings:
    return Settings(mixing=MixingSettings(members=members, cruise_uncertainty={expocode: own}))


@pytest.mark.parametrize("members", [0, 100])
def test_an_uncertainty_of_one_cruise_is_as_one_of_all_and_reaches_everything(members: int) -> None:
    """Weights (shares), ensemble or first order (uncertainties), and the split."""
    rows = [mixed(0.6, 0.2, nitrate=21.0), mixed(0.3, 0.1, phosphate=1.9)]
    usual = resolved(*rows, settings=Settings(mixing=MixingSettings(members=members)))
    of_all = resolved(
        *rows, settings=Settings(mixing=MixingSettings(members=members, uncertainty={"nitrate": 5.0}))
    )
    own = resolved(*rows, settings=_with_own(CRUISE, members, nitrate=5.0))
    other = resolved(*rows, settings=_with_own("ZZV220210218", members, nitrate=5.0))
    over = resolved(
        *rows,
        settings=Settings(
            mixing=MixingSettings(
                members=members, uncertainty={"nitrate": 99.0}, cruise_uncertainty={CRUISE: {"nitrate": 5.0}}
            )
        ),
    )
    for name in ("leading_share", "leading_share_uncertainty", "respiration_uncertainty", "reduced_chi_square",
                 "oxygen_from_sources_uncertainty", "nitrate_from_sources_uncertainty"):  # fmt: skip
        np.testing.assert_array_equal(own.columns[name], of_all.columns[name], err_msg=name)
        np.testing.assert_array_equal(over.columns[name], of_all.columns[name], err_msg=name)
        np.testing.assert_array_equal(other.columns[name], usual.columns[name], err_msg=name)
        assert (own.columns[name] != usual.columns[name]).any(), name
    assert own.mixtures.equals(of_all.mixtures)


def test_an_uncertainty_that_no_set_uses_is_told() -> None:
    answer = resolved(mixed(0.5), settings=_with_own(CRUISE, 0, bottle_oxygen=2.0))
    assert _told(answer, UNUSED) == [
        f"the settings give mixing.cruise_uncertainty.{CRUISE}.bottle_oxygen, which no source set uses; expected a "
        "property of a set, one of conservative_temperature, preformed_salinity, oxygen, phosphate, nitrate; correct "
        "its name or remove it."
    ]


def test_samples_of_several_cruises_are_not_resolved_together() -> None:
    two = samples(mixed(0.5), {**mixed(0.5), "expocode": "ZZV220210218"})
    with pytest.raises(BrokenPromise, match="cruises ZZV120090214, ZZV220210218 are resolved together"):
        resolve(two, catalogue(), NO_MEMBERS)


@pytest.mark.parametrize(
    ("lines", "sentence"),
    [
        (
            f"[mixing.cruise_uncertainty.{CRUISE}]\noxygen = 1.0\nnitrat = 0.2\n",
            f"line 3: 'mixing.cruise_uncertainty.{CRUISE}.nitrat' is 'nitrat'; expected a measured or derived quantity "
            "by its column, such as nitrate; correct it.",
        ),
        (
            "[mixing.uncertainty]\nstation = 0.2\n",
            "line 2: 'mixing.uncertainty.station' is 'station'; expected a measured or derived quantity by its column, "
            "such as nitrate; correct it.",
        ),
        (
            f"[mixing.cruise_uncertainty.{CRUISE}]\nnitrate = 0\n",
            f"line 2: 'mixing.cruise_uncertainty.{CRUISE}.nitrate' is 0; expected greater than 0; correct it.",
        ),
        (
            f"[mixing.cruise_uncertainty.{CRUISE}]\nnitrate = 1e30\n",
            f"line 2: 'mixing.cruise_uncertainty.{CRUISE}.nitrate' is 1e+30; expected less than or equal to 1000000; "
            "correct it.",
        ),
        (
            "[mixing.cruise_uncertainty]\nnitrate = 0.2\n",
            "line 2: 'mixing.cruise_uncertainty.nitrate' is 0.2; expected a valid dictionary; correct it.",
        ),
        (
            "[mixing]\nhull_probability = 1\n",
            "line 2: 'mixing.hull_probability' is 1; expected less than 1; correct it.",
        ),
    ],
)
def test_settings_that_cannot_be_used_are_told_in_a_sentence(
    tmp_path: Path, lines: str, sentence: str
) -> None:
    path = tmp_path / "settings.toml"
    path.write_text(lines, encoding="utf-8")
    with pytest.raises(SettingsProblem) as refusal:
        read_settings(path, {})
    assert str(refusal.value) == f"{path}, {sentence}"


def test_the_hash_of_the_settings_tells_of_it() -> None:
    assert _with_own(CRUISE, 100, nitrate=0.2).sha256 != Settings().sha256
