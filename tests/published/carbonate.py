"""The carbonate system: constants at one salinity and temperature, worked cases, a round robin, uncertainties."""

from __future__ import annotations

from dataclasses import fields

import numpy as np

from pipeline.carbonate_settings import CarbonateSettings
from pipeline.tracers.carbonate_pairs import Conditions, Measured, pairs_of
from pipeline.tracers.carbonate_state import carbonate_system
from pipeline.tracers.equilibria import equilibria

from .check import Check, Status

Inputs = dict[str, float | str]

COMPUTED, VERIFIED, MEMORY = Status.COMPUTED, Status.VERIFIED, Status.FROM_MEMORY
GUIDE = "Dickson, Sabine and Christian 2007, PICES Special Publication 3"
PYCO2SYS = "PyCO2SYS 1.8.3.4, every option stated, total scale"
ROUND_ROBIN = "Humphreys et al. 2022, GMD 15:15, Table 4"
CRUISE = "sample of a public bottle file, I08S 2007, station 1, 3 dbar; computed by PyCO2SYS 1.8.3.4"


def constant(name: str, salinity: float, temperature: float, carbonic: str = "lueker_2000") -> float:
    """Return a constant at no pressure, or a total."""
    settings = CarbonateSettings.model_validate({"carbonic": carbonic})
    found = equilibria(np.array([salinity]), np.array([temperature]), np.zeros(1), settings)
    assert name in {field.name for field in fields(found)}
    return float(getattr(found, name)[0])


def ln_constant(name: str, salinity: float, temperature: float, carbonic: str = "lueker_2000") -> float:
    return float(np.log(constant(name, salinity, temperature, carbonic)))


def pk(name: str, salinity: float, temperature: float, carbonic: str = "lueker_2000") -> float:
    return -ln_constant(name, salinity, temperature, carbonic) / float(np.log(10.0))


def carbon(
    quantity: str,
    salinity: float,
    temperature: float,
    pressure: float,
    alkalinity: float,
    dic: float,
    silicate: float = 0.0,
    phosphate: float = 0.0,
    ammonia: float = 0.0,
    sulfide: float = 0.0,
    borate: str = "lee_2010",
    carbonic: str = "lueker_2000",
) -> float:
    """Return a quantity of the carbonate system, or its uncertainty for 2 umol/kg of DIC and of alkalinity."""
    settings = CarbonateSettings.model_validate({"borate": borate, "carbonic": carbonic})
    k = equilibria(
        np.array([salinity]), np.array([temperature]), np.array([pressure]), settings,
        silicate=silicate, phosphate=phosphate, ammonia=ammonia, sulfide=sulfide,
    )  # fmt: skip
    none, two = np.full(1, np.nan), np.full(1, 2.0)
    uncertainty = {"dic": two, "alkalinity": two, "ph": none, "fco2": none}
    measured = Measured(np.array([dic]), np.array([alkalinity]), none, none, uncertainty)
    pair = pairs_of(measured.dic, measured.alkalinity, none, none)
    values, uncertainties = carbonate_system(measured, pair, Conditions(k, k, k), constants_too=False)
    found = uncertainties if quantity.endswith("_uncertainty") else values
    return float(found[quantity.removesuffix("_uncertainty")][0])


_HERE: Inputs = {"salinity": 35.0, "temperature": 25.0}
# Name, function, as the Guide prints it (and within what it agrees), as computed.
_CONSTANTS = (
    ("k0", ln_constant, "-3.5617", None, "-3.56165"),
    ("k1", pk, "5.8472", None, "5.84715"),
    ("k2", pk, "8.9660", None, "8.96595"),
    ("borate_k", ln_constant, "-19.7964", None, "-19.79640"),
    ("bisulfate_k", ln_constant, "-2.30", None, "-2.29957"),
    ("fluoride_k", ln_constant, "-6.09", None, "-6.09190"),
    # The Guide puts these on the total scale in another way.
    ("water_k", ln_constant, "-30.434", 0.01, "-30.44215"),
    ("phosphoric_k1", ln_constant, "-3.71", 0.01, "-3.71973"),
    ("phosphoric_k2", ln_constant, "-13.727", 0.01, "-13.73577"),
    ("phosphoric_k3", ln_constant, "-20.24", 0.01, "-20.24650"),
    ("silicic_k", ln_constant, "-21.61", 0.01, "-21.61527"),
)
_ROY: Inputs = {**_HERE, "carbonic": "roy_1993"}

_QUANTITIES = (
    "ph_in_situ", "fco2_in_situ", "pco2_in_situ", "aqueous_co2", "bicarbonate", "carbonate", "calcite_saturation",
    "aragonite_saturation", "carbonate_fraction",
)  # fmt: skip
_A: Inputs = {"salinity": 35.0, "temperature": 25.0, "pressure": 0.0, "alkalinity": 2300.0, "dic": 2000.0}
_B: Inputs = {**_A, "dic": 2100.0}
_C: Inputs = {"salinity": 34.69, "temperature": 1.5, "pressure": 4000.0, "alkalinity": 2430.0, "dic": 2320.0,
      "silicate": 150.0, "phosphate": 2.5}  # fmt: skip
_D: Inputs = {"salinity": 34.92, "temperature": 2.7, "pressure": 3000.0, "alkalinity": 2320.0, "dic": 2175.0,
      "silicate": 25.0, "phosphate": 1.4}  # fmt: skip
_CASES = (
    (
        _A,
        "uppstrom_1974",
        "8.04590 395.68152 396.94761 11.23414 1775.34891 213.41694 5.13746 3.38627 0.106708",
    ),
    (_A, "lee_2010", "8.04023 401.40859 402.69300 11.39675 1777.67872 210.92454 5.07746 3.34673 0.105462"),
    (
        _B,
        "uppstrom_1974",
        "7.85775 663.62293 665.74637 18.84150 1930.67041 150.48809 3.62261 2.38779 0.071661",
    ),
    (_B, "lee_2010", "7.85263 671.98056 674.13074 19.07879 1932.08667 148.83454 3.58280 2.36155 0.070874"),
    (
        _C,
        "uppstrom_1974",
        "7.81263 462.43772 464.43767 27.49097 2210.19072 82.31831 0.88587 0.58505 0.035482",
    ),
    (_C, "lee_2010", "7.80701 468.60115 470.62776 27.85737 2210.85798 81.28465 0.87474 0.57771 0.035036"),
    (
        _D,
        "uppstrom_1974",
        "7.94548 356.45570 357.97265 20.22534 2052.80905 101.96561 1.34121 0.87614 0.046881",
    ),
    (_D, "lee_2010", "7.93932 361.74183 363.28128 20.52528 2053.89300 100.58172 1.32300 0.86425 0.046244"),
)
_SAMPLE: Inputs = {
    "salinity": 33.4640,
    "alkalinity": 2267.2,
    "dic": 2121.4,
    "silicate": 53.64,
    "phosphate": 1.58,
}
_IN_SITU: Inputs = {**_SAMPLE, "temperature": -1.1066, "pressure": 3.0}
_LABORATORY: Inputs = {**_SAMPLE, "temperature": 25.0, "pressure": 0.0}
# Printed with the default options of the library of that time; these here give it. Today's defaults do not.
_ROBIN: Inputs = {"salinity": 33.0, "temperature": 22.0, "pressure": 1234.0, "alkalinity": 2300.0, "dic": 2100.0,
          "silicate": 10.0, "phosphate": 1.0, "ammonia": 2.0, "sulfide": 3.0, "carbonic": "sulpis_2020"}  # fmt: skip

ROWS = (
    *(
        Check(f"{'pK' if by is pk else 'ln K'} {name}", {"name": name, **_HERE}, by, printed, GUIDE, MEMORY, within)
        for name, by, printed, within, _ in _CONSTANTS
    ),
    *(
        Check(f"{'pK' if by is pk else 'ln K'} {name}", {"name": name, **_HERE}, by, computed, PYCO2SYS, COMPUTED)
        for name, by, _, _, computed in _CONSTANTS
    ),
    *(
        Check(f"ln K of Roy {name}", {"name": name, **_ROY}, ln_constant, printed, source, status)
        for name, printed, source, status in (
            ("k1", "-13.4847", "Roy et al. 1993, as in DOE 1994", MEMORY),
            ("k2", "-20.5504", "Roy et al. 1993, as in DOE 1994", MEMORY),
            ("k1", "-13.48469", PYCO2SYS, COMPUTED),
            ("k2", "-20.55038", PYCO2SYS, COMPUTED),
        )
    ),
    *(
        Check(f"pK of Roy {name}", {"name": name, **_ROY}, pk, printed, PYCO2SYS, COMPUTED)
        for name, printed in (("k1", "5.85633"), ("k2", "8.92492"))
    ),
    *(
        Check(f"{name}, {unit}", {"name": name, **_HERE}, constant, printed, PYCO2SYS, COMPUTED)
        for name, unit, printed in (
            ("calcite_k", "(mol/kg)2", "4.27235e-7"), ("aragonite_k", "(mol/kg)2", "6.48176e-7"),
            ("calcium", "umol/kg", "10284.57"), ("sulfate", "umol/kg", "28235.43"), ("fluoride", "umol/kg", "68.3258"),
            ("borate", "umol/kg", "432.6"),
        )
    ),
    *(
        Check(quantity, {"quantity": quantity, **case, "borate": borate}, carbon, printed, PYCO2SYS, COMPUTED)
        for case, borate, line in _CASES
        for quantity, printed in zip(_QUANTITIES, line.split(), strict=True)
    ),
    *(
        Check(f"{quantity} at 25 degC", {"quantity": quantity, **_LABORATORY}, carbon, printed, CRUISE, COMPUTED)
        for quantity, printed in (("ph_in_situ", "7.74531"), ("fco2_in_situ", "886.545"))
    ),
    *(
        Check(quantity, {"quantity": quantity, **_IN_SITU}, carbon, printed, CRUISE, COMPUTED)
        for quantity, printed in (("ph_in_situ", "8.14385"), ("fco2_in_situ", "295.516"), ("carbonate", "104.8335"),
                                  ("aragonite_saturation", "1.58608"))
    ),
    *(
        Check(f"{quantity} for 2 umol/kg of each", {"quantity": f"{quantity}_uncertainty", **_B}, carbon, printed,
              f"{PYCO2SYS}; its own propagation", COMPUTED)
        for quantity, printed in (("ph_in_situ", "0.005756"), ("fco2_in_situ", "9.932"), ("carbonate", "1.7502"),
                                  ("aragonite_saturation", "0.02777"))
    ),
    *(
        Check(f"{quantity} of the round robin", {"quantity": quantity, **_ROBIN}, carbon, printed, ROUND_ROBIN,
              VERIFIED, within)
        for quantity, printed, within in (
            ("ph_in_situ", "7.871", None), ("carbonate", "143.8", None), ("bicarbonate", "1938.5", None),
            ("aqueous_co2", "17.7", None),
            # As printed; the same options give 0.1 more here, by PyCO2SYS's own solver as by ours.
            ("pco2_in_situ", "572.6", 0.15), ("fco2_in_situ", "570.7", 0.15),
        )
    ),
    *(
        Check(f"{quantity} of the round robin", {"quantity": quantity, **_ROBIN}, carbon, printed, PYCO2SYS, COMPUTED)
        for quantity, printed in (("pco2_in_situ", "572.7"), ("fco2_in_situ", "570.8"))
    ),
)  # fmt: skip
