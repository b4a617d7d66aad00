"""Values of sources that no sea water has, and values that look like those of another unit."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.variables import REGISTRY

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from pipeline.mixing.entries import Catalogue, SourceSet

# Units that published tables give, by the registry's: what one is multiplied with, and what is added.
_PER_KILOGRAM = {"mmol/kg": (1e3, 0.0), "mol/kg": (1e6, 0.0), "nmol/kg": (1e-3, 0.0)}
_OTHER_UNITS: Mapping[str, Mapping[str, tuple[float, float]]] = {
    "umol kg-1": _PER_KILOGRAM,
    "g kg-1": {"kg/kg": (1e3, 0.0)},
    "degree_C": {"K": (1.0, -273.15)},
}
# Below these a value is possible and rare, and usual in another unit: oxygen at saturation is at most 11 ml/l or
# 15 mg/l, and the saltiest sea has 0.04 kg/kg.
_LITTLE: Mapping[str, tuple[float, str]] = {
    **dict.fromkeys(("oxygen", "bottle_oxygen", "ctd_oxygen"), (15.0, "ml/l or mg/l")),
    **dict.fromkeys(("preformed_salinity", "absolute_salinity", "practical_salinity"), (0.05, "kg/kg")),
}


def impossible(name: str, value: float) -> str | None:
    """Return why no sea water has such a value of a property of the registry, None where one could."""
    variable = REGISTRY[name]
    if variable.plausible is None:
        return None
    low, high = variable.plausible
    if low <= value <= high:
        return None
    unit = "" if variable.unit == "1" else f" {variable.unit}"
    found = f"found {name} {value:g}; expected {low:g} to {high:g}{unit}"
    for other, (factor, added) in _OTHER_UNITS.get(variable.unit, {}).items():
        if low < factor * value + added <= high:
            return f"{found}; is it in {other}? Convert it."
    return f"{found}; correct it."


def doubtful(catalogue: Catalogue, chosen: SourceSet) -> Iterator[str]:
    """Yield a sentence for every value of the sources of a set that looks like one of another unit."""
    for name in chosen.properties:
        if name not in _LITTLE:
            continue
        little, other = _LITTLE[name]
        values = {code: catalogue.sources[code].properties[name].value for code in chosen.sources}
        unit = REGISTRY[name].unit
        for code, value in values.items():
            if 0 < value < little:
                others = _span([one for of, one in values.items() if of != code])
                yield (
                    f"source '{code}': found {name} {value:g} {unit}{others}; expected more in nearly all sea water; "
                    f"is it in {other}? Convert it, or leave it if it is right."
                )


def _span(values: Sequence[float]) -> str:
    if not values:
        return ""
    low, high = f"{min(values):g}", f"{max(values):g}"
    return f", where the others have {low if low == high else f'{low} to {high}'}"
