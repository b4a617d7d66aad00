"""What the variables of a CF file mean: by standard name, by the names of the exchange format, never by guess."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from pipeline.findings import Finding, Severity
from pipeline.reading.columns import Heading, contradicting_unit
from pipeline.reading.delivery import DeliveryKind
from pipeline.reading.exchange_names import exchange_meanings
from pipeline.units import Measure, Scale, unit_of
from pipeline.variables import EXCHANGE_NAMES, IDENTITY, MEASURED, REGISTRY, FlagScheme

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pipeline.reading.description import Description
    from pipeline.reading.netcdf_bytes import StoredFile, StoredVariable
    from pipeline.variables import Variable

_OXYGENS = ("ctd_oxygen", "bottle_oxygen")
_SALINITIES = ("ctd_salinity", "bottle_salinity")

# Standard names beside those of the registry (table v93), and old ones that files still carry.
_MORE_NAMES: Mapping[str, tuple[str, ...]] = {
    "sea_water_pressure": ("pressure",),
    "sea_water_salinity": _SALINITIES,
    "sea_water_potential_temperature": ("delivered_potential_temperature",),
    "mole_concentration_of_dissolved_molecular_oxygen_in_sea_water": _OXYGENS,
    "mass_concentration_of_oxygen_in_sea_water": _OXYGENS,
    "volume_fraction_of_oxygen_in_sea_water": _OXYGENS,
    "mole_concentration_of_silicate_in_sea_water": ("silicate",),
    "mole_concentration_of_nitrate_in_sea_water": ("nitrate",),
    "mole_concentration_of_nitrite_in_sea_water": ("nitrite",),
    "mole_concentration_of_nitrate_and_nitrite_in_sea_water": ("nitrate_plus_nitrite",),
    "mole_concentration_of_phosphate_in_sea_water": ("phosphate",),
    "mole_concentration_of_ammonium_in_sea_water": ("ammonium",),
    "depth": ("depth",),
    "sea_floor_depth_below_sea_level": ("bottom_depth",),
    "sea_floor_depth_below_geoid": ("bottom_depth",),
    "sea_floor_depth": ("bottom_depth",),
}
_MEASURE_OF_NAME = (
    (re.compile(r"moles_of_.*_per_unit_mass_|_per_unit_mass_expressed"), Measure.AMOUNT_PER_MASS),
    (re.compile(r"mole_concentration_of_"), Measure.AMOUNT_PER_VOLUME),
    (re.compile(r"mass_concentration_of_"), Measure.MASS_PER_VOLUME),
    (re.compile(r"volume_fraction_of_"), Measure.GAS_PER_VOLUME),
)


def _standard_names() -> dict[str, tuple[str, ...]]:
    names: dict[str, tuple[str, ...]] = dict(_MORE_NAMES)
    for quantity in (*IDENTITY, *MEASURED):
        if standard := REGISTRY[quantity].standard_name:
            names[standard] = (*names.get(standard, ()), quantity)
    return names


STANDARD_NAMES: Mapping[str, tuple[str, ...]] = _standard_names()

# Quantities that are not measured but made from measured ones; with these alone a sample cannot be placed.
_DERIVED = {
    "sea_water_conservative_temperature": ("Conservative Temperature", "temperature"),
    "sea_water_absolute_salinity": ("Absolute Salinity", "ctd_salinity"),
    "sea_water_reference_salinity": ("Reference Salinity", "ctd_salinity"),
    "sea_water_preformed_salinity": ("Preformed Salinity", "ctd_salinity"),
}
_PLAIN_IDENTITY = frozenset({"expocode", "section", "station", "cast", "sample", "bottle"})
_OF_SENSOR = re.compile(r"ctd|sensor|sbe|probe|optode", re.IGNORECASE)
_OF_BOTTLE = re.compile(r"bottle|discrete|salinometer|autosal|winkler|niskin|titrat", re.IGNORECASE)
_SCALES = (
    (re.compile(r"I[PT]+S-?(19)?68|\bT68\b"), Scale.IPTS_68),
    (re.compile(r"ITS-?(19)?90|\bT90\b"), Scale.ITS_90),
)
_VALUE_FLAGS = re.compile(r"(.* )?(status_flag|quality_flag|aggregate_quality_flag)$|.*_test_quality_flag$")


@dataclass
class Recognised:
    """What the variables of a file mean, by their delivered names, and what had to be assumed."""

    kind: DeliveryKind
    values: dict[str, Variable] = field(default_factory=dict)
    units: dict[str, str] = field(default_factory=dict)  # in which they are read
    written: dict[str, str] = field(
        default_factory=dict
    )  # as they stand in the file, where no description says one
    flags: dict[str, str] = field(
        default_factory=dict
    )  # flag variable, by the exchange name, to what it speaks of
    upward: frozenset[str] = frozenset()  # depths that count upward
    findings: list[Finding] = field(default_factory=list)

    def of(self, quantity: str) -> str | None:
        """Return the first variable that gives a quantity."""
        return next((name for name, variable in self.values.items() if variable.name == quantity), None)


def is_flag(variable: StoredVariable) -> bool:
    """Return whether a variable holds flags, by what it says of itself."""
    told = {"flag_values", "flag_masks", "flag_meanings"} & set(variable.attributes)
    return bool(told) or _VALUE_FLAGS.match(variable.text("standard_name")) is not None


def recognise(name: str, file: StoredFile, description: Description | None) -> Recognised:
    """Return what the variables of a file mean.

    Parameters
    ----------
    name
        The file, for sentences.
    file
        Its variables.
    description
        What a ``cruise.toml`` says of it; that stands over what the file says.

    """
    exchange, flags = _exchange(name, file)
    candidates: dict[str, tuple[str, ...]] = {}
    findings: list[Finding] = []
    for title, variable in file.variables.items():
        if not is_flag(variable):
            found = _candidates(name, variable, exchange.get(title), findings)
            if found:
                candidates[title] = found
    told = _described(description)
    candidates |= {title: (quantity,) for title, quantity in told.items() if title in file.variables}
    _by_role(file, candidates)
    only = [found[0] for found in candidates.values() if len(found) == 1]
    recognised = Recognised(_kind(name, description, only, findings), flags=flags, findings=findings)
    has_pressure = "pressure" in only
    for title, found in candidates.items():
        variable = file.variables[title]
        quantity = found[0] if len(found) == 1 else _chosen(name, variable, found, recognised)
        if quantity == "depth" and has_pressure and title not in told:
            continue  # it passes through
        recognised.values[title] = REGISTRY[quantity]
        recognised.units[title] = _unit(name, variable, quantity, recognised)
        recognised.written[title] = variable.text("units")
    for entry in description.columns if description else ():
        if entry.unit is not None and entry.column in recognised.units:
            recognised.units[entry.column] = entry.unit
            recognised.written.pop(entry.column)
            units = (file.variables[entry.column].text("units"), entry.unit)
            means, place = (
                recognised.values[entry.column],
                description.place(entry.line) if description else "",
            )
            doubt = contradicting_unit(name, None, entry.column, means, units, place)
            findings += [doubt] if doubt is not None else []
    recognised.upward = frozenset(
        title for title, quantity in recognised.values.items()
        if quantity.name == "depth" and file.variables[title].text("positive").lower() == "up"
    )  # fmt: skip
    _tell_derived(name, file, recognised)
    return recognised


def _exchange(name: str, file: StoredFile) -> tuple[dict[str, str], dict[str, str]]:
    """Return what the names of the exchange format among the variables mean: values, and flags of which quantity."""
    titles = tuple(file.variables)
    meanings, _ = exchange_meanings(Heading(name, titles, ("",) * len(titles)))
    values = {
        title: variable.name
        for title, variable in meanings.values.items()
        # anybody calls oxygen so; the exchange format writes it in capitals and means the bottle's
        if title in EXCHANGE_NAMES or variable.name not in _OXYGENS
    }
    return values, {title: variable.name for title, variable in meanings.flags.items()}


def _described(description: Description | None) -> dict[str, str]:
    """Return what a ``cruise.toml`` says that variables mean, where it is a quantity of ours."""
    if description is None:
        return {}
    names = {"date_and_time": "time"}
    told = {entry.column: names.get(entry.quantity, entry.quantity) for entry in description.columns}
    return {title: quantity for title, quantity in told.items() if quantity in REGISTRY}


def _candidates(
    name: str, variable: StoredVariable, exchange: str | None, findings: list[Finding]
) -> tuple[str, ...]:
    """Return the quantities that a variable may be, none where nothing tells."""
    title, standard = variable.name, variable.text("standard_name")
    if " " in standard:  # a modifier: a standard error or a count, no value
        return ()
    if " since " in variable.text("units").lower() and (standard in {"", "time"}):
        return ("time",)
    if title.lower() in _PLAIN_IDENTITY:
        return (title.lower(),)
    found = STANDARD_NAMES.get(standard, ())
    if found and exchange is not None and exchange not in found:
        if exchange == "bottom_depth":  # DEPTH, which in an exchange file is the sea floor's
            return found
        findings.append(_contradiction(name, variable, exchange))
        return ()
    if exchange is not None:
        # without a standard name, DEPTH along the rows would be anything
        return () if exchange == "bottom_depth" and not found and len(variable.values.shape) else (exchange,)
    if not found and variable.text("axis").upper() == "Z":
        unit = unit_of(variable.text("units"))
        of = {Measure.PRESSURE: ("pressure",), Measure.LENGTH: ("depth",)}
        return of.get(unit.measure, ()) if unit else ()
    return found


def _by_role(file: StoredFile, candidates: dict[str, tuple[str, ...]]) -> None:
    """Take the variable that names the profiles for the station where no other gives one."""
    if ("station",) in candidates.values():
        return
    for title, variable in file.variables.items():
        if variable.text("cf_role") == "profile_id":
            candidates[title] = ("station",)
            return


def _kind(
    name: str, description: Description | None, quantities: Iterable[str], findings: list[Finding]
) -> DeliveryKind:
    if description is not None and description.kind is not None:
        return description.kind
    given = set(quantities)
    if given & {"sample", "bottle"}:
        return DeliveryKind.BOTTLE
    water = next((q for q in sorted(given) if REGISTRY[q].flags is FlagScheme.WATER), None)
    kind = DeliveryKind.BOTTLE if water else DeliveryKind.CTD
    why = (
        f"it holds {water}"
        if water
        else "it holds no bottle, no sample number and nothing that only bottles give"
    )
    findings.append(
        Finding(
            "kind-assumed", Severity.NOTE,
            f"{name}: the file was taken for one of {'bottles' if water else 'CTD casts'}: {why}.",
            value=kind, file=name,
        )
    )  # fmt: skip
    return kind


def _chosen(name: str, variable: StoredVariable, found: tuple[str, ...], recognised: Recognised) -> str:
    """Return which of several quantities of one standard name is meant, and tell what was assumed."""
    ctd, bottle = found
    words = (
        f"{variable.name} {variable.text('long_name')} {variable.text('name')} {variable.text('instrument')}"
    )
    sensor, sample = bool(_OF_SENSOR.search(words)), bool(_OF_BOTTLE.search(words))
    if sensor != sample:
        return ctd if sensor else bottle
    of_bottle = recognised.kind is DeliveryKind.BOTTLE
    if of_bottle:
        recognised.findings.append(
            Finding(
                "meaning-assumed", Severity.NOTE,
                f"{name}: {variable.name} ({variable.text('standard_name')}) may be the CTD's or the bottle's; in a"
                " file of bottles it was taken for the bottle's.",
                variable=bottle, value=variable.name, file=name,
            )
        )  # fmt: skip
    return bottle if of_bottle else ctd


def _unit(name: str, variable: StoredVariable, quantity: str, recognised: Recognised) -> str:
    """Return the unit in which a variable is read, and tell where it says something else than its standard name."""
    written, standard = variable.text("units"), variable.text("standard_name")
    unit, found = unit_of(written), recognised.findings
    if unit is None:
        return written

    def note(check: str, severity: Severity, words: str) -> None:
        found.append(
            Finding(check, severity, f"{name}: {words}", variable=quantity, value=written, file=name)
        )

    meant = next((measure for pattern, measure in _MEASURE_OF_NAME if pattern.match(standard)), unit.measure)
    if meant is not unit.measure and quantity in {*_OXYGENS, *MEASURED}:
        note("unit-contradicts-name", Severity.DOUBT, f"the standard name of {variable.name} is {standard}, which"
             f" stands for {meant}, but its unit is '{written}'; the unit was believed.")  # fmt: skip
    if standard == "sea_water_pressure":
        note("pressure-assumed", Severity.NOTE, f"the standard name of {variable.name} is sea_water_pressure, which"
             " includes the air's; it was taken for sea pressure, 0 at the surface.")  # fmt: skip
    if standard == "sea_water_salinity" and quantity in _SALINITIES:
        note("salinity-assumed", Severity.NOTE, f"the standard name of {variable.name} is sea_water_salinity, which"
             " does not tell the scale; it was taken for practical salinity.")  # fmt: skip
    if quantity == "temperature" and unit.scale is None:
        texts = " ".join(text for text in map(variable.text, variable.attributes) if isinstance(text, str))
        scale = next((scale for pattern, scale in _SCALES if pattern.search(texts)), None)
        if scale is None:
            note("scale-assumed", Severity.NOTE, f"nothing tells the temperature scale of {variable.name}; ITS-90 was"
                 " assumed.")  # fmt: skip
        if not unit.offset:
            return str(scale or Scale.ITS_90)
    return written


def _contradiction(name: str, variable: StoredVariable, exchange: str) -> Finding:
    return Finding(
        "name-contradicts-name", Severity.DOUBT,
        f"{name}: {variable.name} is the exchange format's name for {exchange}, but its standard name is"
        f" {variable.text('standard_name')}; it is kept as {variable.name} and unused; say in cruise.toml what it is.",
        variable=exchange, value=variable.text("standard_name"), file=name,
    )  # fmt: skip


def _tell_derived(name: str, file: StoredFile, recognised: Recognised) -> None:
    """Tell of delivered TEOS-10 quantities where what they are made from is not there."""
    read = {variable.name for variable in recognised.values.values()}
    for variable in file.variables.values():
        words, needed = _DERIVED.get(variable.text("standard_name"), ("", ""))
        absent = needed not in read and not (needed == "ctd_salinity" and "bottle_salinity" in read)
        if words and absent:
            recognised.findings.append(
                Finding(
                    "derived-delivered", Severity.DOUBT,
                    f"{name}: {variable.name} is {words}, and the {REGISTRY[needed].long_name.lower()} is not there;"
                    f" nothing is computed back; {variable.name} is kept and unused; ask for what was measured.",
                    variable=needed, value=variable.name, file=name,
                )
            )  # fmt: skip
