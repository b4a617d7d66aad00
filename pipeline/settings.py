"""One typed settings object: defaults here, a TOML file over them, the environment over that.

An environment variable is ``SEAWHENCE_SECTION__NAME``, its value read as TOML
(``SEAWHENCE_MIXING__TAG_SHARE=0.6``). The hash of the effective settings is part of every
table's provenance, so that a changed setting makes a cruise stale.
"""

from __future__ import annotations

import hashlib
import json
import os
import tomllib
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from pipeline.problems import SettingsProblem
from pipeline.toml_text import sentences

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

ENVIRONMENT_PREFIX = "SEAWHENCE_"

Fraction = Annotated[float, Field(ge=0, le=1)]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]


class _Section(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")


class ReadingSettings(_Section):
    """Limits that keep one broken delivery from hurting the run."""

    unpacked_bytes: int = Field(2_000_000_000, gt=0, description="most that a zip may unpack to")
    columns: int = Field(2_000, gt=0, description="most columns that a delivered table may have")
    raw_text: int = Field(4_000, gt=0, description="characters of a rejected line that are kept in the table")


class UseSettings(_Section):
    """Which delivered values downstream work may use."""

    water_flags: tuple[int, ...] = Field((2, 6), description="WHP water-sample flags that count as good")
    ctd_flags: tuple[int, ...] = Field((2, 6, 7), description="WHP CTD flags that count as good")
    refused_bottle_flags: tuple[int, ...] = Field(
        (3, 4),
        description="bottle flags under which no water sample is used (leaking, did not trip correctly)",
    )
    unflagged: bool = Field(default=True, description="use values that came without any flag")
    doubtful: bool = Field(default=False, description="use values that a check of ours calls doubtful")


class CheckSettings(_Section):
    """Limits of the checks."""

    station_speed: Positive = Field(15.0, description="knots between stations (common practice, no source)")
    cast_time: Positive = Field(
        24.0, description="hours between the first and last time given within one cast"
    )
    same_place: Positive = Field(10.0, description="nautical miles within which a station is in one place")


class TracerSettings(_Section):
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


class MixingSettings(_Section):
    """How shares become tags, and when a system is too weak to be solved."""

    tag_share: Fraction = Field(0.5, description="share from which the leading source gives the tag")
    unexplained_chi_square: Positive = Field(
        10.0, description="reduced chi-square above which a sample counts as unexplained"
    )
    condition_limit: Positive = Field(
        1000.0, description="condition number of the weighted system above which it is not solved"
    )
    members: int = Field(
        100, ge=0, le=10_000, description="members of the ensemble; 0 for first-order uncertainty"
    )
    seed: int = Field(20_260, ge=0, description="seed of the ensemble; the same seed gives the same members")
    mixed_layer_density: Positive = Field(
        0.03, description="kg/m3 above sigma0 at 10 dbar that ends the mixed layer (de Boyer Montegut 2004)"
    )
    uncertainty: dict[str, Positive] = Field(
        {}, description="standard uncertainty of a measured property, in its unit, in place of the registry's"
    )
    oxygen_utilisation_rate: Positive | None = Field(
        None, description="umol/kg per year; gives a pseudo-age, and none without it"
    )


class Settings(_Section):
    """All settings of the pipeline. Frozen; the same values give the same hash."""

    reading: ReadingSettings = ReadingSettings()
    use: UseSettings = UseSettings()
    checks: CheckSettings = CheckSettings()
    tracers: TracerSettings = TracerSettings()
    mixing: MixingSettings = MixingSettings()

    @property
    def text(self) -> bytes:
        """The effective values as JSON, the same bytes for the same values."""
        return json.dumps(self.model_dump(mode="json"), sort_keys=True, separators=(",", ":")).encode()

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
            text = path.read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as error:
            raise SettingsProblem(f"{name}: the settings file cannot be read ({error}).") from error
    try:
        values: dict[str, Any] = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise SettingsProblem(f"{name}: found text that is not TOML ({error}); correct that line.") from error
    _overlay(values, os.environ if environment is None else environment)
    try:
        return Settings.model_validate(values)
    except ValidationError as error:
        raise SettingsProblem("\n".join(sentences(name, text, error))) from error


def _overlay(values: dict[str, Any], environment: Mapping[str, str]) -> None:
    """Put the environment's overrides into ``values``, in place."""
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
