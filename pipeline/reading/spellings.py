"""What people call quantities in the headings of tables: for suggestions and drafts, never for reading.

Common practice, no source: as found in files.
"""

from __future__ import annotations

import difflib
import re
from types import MappingProxyType
from typing import TYPE_CHECKING

from pipeline.reading.description import PARTS
from pipeline.variables import EXCHANGE_NAMES, IDENTITY, MEASURED, REGISTRY

if TYPE_CHECKING:
    from collections.abc import Mapping

# What a cruise.toml may say that a column is.
QUANTITIES: tuple[str, ...] = tuple(dict.fromkeys((*IDENTITY, *MEASURED, "depth", *PARTS)))

_SPELLINGS = {
    "expocode": "cruise cruiseid cruisename cruisecode cruiseno cruisenumber studyname voyage survey",
    "section": "line transect sectid",
    "station": "stn sta stationid stationname stationno stationnumber stationnr site siteid stat",
    "cast": "castno castnumber castid haul deployment profile",
    "sample": "sampleid samplenumber sampleno sampleidentifier",
    "bottle": "niskin niskinno niskinnumber bottleno bottlenumber bottleid bot btl rosetteposition",
    "date": "sampledate samplingdate datum day/month/year yyyymmdd",
    "time": "timeofday sampletime samplingtime hhmm clock",
    "date_and_time": "datetime dateandtime datetimeutc timestamp isodatetime datetimegmt instant",
    "year": "yr yyyy jahr",
    "month": "mon mm monat",
    "day": "dd dayofmonth tag",
    "day_of_year": "yearday julianday jday doy julday yday dayofyear",
    "hour": "hr hh hours",
    "minute": "mi minutes",
    "second": "ss seconds",
    "latitude": "lat latitudedecdeg latitudedecimal decimallatitude latdec latitudedeg",
    "longitude": "lon long lng longitudedecdeg longitudedecimal decimallongitude londec longitudedeg",
    "latitude_degrees": "latdeg latitudedegrees", "latitude_minutes": "latmin latitudeminutes",
    "latitude_hemisphere": "latns northsouth ns latdir",
    "longitude_degrees": "londeg longdeg longitudedegrees", "longitude_minutes": "lonmin longmin longitudeminutes",
    "longitude_hemisphere": "lonew eastwest ew londir",
    "bottom_depth": "bottomdepth waterdepth botdepth seafloordepth sounding echodepth depthbottom bottom",
    "depth": "sampledepth samplingdepth depthofsample nominaldepth depthm z tiefe",
    "pressure": "pres press prdm ctdpres ctdpressure seapressure p db dbar prs",
    "temperature": "temp t ctdtemp ctdtemperature insitutemperature watertemperature t90 seatemperature",
    "ctd_salinity": "sal salinity psal ctdsalinity practicalsalinity s salinityctd",
    "bottle_salinity": "bottlesalinity btlsal salinitybottle salinometer autosal",
    "ctd_oxygen": "ctdoxygen doxy oxygenctd sensoroxygen",
    "bottle_oxygen": "oxy o2 dissolvedoxygen bottleoxygen winkler winkleroxygen oxygenwinkler",
    "silicate": "silicicacid sio2 sioh4 si sio3 sio4 sil dsi silica",
    "nitrate": "no3 no3n", "nitrite": "no2 no2n",
    "nitrate_plus_nitrite": "nitrateandnitrite nitriteandnitrate nitratenitrite nox no2no3 no3no2 nn",
    "phosphate": "po4 po4p srp dip phos", "ammonium": "nh4 nh4n ammonia",
    "dic": "tco2 ct dissolvedinorganiccarbon totalco2 totalcarbon",
    "alkalinity": "ta alk talk totalalkalinity at", "ph_total": "ph phtotal pht phtotalscale",
    "chlorophyll_a": "chl chla chlorophyll chlorophylla", "fluorescence": "fluo fluorometer",
    "transmission": "transmissometer beamtransmission xmiss",
    "delta_carbon_13": "d13c delta13c d13cdic delta13cdic", "delta_carbon_14": "d14c delta14c",
    "delta_oxygen_18": "d18o delta18o d18osw", "sulfur_hexafluoride": "sf6",
    "dissolved_organic_carbon": "doc", "total_dissolved_nitrogen": "tdn",
    "particulate_organic_carbon": "poc", "particulate_organic_nitrogen": "pon",
    "laboratory_temperature": "labtemp labtemperature analysistemperature",
}  # fmt: skip

# What a column can be that makes a quantity with others: the quantity's own words speak of what is made.
_IN_WORDS = {
    "date": "date alone",
    "time": "time of day alone; with the date in the same column it is date_and_time",
}

# Words in a heading that change nothing of what it means.
_EMPTY_WORDS = re.compile(
    r"\b(utc|gmt|dec\.?|deg\.?|decimal|degrees?|ctd|mean|avg|sample|water|conc|umol|kg|l)\b\.?"
)
_IN_BRACKETS = re.compile(r"^(.*?)[\s_]*[(\[]([^()\[\]]*)[)\]]\s*$")


def folded(name: str) -> str:
    """Return a heading without case, blanks and punctuation."""
    return re.sub(r"[^a-z0-9/+]", "", name.lower().replace("µ", "u").replace("μ", "u").replace("δ", "d"))


def _by_spelling() -> Mapping[str, str]:
    spelled = {word: name for name, words in _SPELLINGS.items() for word in words.split()}
    spelled |= {folded(written): variable.name for written, variable in EXCHANGE_NAMES.items()}
    spelled |= {folded(name): name for name in QUANTITIES}
    spelled["depth"] = "depth"  # in exchange files the sea floor's, elsewhere nearly always the sample's
    spelled["oxygen"] = "bottle_oxygen"
    return MappingProxyType(spelled)


BY_SPELLING = _by_spelling()


def name_and_unit(heading: str) -> tuple[str, str]:
    """Return the name and the unit of a heading such as ``Phosphate (umol/l)``; "" where it has no unit."""
    if match := _IN_BRACKETS.match(heading.strip()):
        return match[1].strip(), match[2].strip()
    return heading.strip(), ""


def meant(heading: str) -> str | None:
    """Return what quantity a heading usually means, None where nobody would know."""
    name, _ = name_and_unit(heading)
    for written in (heading, name, _EMPTY_WORDS.sub("", name.lower())):
        quantity = BY_SPELLING.get(folded(written))
        if quantity:
            return quantity
    return None


def nearest(written: str) -> str | None:
    """Return the quantity that someone who wrote ``written`` may have meant."""
    quantity = meant(written)
    if quantity:
        return quantity
    close = difflib.get_close_matches(written.lower(), [*QUANTITIES, *BY_SPELLING], n=1)
    return BY_SPELLING.get(close[0], close[0]) if close else None


def in_words(quantity: str) -> str:
    """Return what a quantity of a cruise.toml is, in words."""
    if quantity in _IN_WORDS:
        return _IN_WORDS[quantity]
    return PARTS[quantity] if quantity in PARTS else REGISTRY[quantity].long_name
