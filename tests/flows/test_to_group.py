"""What the page says to the group: how its file was read, in its own names, and nothing of the data manager's files."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import pytest

from tests.flows.conftest import call
from tests.flows.test_note import RENDERER, Page, page_of
from tests.invented import bottle_file
from tests.reading.netcdf_files import Plan, netcdf_bytes
from tests.reading.netcdf_files import rows as netcdf_rows
from tests.reading.tables import as_workbook

if TYPE_CHECKING:
    from pathlib import Path

OURS = ("cruise.toml", "seawhence mapping", "inbox", "settings")
NUTRIENTS = """\
Stn,When,Lat,Lon,p,oxygen,silicate,no3,Q
7,02/03/2009 10:00,30.5 S,-12.25,100,7000,10,20.5,2
7,02/03/2009 11:00,-30.5,-12.25,200,205,x,"25,5",2
8,02/03/2009 12:00,-30.5,-12.25,300,205,11,25.5,2
"""
DESCRIBED = """\
[[file]]
files = "nutrients.csv"
kind = "bottle"
flags = "iode"
missing = [-9, "n.d."]
time_zone = "+02:00"
[file.columns]
Stn = "station"
When = "date_and_time"
Lat = "latitude"
Lon = "longitude"
p = "pressure"
oxygen = { quantity = "bottle_oxygen", unit = "umol/kg" }
silicate = { quantity = "silicate", unit = "umol/l" }
no3 = { quantity = "nitrate", unit = "umol/kg", flag = "Q" }
[file.constants]
expocode = "ZZV120090214"
"""


def test_the_page_of_a_table_lists_how_it_was_read_and_speaks_to_the_group(tmp_path: Path) -> None:
    (tmp_path / "nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (tmp_path / "cruise.toml").write_text(DESCRIBED, encoding="utf-8")
    text, page = page_of(tmp_path / "nutrients.csv")
    assert not [word for word in OURS if word in text]
    assert "How we read your file" in page.texts["h2"]
    cells = page.texts["td"]
    silicate = cells.index("silicate")
    assert cells[silicate : silicate + 5] == ["silicate", "Silicic acid", "umol/l", "", ""]
    no3 = cells.index("no3")
    assert cells[no3 : no3 + 4] == ["no3", "Nitrate", "umol/kg", "Q (IODE)"]
    assert cells[cells.index("When") + 1] == "date and time of day in one column"
    items = page.texts["li"]
    assert "Cruise of all rows: ZZV120090214." in items
    assert "Times are 02:00 ahead of UTC." in items
    assert "Missing values stand as -9 or n.d., beside blanks and codes such as -999." in items
    assert any(item.startswith("Line 2: oxygen is 7000") for item in items)
    assert any("is the comma the decimal sign?" in item for item in items)
    assert any("'02/03/2009' were read day first, because only so they follow" in item for item in items)
    assert any("whose flags are they?" in item for item in items)
    assert any("please send us salinity and temperature with them" in item for item in items)
    assert not any("OXYGEN" in item or "SILCAT" in item for item in items)
    row = len(cells) - 1 - cells[::-1].index("Silicic acid")
    assert cells[row + 1 : row + 4] == ["silicate", "umol/l", "not possible: no salinity or temperature"]
    nitrate = len(cells) - 1 - cells[::-1].index("Nitrate")
    assert cells[nitrate + 6] == "2: 3", "the flags as delivered, not as we read them"


def test_the_page_of_a_netcdf_file_speaks_of_records_and_of_names_as_they_are(tmp_path: Path) -> None:
    def spoil(file: Any) -> None:
        file["temperature"].units = "degree_C"
        file.createVariable("pressureQC", "i1", ("obs",))[:] = 1
        odd = file.createVariable("waterDepth", "f8", ("profile",))
        odd[:] = 4000.0
        file["time"].units = "fortnights since 2009-02-14"

    path = tmp_path / "made.nc"
    path.write_bytes(
        netcdf_bytes(netcdf_rows(), Plan(meanings={0: "green", 1: "red"}, flag=lambda _: 0, spoil=spoil))
    )
    text, page = page_of(path)
    assert not [word for word in OURS if word in text]
    assert "Records are counted from 1" in " ".join(page.texts["p"])
    assert "Lines are counted" not in text
    assert not re.search(r"PressureQC|WaterDepth|Time is a time", text)
    cells = page.texts["td"]
    temperature = cells.index("Temperature in situ, ITS-90")
    assert cells[temperature + 1 : temperature + 3] == ["temperature", "degree_C"]
    assert any(cell.startswith("0: ") for cell in cells)
    assert not any(cell.startswith("3: ") for cell in cells)
    assert "records" in cells


@pytest.mark.parametrize(
    ("name", "data"),
    [
        ("a.xlsx", "workbook"), ("notes.txt", b"no cruise\n"), ("a.nc", "netcdf"),
        ("a_hy1.csv", bottle_file({"EXPOCODE": "3.3E+09"})),
    ],
)  # fmt: skip
def test_the_page_of_a_refused_file_does_not_speak_of_our_files(
    name: str, data: object, tmp_path: Path
) -> None:
    if data == "workbook":
        data = as_workbook()
    elif data == "netcdf":
        data = netcdf_bytes(netcdf_rows(), Plan(spoil=lambda file: file.delncattr("expocode")))
    assert isinstance(data, bytes)
    (tmp_path / name).write_bytes(data)
    outcome = call("check", tmp_path / name, "--format", "markdown")
    assert outcome.status == 1
    assert not [word for word in OURS if word in outcome.out]
    page = Page(RENDERER.render(outcome.out))
    assert all(item.endswith((".", "?")) for item in page.texts["li"])


def test_a_page_about_a_fault_of_our_own_description_says_that_it_is_not_to_be_sent(tmp_path: Path) -> None:
    (tmp_path / "nutrients.csv").write_text(NUTRIENTS, encoding="utf-8")
    (tmp_path / "cruise.toml").write_text(DESCRIBED.replace("no3 =", "NO3 ="), encoding="utf-8")
    outcome = call("check", tmp_path / "nutrients.csv", "--format", "markdown")
    assert "Do not send this page" in outcome.out
    assert "there is no column 'NO3'" in outcome.out


def test_the_number_of_findings_is_the_same_on_the_page_and_in_its_headings(tmp_path: Path) -> None:
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file(*[{"NITRAT": "x"}] * 3, {"SALNTY": "12623"}))
    _, page = page_of(tmp_path / "a_hy1.csv")
    found = page.texts["td"][page.texts["td"].index("found") + 1]
    wrong = next(heading for heading in page.texts["h2"] if heading.startswith("What is wrong: "))
    assert found.split()[0] == wrong.split()[-1]
    listed = [
        item for item in page.texts["li"] if re.match(r"Line \d+: (NITRAT is 'x'|SALNTY is 12623)", item)
    ]
    assert len(listed) == int(found.split()[0])


def test_a_file_in_which_nothing_of_a_column_could_be_converted_says_so(tmp_path: Path) -> None:
    bare = {"CTDTMP": "-999.0", "CTDSAL": "-999.0", "SALNTY": "-999.0"}
    (tmp_path / "a_hy1.csv").write_bytes(bottle_file(bare, bare, units={"PHSPHT": "UMOL/L"}))
    text, page = page_of(tmp_path / "a_hy1.csv")
    assert "PHSPHT is in UMOL/L and was converted" not in text
    assert "None of the 2 values of PHSPHT could be converted" in text
    cells = page.texts["td"]
    assert cells[cells.index("PHSPHT") + 2] == "not possible: no salinity or temperature"
