"""One typed settings object: defaults here, a TOML file over them, the environment over that.

An environment variable is ``SEAWHENCE_SECTION__NAME``, its value read as TOML
(``SEAWHENCE_MIXING__TAG_SHARE=0.6``). The hash of the effective settings is part of every
table's provenance, so that a changed setting makes a cruise stale.
"""

from __future__ import annotations

import difflib
import hashlib
import json
import os
import tomllib
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Field, ValidationError

from pipeline.carbon_tracer_settings import CarbonTracers
from pipeline.carbonate_settings import CarbonateSettings, ProfileSettings
from pipeline.census_settings import CensusSettings
from pipeline.crossover_settings import Correction, CrossoverSettings, Quantity
from pipeline.limits import (
    BottleSpikes,
    CtdSpikes,
    DepthLimit,
    Fraction,
    Gradients,
    Positive,
    Section,
    WaterChecks,
    depth_limit,
)
from pipeline.problems import SettingsProblem
from pipeline.toml_text import sentences
from pipeline.variables import MEASURED, REGISTRY, SEAWATER, TRACERS, Kind

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

ENVIRONMENT_PREFIX = "SEAWHENCE_"


class ReadingSettings(Section):
    """Limits that keep one broken delivery from hurting the run."""

    unpacked_bytes: int = Field(2_000_000_000, gt=0, description="most that a zip may unpack to")
    levels_at_once: int = Field(
        500_000,
        gt=0,
        description=(
            "CTD levels that are checked and written together; a cruise with more is taken in blocks of whole casts"
            " (bounds the memory; about 1.5 kB a level)"
        ),
    )
    columns: int = Field(2_000, gt=0, description="most columns that a delivered table may have")
    cells: int = Field(
        20_000_000, gt=0, description="most cells that a spreadsheet or another described table may have"
    )
    raw_text: int = Field(4_000, gt=0, description="characters of a rejected line that are kept in the table")
    netcdf_values: int = Field(
        100_000_000,
        gt=0,
        description="most values that a NetCDF file may hold, or give when laid out as rows",
    )
    netcdf_seconds: int = Field(
        20, gt=0, description="most seconds of processor time that reading a NetCDF-4 file may take"
    )
    laboratory_temperature: float = Field(
        22.0,
        ge=0,
        le=40,
        description="degC at which nutrients per volume were measured, where no file says (Lauvset et al. 2024)",
    )


class UseSettings(Section):
    """Which delivered values downstream work may use."""

    water_flags: tuple[int, ...] = Field((2, 6), description="WHP water-sample flags that count as good")
    ctd_flags: tuple[int, ...] = Field((2, 6, 7), description="WHP CTD flags that count as good")
    refused_bottle_flags: tuple[int, ...] = Field(
        (3, 4),
        description="bottle flags under which no water sample is used (leaking, did not trip correctly)",
    )
    unflagged: bool = Field(default=True, description="use values that came without any flag")
    doubtful: bool = Field(default=False, description="use values that a check of ours calls doubtful")


class CheckSettings(WaterChecks):
    """Limits of the checks."""

    station_speed: Positive = Field(15.0, description="knots between stations (common practice, no source)")
    cast_time: Positive = Field(
        24.0, description="hours between the first and last time given within one cast"
    )
    before_departure: Positive = Field(
        3.0,
        description="days before the expocode's departure that a cast may be dated (our choice, no source)",
    )
    after_departure: Positive = Field(
        400.0,
        description="days after the expocode's departure that a cast may be dated (our choice, no source)",
    )
    same_place: Positive = Field(10.0, description="nautical miles within which a station is in one place")
    upper_pressure: Positive = Field(
        500.0,
        description="dbar down to which the limits of the upper ocean hold (Argo spike test, from memory)",
    )
    deep_pressure: Positive = Field(
        2000.0, description="dbar below which the limits of the deep ocean hold (common practice, no source)"
    )
    same_level: Positive = Field(
        2.0,
        description="dbar within which bottles of an upcast are at one level (common practice, no source)",
    )
    spike_bottle: BottleSpikes = Field(BottleSpikes(), description="spikes of bottle casts, by quantity")
    spike_ctd: CtdSpikes = Field(CtdSpikes(), description="spikes of CTD casts, by quantity")
    gradient: Gradients = Field(Gradients(), description="change per dbar, by quantity")
    inversion_bottle: DepthLimit = depth_limit(
        0.05, 0.02, "kg/m3 of density inversion between bottles (common practice, no source)"
    )
    inversion_ctd: Positive = Field(
        0.03,
        description="kg/m3 of density inversion between CTD levels (Argo QC manual, doi 10.13155/33951, test 14)",
    )
    stuck_bottles: int = Field(
        4,
        ge=3,
        description="levels of a bottle cast from which one same value is suspect (our choice, no source)",
    )
    stuck_levels: int = Field(
        10, ge=3, description="CTD levels from which one same value is suspect (our choice, no source)"
    )
    bottom_depth: Positive = Field(
        100.0, description="m that a sample may lie below the sea floor as delivered (our choice, no source)"
    )
    bottom_share: Fraction = Field(
        0.03, description="the same as a part of the depth, for uncorrected soundings (our choice, no source)"
    )
    off_section: Positive = Field(
        300.0, description="nautical miles from any other station that make one stray (our choice, no source)"
    )
    off_section_ratio: Positive = Field(
        8.0, description="the same, in median distances between stations (our choice, no source)"
    )
    copied_share: Fraction = Field(
        0.5,
        description="part of a cast's levels found in another cast that makes it a copy (our choice, no source)",
    )


class TracerSettings(CarbonTracers):
    """Which published forms the tracers take."""

    stoichiometry: Literal[
        "redfield_1963", "takahashi_1985", "anderson_sarmiento_1994", "anderson_1995", "kortzinger_2001"
    ] = Field("anderson_sarmiento_1994", description="ratios of respiration, by citation")
    oxygen_solubility: Literal[
        "benson_krause_umol_kg", "combined_umol_kg", "benson_krause_ml_l", "combined_ml_l"
    ] = Field("benson_krause_umol_kg", description="which coefficients of Garcia and Gordon 1992")
    n_star: Literal["deutsch_2001", "gruber_sarmiento_1997"] = Field(
        "deutsch_2001", description="form of N*, by citation"
    )


def _known_property(name: str) -> str:
    if name not in {*MEASURED, *SEAWATER, *TRACERS} or REGISTRY[name].kind is not Kind.NUMBER:
        near = difflib.get_close_matches(name, (*MEASURED, *SEAWATER, *TRACERS), n=1)
        raise ValueError(
            f"a measured or derived quantity by its column, such as {near[0] if near else 'nitrate'}"
        )
    return name


MixingProperty = Annotated[str, AfterValidator(_known_property)]


def _members(count: object) -> object:
    known = isinstance(count, int) and not isinstance(count, bool)
    if not known or not (count == 0 or FEWEST_MEMBERS <= count <= MOST_MEMBERS):  # type: ignore[operator]
        raise ValueError(
            f"0 for first-order uncertainty, or a whole number from {FEWEST_MEMBERS} to {MOST_MEMBERS}"
        )
    return count


# Of ten members the standard deviation is known to a quarter; of fewer it says nothing, nor do percentiles.
FEWEST_MEMBERS, MOST_MEMBERS = 10, 10_000
Members = Annotated[int, BeforeValidator(_members)]
MeasurementUncertainty = Annotated[float, Field(gt=0, le=1e6, allow_inf_nan=False)]  # squares stay numbers


class MixingSettings(Section):
    """How shares become tags, and when a system is too weak to be solved."""

    tag_share: Fraction = Field(0.5, description="share from which the leading source gives the tag")
    tag_probability: Fraction = Field(
        0.5,
        description="part of the ensemble in which the leading source has to lead to give the tag: at least as often"
        " as not (our choice, no source); 0 to tag by the share alone",
    )
    unexplained_chi_square: Positive = Field(
        10.0, description="reduced chi-square above which a sample counts as unexplained"
    )
    condition_limit: Positive = Field(
        1000.0,
        description="condition number of the weighted properties above which a sample is not solved",
    )
    members: Members = Field(
        100, description="members of the ensemble, at least 10; 0 for first-order uncertainty"
    )
    seed: int = Field(20_260, ge=0, description="seed of the ensemble; the same seed gives the same members")
    mixed_layer_density: Positive = Field(
        0.03, description="kg/m3 above sigma0 at 10 dbar that ends the mixed layer (de Boyer Montegut 2004)"
    )
    uncertainty: dict[MixingProperty, MeasurementUncertainty] = Field(
        {}, description="standard uncertainty of a measured property, in its unit, in place of the registry's"
    )
    cruise_uncertainty: dict[str, dict[MixingProperty, MeasurementUncertainty]] = Field(
        {}, description="the same for the samples of one cruise, by its expocode, over that of all cruises"
    )
    hull_probability: Annotated[float, Field(gt=0, lt=1)] = Field(
        0.99,
        description="with which noise alone leaves a sample that its sources explain closer to what they can mix to"
        " than where it is told to be outside: a quantile of the chi distribution (our choice, no source)",
    )
    oxygen_utilisation_rate: Positive | None = Field(
        None, description="umol/kg per year; gives a pseudo-age, and none without it"
    )

    def of_cruise(self, expocode: str | None) -> MixingSettings:
        """Return what holds for the samples of one cruise: its own uncertainties over those of all cruises."""
        own = self.cruise_uncertainty.get(expocode or "", {})
        return self.model_copy(update={"uncertainty": {**self.uncertainty, **own}, "cruise_uncertainty": {}})


class RunSettings(Section):
    """How a run goes on where something takes long or fails. No table depends on it."""

    cruise_seconds: Positive | None = Field(
        None,
        description="seconds that a cruise may take before it is skipped; without it no limit in a run by hand, and an"
        " hour in one by Prefect",
    )
    waits: tuple[Annotated[float, Field(ge=0, le=3600)], ...] = Field(
        (5.0, 30.0),
        description="seconds before cruises that met a fault of disk or network are tried again, one for each attempt"
        " (our choice, no source)",
    )
    lock_seconds: Annotated[float, Field(ge=0)] = Field(
        0.0, description="seconds to wait for another run that holds the archive, before this one is given up"
    )


class Settings(Section):
    """All settings of the pipeline. Frozen; the same values give the same hash."""

    reading: ReadingSettings = ReadingSettings()
    use: UseSettings = UseSettings()
    checks: CheckSettings = CheckSettings()
    tracers: TracerSettings = TracerSettings()
    carbonate: CarbonateSettings = CarbonateSettings()
    profiles: ProfileSettings = ProfileSettings()
    mixing: MixingSettings = MixingSettings()
    crossovers: CrossoverSettings = CrossoverSettings()
    census: CensusSettings = CensusSettings()
    run: RunSettings = RunSettings()
    corrections: dict[str, dict[Quantity, Correction]] = Field(
        {}, description="by cruise and quantity; nothing is corrected that does not stand here"
    )

    def for_cruise(self, expocode: str) -> Settings:
        """Return what the tables of one cruise depend on, so that what is set for others does not make it anew."""
        mine = {expocode: self.corrections[expocode]} if self.corrections.get(expocode) else {}
        uncertain = self.mixing.cruise_uncertainty
        own = {expocode: uncertain[expocode]} if uncertain.get(expocode) else {}
        mixing = self.mixing.model_copy(update={"cruise_uncertainty": own})
        return self.model_copy(
            update={
                "crossovers": CrossoverSettings(),
                "census": CensusSettings(),
                "corrections": mine,
                "mixing": mixing,
            }
        )

    def corrections_of(self, expocode: str) -> dict[str, dict[str, Any]]:
        """Return the corrections of one cruise by quantity, each as it stands in a settings file."""
        mine = self.corrections.get(expocode, {})
        return {name: one.model_dump(exclude_none=True) for name, one in sorted(mine.items())}

    @property
    def text(self) -> bytes:
        """The effective values as JSON, the same bytes for the same values, less those that no table depends on."""
        values = self.model_dump(mode="json", exclude={"run"})
        return json.dumps(values, sort_keys=True, separators=(",", ":")).encode()

    @property
    def sha256(self) -> str:
        """Hash of ``text``, in hexadecimal."""
        return hashlib.sha256(self.text).hexdigest()


def read_settings(path: Path | None = None, environment: Mapping[str, str] | None = None) -> Settings:
    """Read the effective settings.

    Parameters
    ----------
    path
        A TOML file, or None for the defaults.
    environment
        Where overrides are looked up; the process's own environment by default.

    Raises
    ------
    SettingsProblem
        With one sentence for each value that cannot be used.

    """
    text, name = "", "settings"
    if path is not None:
        name = str(path)
        try:
            text = path.read_text(encoding="utf-8-sig")  # some editors put a mark before the text
        except (OSError, ValueError) as error:
            reason = error.strerror if isinstance(error, OSError) else "it is not UTF-8 text"
            raise SettingsProblem(
                f"{name}: the settings file cannot be read ({reason}); name a TOML file in UTF-8."
            ) from error
    try:
        values: dict[str, Any] = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise SettingsProblem(f"{name}: found text that is not TOML ({error}); correct that line.") from error
    overridden = _overlay(values, os.environ if environment is None else environment)
    try:
        return Settings.model_validate(values)
    except ValidationError as error:
        raise SettingsProblem("\n".join(sentences(name, text, error, overridden))) from error


def _overlay(values: dict[str, Any], environment: Mapping[str, str]) -> dict[tuple[str, ...], str]:
    """Put the environment's overrides into ``values``, in place; return which variable set what."""
    overridden: dict[tuple[str, ...], str] = {}
    for key in sorted(environment):
        section, separator, setting = key.removeprefix(ENVIRONMENT_PREFIX).lower().partition("__")
        if not key.startswith(ENVIRONMENT_PREFIX) or not separator:
            continue
        try:
            value = tomllib.loads(f"value = {environment[key]}")["value"]
        except tomllib.TOMLDecodeError:
            value = environment[key]  # a bare word is text
        table = values.setdefault(section, {})
        if isinstance(table, dict):  # else the file is at fault, which validation tells
            table[setting] = value
            overridden[section, setting] = f"the environment variable {key}"
    return overridden
