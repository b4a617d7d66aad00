"""Where a file and its description, or flags and what they are said to be, contradict each other, it is told."""

from __future__ import annotations

import pytest

from pipeline.findings import Finding, Severity
from pipeline.reading import Delivery, read_cruise_file, read_delivery
from tests.invented import EXPOCODE, LIMITS, bottle_file, checks, one
from tests.reading.netcdf_files import netcdf_bytes, rows

HEAD = f"""\
[[file]]
files = "*"
kind = "bottle"
units_line = 2
[file.constants]
expocode = "{EXPOCODE}"
station = "1"
latitude = -35.5
longitude = -12.25
date = 2009-02-14
[file.columns]
p = "pressure"
"""


def table(columns: str, text: str, head: str = HEAD, name: str = "x.csv") -> Delivery:
    return read_delivery(
        name, text.encode(), LIMITS, read_cruise_file("cruise.toml", (head + columns).encode()).of(name)
    )


def the(delivery: Delivery, check: str) -> Finding:
    (finding,) = [f for f in delivery.findings if f.check == check]
    return finding


SAID = 'NO3 = { quantity = "nitrate", unit = "umol/l" }\n'


def test_a_unit_that_is_said_otherwise_than_the_heading_has_it_is_a_doubt_that_names_both() -> None:
    finding = the(table(SAID, "p,NO3\ndbar,umol/kg\n10,20\n"), "unit-contradicts")
    assert finding.severity is Severity.DOUBT
    assert finding.message == (
        "x.csv, line 1: the file gives 'umol/kg' as the unit of NO3, and cruise.toml, line 13 'umol/l'; expected one"
        " unit; 'umol/l' was taken; ask which is right."
    )
    assert finding.to_group == (
        "x.csv, line 1: the file gives 'umol/kg' as the unit of NO3; we were told that it is 'umol/l' and took that;"
        " which is right?"
    )
    in_name = SAID.replace("NO3", '"NO3 (umol/kg)"')
    assert "unit-contradicts" in checks(table(in_name, "p,NO3 (umol/kg)\ndbar,\n10,20\n"))


@pytest.mark.parametrize("written", ["umol/l", "UMOL/L", "µmol/l", "", "uM", "units unknown"])
def test_a_unit_that_is_the_same_or_cannot_be_read_is_no_contradiction(written: str) -> None:
    assert "unit-contradicts" not in checks(table(SAID, f"p,NO3\ndbar,{written}\n10,20\n"))


def test_the_unit_of_a_netcdf_variable_and_of_an_exchange_column_is_compared_too() -> None:
    toml = '[[file]]\nfiles = "*"\n[file.columns]\n{} = {{ quantity = "nitrate", unit = "umol/l" }}\n'
    described = read_cruise_file("cruise.toml", toml.format("nitrate").encode()).of("x")
    finding = the(read_delivery("x.nc", netcdf_bytes(rows()), LIMITS, described), "unit-contradicts")
    assert "'umol kg-1'" in finding.message
    described = read_cruise_file("cruise.toml", toml.format("NITRAT").encode()).of("x")
    assert "unit-contradicts" in checks(read_delivery("x_hy1.csv", bottle_file(), LIMITS, described))


FLAGGED = 'NO3 = { quantity = "nitrate", unit = "umol/kg", flag = "Q" }\n'


def flagged(scheme: str, *flags: int) -> Delivery:
    head = HEAD.replace('kind = "bottle"', f'kind = "bottle"\nflags = "{scheme}"')
    cells = "".join(f"{i},20,{flag}\n" for i, flag in enumerate(flags))
    return table(FLAGGED, f"p,NO3,Q\ndbar,umol/kg,\n{cells}", head)


def test_whp_flags_that_are_said_to_be_iode_are_doubted() -> None:
    delivery = flagged("iode", 2, 2, 2, 3, 9)
    finding = the(delivery, "flag-scheme")
    assert finding.severity is Severity.DOUBT
    assert finding.message == (
        "x.csv, line 1: the flags Q are read as IODE flags and most often are 2 (3 of 5), which in IODE is 'not"
        " evaluated', and such values count as having no flag; in WHP 2 is acceptable; if they are WHP flags, write"
        ' flags = "whp" in cruise.toml, line 14.'
    )
    assert finding.to_group.endswith("; in WHP 2 is acceptable; whose flags are they?")
    assert one(delivery, "nitrate_flag") is None


def test_iode_flags_that_are_said_to_be_whp_are_doubted() -> None:
    finding = the(flagged("whp", 1, 1, 1, 3, 9), "flag-scheme")
    assert "most often are 1 (3 of 5), which in WHP is 'drawn, analysis not received'" in finding.message
    assert 'write flags = "iode", "qartod" or "argo" in cruise.toml, line 14' in finding.message


@pytest.mark.parametrize(
    ("scheme", "flags"),
    [("iode", (1, 1, 2, 4)), ("whp", (2, 2, 1, 9)), ("argo", (2, 2, 1)), ("qartod", (9, 9))],
)
def test_flags_that_speak_for_their_scheme_are_not_doubted(scheme: str, flags: tuple[int, ...]) -> None:
    assert "flag-scheme" not in checks(flagged(scheme, *flags))


def test_columns_of_the_same_doubt_share_a_sentence() -> None:
    head = HEAD.replace('kind = "bottle"', 'kind = "bottle"\nflags = "iode"')
    columns = FLAGGED + 'PO4 = { quantity = "phosphate", unit = "umol/kg", flag = "Q2" }\n'
    delivery = table(columns, "p,NO3,Q,PO4,Q2\ndbar,umol/kg,,umol/kg,\n10,20,2,1,2\n20,20,3,1,2\n", head)
    finding = the(delivery, "flag-scheme")
    assert "the flags Q and Q2 are read as IODE flags and most often are 2 (3 of 4)" in finding.message
    assert 'write flags = "whp" in cruise.toml, line 14 and below.' in finding.message
    assert finding.variable is None
