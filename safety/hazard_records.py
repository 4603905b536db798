"""Every published number behind the hazard figures: one table of records. Data only.

Levels: V seen on the issuing body's own page or quoted word for word from it, S seen in
a secondary page or transcription, C recomputed, D our own rule, M from memory and not
seen. Whatever the level: check against the standard itself before relying on it.
``checked_by`` names the person who did; until then nobody has.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

CHECK = "check against the standard itself before relying on it"
NOBODY = "nobody yet"

Level = Literal["V", "S", "C", "D", "M"]


@dataclass(frozen=True)
class HazardRecord:
    """One number: what, how much, in which unit, where it holds, who says so."""

    key: str
    quantity: str
    value: float
    unit: str
    wavelength_from_nm: float
    wavelength_to_nm: float
    time_from_s: float
    time_to_s: float
    source: str
    level: Level
    checked_by: str = NOBODY
    caution: str = CHECK


TRANSCRIPTIONS = (
    "public transcriptions citing ICNIRP 2013 Table 5 and IEC 60825-1:2014 Table A.1"
)
REGULATIONS = (
    "arbeidstilsynet.no, Regulations concerning Action and Limit Values, s. 11-5"
    " (ICNIRP parameters)"
)
CLASSES = "class limits for visible continuous light, secondary pages"
REMEMBERED = "IEC 60825-1 as remembered; the text was not seen"
OWN_RULE = "own rule, stricter than the published tables"

_TABLE = (
    HazardRecord(
        key="thermal-dose",
        quantity="retinal thermal limit below 10 s: H = value C_E (t/s)^0.75",
        value=18.0,
        unit="J/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=18e-6,
        time_to_s=10.0,
        source=TRANSCRIPTIONS + "; 18 us, the later of the two starts in use",
        level="S",
    ),
    HazardRecord(
        key="thermal-irradiance",
        quantity="retinal thermal limit from 10 s, small source: E = value",
        value=10.0,
        unit="W/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=10.0,
        time_to_s=3e4,
        source=TRANSCRIPTIONS,
        level="S",
    ),
    HazardRecord(
        key="thermal-extended",
        quantity="retinal thermal limit of a larger source: E = value C_E (T2/s)^-0.25",
        value=18.0,
        unit="W/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=10.0,
        time_to_s=3e4,
        source=TRANSCRIPTIONS,
        level="S",
    ),
    HazardRecord(
        key="photochemical-dose",
        quantity="retinal photochemical limit to 100 s: H = value C_B",
        value=100.0,
        unit="J/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=600.0,
        time_from_s=10.0,
        time_to_s=100.0,
        source=REMEMBERED,
        level="M",
    ),
    HazardRecord(
        key="photochemical-irradiance",
        quantity="retinal photochemical limit beyond 100 s: E = value C_B",
        value=1.0,
        unit="W/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=600.0,
        time_from_s=100.0,
        time_to_s=3e4,
        source=REMEMBERED,
        level="M",
    ),
    HazardRecord(
        key="blue-from",
        quantity="C_B = 1 up to value, then 10^(slope (lambda - value))",
        value=450.0,
        unit="nm",
        wavelength_from_nm=400.0,
        wavelength_to_nm=600.0,
        time_from_s=10.0,
        time_to_s=3e4,
        source=REGULATIONS,
        level="V",
    ),
    HazardRecord(
        key="blue-slope",
        quantity="slope of log10 C_B and of log10 T1",
        value=0.02,
        unit="1/nm",
        wavelength_from_nm=450.0,
        wavelength_to_nm=600.0,
        time_from_s=10.0,
        time_to_s=3e4,
        source=REGULATIONS,
        level="V",
    ),
    HazardRecord(
        key="t1-start",
        quantity="T1 = value to 450 nm, value 10^(slope (lambda - 450)) to 500 nm",
        value=10.0,
        unit="s",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=10.0,
        time_to_s=100.0,
        source=REGULATIONS + "; the symbol T1 means something else in IEC 60825-1",
        level="V",
    ),
    HazardRecord(
        key="t2-start",
        quantity="T2 = value 10^((alpha - 1.5 mrad)/98.5 mrad), alpha 1.5 to 100 mrad",
        value=10.0,
        unit="s",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=10.0,
        time_to_s=100.0,
        source=REGULATIONS,
        level="V",
    ),
    HazardRecord(
        key="alpha-min",
        quantity="angle up to which a source is small; C_E = alpha/value",
        value=1.5,
        unit="mrad",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=18e-6,
        time_to_s=3e4,
        source=REGULATIONS,
        level="V",
    ),
    HazardRecord(
        key="alpha-max",
        quantity="largest angle for which C_E grows",
        value=100.0,
        unit="mrad",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=0.25,
        time_to_s=3e4,
        source=REGULATIONS + "; shorter times have a smaller one",
        level="V",
    ),
    HazardRecord(
        key="pupil",
        quantity="aperture over which the eye's limits are averaged",
        value=7.0,
        unit="mm",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=18e-6,
        time_to_s=3e4,
        source=TRANSCRIPTIONS,
        level="S",
    ),
    HazardRecord(
        key="skin-dose",
        quantity="skin limit to 10 s: H = value (t/s)^0.25",
        value=1.1e4,
        unit="J/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=1e-7,
        time_to_s=10.0,
        source=REMEMBERED,
        level="M",
    ),
    HazardRecord(
        key="skin-irradiance",
        quantity="skin limit beyond 10 s: E = value",
        value=2000.0,
        unit="W/m2",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=10.0,
        time_to_s=3e4,
        source="an institution's safety guide p. 104, EN 60825-1:2014: 200 mW/cm2",
        level="S",
    ),
    HazardRecord(
        key="class-1-thermal",
        quantity="most power through 7 mm in class 1, thermal",
        value=0.39,
        unit="mW",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=10.0,
        time_to_s=3e4,
        source="a manufacturer's questions and answers quoting JIS C6802",
        level="S",
    ),
    HazardRecord(
        key="class-1-photochemical",
        quantity="most power through 7 mm in class 1, photochemical: value C_B",
        value=0.039,
        unit="mW",
        wavelength_from_nm=400.0,
        wavelength_to_nm=600.0,
        time_from_s=100.0,
        time_to_s=3e4,
        source="a safety guide p. 105, EN 60825-1:2014; its growth with C_B is level M",
        level="S",
    ),
    HazardRecord(
        key="class-2",
        quantity="most power through 7 mm in class 2",
        value=1.0,
        unit="mW",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=0.25,
        time_to_s=0.25,
        source=CLASSES + ", three of them",
        level="S",
    ),
    HazardRecord(
        key="class-3r",
        quantity="most power through 7 mm in class 3R",
        value=5.0,
        unit="mW",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=0.25,
        time_to_s=0.25,
        source=CLASSES + ", two of them",
        level="S",
    ),
    HazardRecord(
        key="class-3b",
        quantity="most power in class 3B",
        value=500.0,
        unit="mW",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=0.25,
        time_to_s=3e4,
        source=CLASSES,
        level="S",
    ),
    HazardRecord(
        key="blink-from",
        quantity="shortest wavelength at which looking away is counted on",
        value=500.0,
        unit="nm",
        wavelength_from_nm=400.0,
        wavelength_to_nm=700.0,
        time_from_s=0.25,
        time_to_s=0.25,
        source=OWN_RULE + ": below it the photochemical limit is the lower one"
        " (C_B < 10), and near 400 nm a beam looks much fainter than it is",
        level="D",
    ),
)

RECORDS: Mapping[str, HazardRecord] = MappingProxyType({r.key: r for r in _TABLE})
"""Every record by its key."""


def value_of(key: str) -> float:
    """The number of the record ``key``, in its record's unit. KeyError if unknown."""
    return RECORDS[key].value
