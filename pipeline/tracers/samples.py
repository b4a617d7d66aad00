"""The tracers of bottle samples alone: carbon, its isotopes, and what is read off the profile of a station."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pipeline.checking.marks import findings_of, raised
from pipeline.tables import with_columns
from pipeline.tracers.anomalies import anomalies, anomaly_forms, dilution_findings
from pipeline.tracers.carbonate import carbonate_forms, solved_again, system
from pipeline.tracers.carbonate_consistency import disagreements
from pipeline.tracers.carbonate_findings import carbonate_findings
from pipeline.tracers.carbonate_inputs import measured_here
from pipeline.tracers.carbonate_marks import input_marks, system_marks
from pipeline.tracers.extremes import extreme_forms, extremes
from pipeline.tracers.horizons import MINERALS, horizon_findings, horizons
from pipeline.tracers.isotope_components import MEASURED as CARBON_13
from pipeline.tracers.isotope_components import components
from pipeline.tracers.profiles import station_groups
from pipeline.usable import Rows

if TYPE_CHECKING:
    from collections.abc import Mapping

    from pipeline.findings import Finding
    from pipeline.settings import Settings
    from pipeline.tables import FloatArray
    from pipeline.tracers.carbonate import CarbonateSystem


@dataclass(frozen=True, slots=True)
class SampleTracers:
    """What was computed of a table of samples."""

    columns: Mapping[str, Any]  # by registry name, (n_row,) each
    forms: Mapping[str, Mapping[str, str]]  # metadata of some columns: which published forms they have
    findings: tuple[Finding, ...]


def sample_tracers(data: Rows, settings: Settings) -> SampleTracers:
    """Return the tracers of bottle samples that have their TEOS-10 columns and the tracers of every row.

    The carbonate system and its horizons are there where the cruise measured two of its quantities at all, carbon
    anomalies where it measured DIC or alkalinity, and the components of carbon-13 where it measured that.

    Parameters
    ----------
    data
        n_row samples.
    settings
        Which constants and published forms, and how profiles are read.

    """
    station, depth = station_groups(data.table), data.usable("depth")
    columns: dict[str, Any] = dict(extremes(station, depth, data.usable, settings.profiles))
    forms: dict[str, Mapping[str, str]] = dict(extreme_forms(settings.profiles))
    marks = input_marks(data, settings.carbonate)
    findings = tuple(findings_of(data, marks))
    columns |= raised(data, marks)
    if measured_here(data.names):
        first = system(data, settings.carbonate)
        disagreeing = disagreements(data, first, settings.carbonate)
        contradicting = system_marks(data, first, disagreeing, settings.carbonate)
        findings += (
            *findings_of(data, contradicting),
            *carbonate_findings(data, first, settings.carbonate),
        )
        columns |= raised(data, [*marks, *contradicting])
        doubted = {name: columns[name] for name in columns if name in data.names}
        data = Rows(with_columns(data.table, doubted), settings.use)
        carbon = solved_again(first, data, settings.carbonate)
        columns |= carbon.columns
        for mineral in MINERALS:
            of_mineral = horizons(station, depth, *_saturation(carbon, mineral), settings.profiles)
            columns[f"{mineral}_saturation_depth"] = of_mineral.depth
            columns[f"{mineral}_saturation_depth_uncertainty"] = of_mineral.uncertainty
            findings += horizon_findings(data, station, mineral, of_mineral, settings.profiles)
        forms |= carbonate_forms(data.names, settings.carbonate)
    if {"dic", "alkalinity"} & data.names:
        columns |= anomalies(data, settings.tracers, settings.carbonate)
        forms |= anomaly_forms(settings.tracers, settings.carbonate)
        findings += tuple(dilution_findings(data, settings.tracers))
    if CARBON_13 in data.names:
        of_carbon_13 = components(data, columns, settings.tracers)
        columns |= of_carbon_13.columns
        forms |= of_carbon_13.forms
        findings += of_carbon_13.findings
    return SampleTracers(columns, forms, findings)


def _saturation(carbon: CarbonateSystem, mineral: str) -> tuple[FloatArray, FloatArray]:
    return carbon.columns[f"{mineral}_saturation"], carbon.columns[f"{mineral}_saturation_uncertainty"]
