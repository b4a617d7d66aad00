from __future__ import annotations

import io
import zipfile

import pytest

from pipeline.problems import DeliveryProblem
from pipeline.reading import read_delivery, survey_cruises
from pipeline.reading.zips import ZIP_MAGICS
from pipeline.settings import ReadingSettings
from tests.invented import EXPOCODE, bottle_file, cast_file, checks, one, read, zipped


def test_a_cast_is_read_with_its_header_on_every_level() -> None:
    delivery = read(cast_file(), "cast_ct1.csv")
    assert delivery.kind == "ctd"
    assert delivery.table.column("pressure").to_pylist() == [0.0, 10.0]
    assert delivery.table.column("station").to_pylist() == ["1", "1"]
    assert one(delivery, "latitude") == -35.5
    assert delivery.table.column("line").to_pylist() == [14, 15]
    assert "sample" not in delivery.table.column_names
    assert not delivery.findings


def test_a_wrong_header_count_and_a_missing_end_are_noted() -> None:
    delivery = read(cast_file(header={"NUMBER_HEADERS": "14"}, end=""), "cast_ct1.csv")
    assert checks(delivery) == ["header-count", "no-end-mark"]
    assert delivery.findings[0].message == (
        "cast_ct1.csv, line 2: NUMBER_HEADERS is 14, but 10 header lines were found (it counts itself); all header"
        " lines were read."
    )


def test_a_bare_stamp_empty_section_and_missing_cast_number() -> None:
    lines = cast_file(header={"SECT_ID": ""}).decode().splitlines()
    lines[0] = "CTD"
    lines = [line for line in lines if not line.startswith("CASTNO")]
    delivery = read("\n".join(lines).encode(), "cast_ct1.csv")
    assert one(delivery, "section") is None
    assert one(delivery, "cast") == 1


def test_a_level_without_pressure_is_rejected() -> None:
    delivery = read(cast_file(["0.0,2,20.0,2,35.5,2", "-999.0,9,-999.0,9,-999.0,9"]), "cast_ct1.csv")
    (reject,) = delivery.rejects
    assert (reject.reason, reject.line, reject.expocode) == ("no-pressure", 15, EXPOCODE)
    assert delivery.rows == 2


def test_a_cast_without_position_is_refused() -> None:
    with pytest.raises(
        DeliveryProblem, match=r"none of its 2 rows can be used; the first: .*the position is"
    ):
        read(cast_file(header={"LATITUDE": "-999"}), "cast_ct1.csv")


def test_a_cast_whose_expocode_is_spoiled_is_refused_with_its_line() -> None:
    with pytest.raises(DeliveryProblem, match=r"line 3: the EXPOCODE '3.2062E\+11' was turned into a number"):
        read(cast_file(header={"EXPOCODE": "3.2062E+11"}), "cast_ct1.csv")


def test_casts_in_a_zip_stand_one_above_the_other_whatever_their_columns() -> None:
    other = cast_file(header={"STNNBR": "2"}).replace(b"CTDSAL", b"XMISS").replace(b"PSS-78", b"%TRANS")
    delivery = read(zipped({"b_ct1.csv": other, "a_ct1.csv": cast_file()}), "casts_ct1.zip")
    assert delivery.table.column("station").to_pylist() == ["1", "1", "2", "2"]
    assert delivery.table.column("transmission").to_pylist() == [None, None, 35.5, 35.4]
    assert one(delivery, "file", 3) == "casts_ct1.zip:b_ct1.csv"


def test_members_that_cannot_be_used_are_refused_alone() -> None:
    delivery = read(
        zipped(
            {
                "a_ct1.csv": cast_file(),
                "../evil_ct1.csv": cast_file(),
                "b_hy1.csv": bottle_file(),
                "empty_ct1.csv": b"",
                "notes.txt": b"calibrated in port\n",
                "__MACOSX/._a_ct1.csv": b"\0\0",
            }
        ),
        "casts_ct1.zip",
    )
    assert delivery.table.num_rows == 2
    assert [(r.raw, r.reason, r.line) for r in delivery.rejects] == [
        ("../evil_ct1.csv", "member-path", None),
        ("b_hy1.csv", "bottle-in-zip", None),
        ("empty_ct1.csv", "empty-file", None),
    ]
    assert delivery.refused_members == 3
    assert delivery.rows == 5
    assert checks(delivery) == ["not-a-cast"]
    assert "has a path in its name; expected plain file names" in delivery.rejects[0].message


def test_casts_in_a_folder_of_the_zip_are_read() -> None:
    assert read(zipped({"cruise/a_ct1.csv": cast_file()}), "casts_ct1.zip").table.num_rows == 2


def test_a_zip_that_unpacks_to_too_much_is_refused_before_it_is_unpacked() -> None:
    data = zipped({"a_ct1.csv": cast_file() + b"\n" * 3_000_000})
    with pytest.raises(DeliveryProblem, match=r"unpacks to 0\.0 GB; expected at most 0\.0 GB") as caught:
        read_delivery("big.zip", data, ReadingSettings(unpacked_bytes=2_000_000))
    assert caught.value.reason == "too-large"


def test_a_zip_that_states_more_than_two_gigabytes_is_refused() -> None:
    data = zipped({"a_ct1.csv": cast_file()})
    size = len(cast_file()).to_bytes(4, "little")
    stated = (2_100_000_000).to_bytes(4, "little")
    with pytest.raises(DeliveryProblem, match=r"unpacks to 2\.1 GB; expected at most 2\.0 GB"):
        read(data.replace(size, stated), "big.zip")


def test_a_zip_cut_short_is_refused() -> None:
    data = zipped({"a_ct1.csv": cast_file()})
    with pytest.raises(DeliveryProblem, match="the zip cannot be opened"):
        read(data[: len(data) // 2], "cut.zip")


def test_a_member_with_a_wrong_checksum_is_refused() -> None:
    data = bytearray(zipped({"a_ct1.csv": cast_file(), "b_ct1.csv": cast_file(header={"STNNBR": "2"})}))
    data[60] ^= 0xFF
    delivery = read(bytes(data), "casts_ct1.zip")
    assert [reject.reason for reject in delivery.rejects] == ["broken-member"]
    assert delivery.table.num_rows == 2


def test_a_survey_goes_on_behind_a_broken_member() -> None:
    other = cast_file(header={"EXPOCODE": "ZZV220210301"})
    data = bytearray(zipped({"a_ct1.csv": cast_file(), "b_ct1.csv": other}))
    data[60] ^= 0xFF
    assert survey_cruises("casts_ct1.zip", bytes(data), ReadingSettings()) == ("ZZV220210301",)


def test_a_spreadsheet_is_called_one() -> None:
    data = zipped({"[Content_Types].xml": b"<Types/>", "xl/workbook.xml": b"<workbook/>"})
    with pytest.raises(DeliveryProblem, match="found a spreadsheet and no cruise"):
        read(data, "cruise.xlsx")


def test_an_empty_zip_holds_no_cast() -> None:
    data = zipped({})
    assert data.startswith(ZIP_MAGICS)
    with pytest.raises(DeliveryProblem, match="the zip holds no CTD file"):
        read(data, "empty.zip")


def test_zip_fixture_is_a_zip() -> None:
    assert zipfile.is_zipfile(__import__("io").BytesIO(zipped({"a": b"b"})))


def test_a_member_without_a_name_is_refused_alone() -> None:
    data = zipped({"a_ct1.csv": cast_file(), "b_ct1.csv": cast_file(header={"STNNBR": "2"})})
    delivery = read(data.replace(b"b_ct1.csv", b"\0_ct1.csv"), "casts_ct1.zip")
    assert [reject.reason for reject in delivery.rejects] == ["member-name"]
    assert delivery.table.num_rows == 2


@pytest.mark.filterwarnings("ignore:Duplicate name")
def test_members_of_one_name_are_refused_because_nothing_tells_which_stands() -> None:
    packed = io.BytesIO()
    with zipfile.ZipFile(packed, "w") as archive:
        archive.writestr("a_ct1.csv", cast_file())
        for station in ("2", "3"):
            archive.writestr("b_ct1.csv", cast_file(header={"STNNBR": station}))
    delivery = read(packed.getvalue(), "casts_ct1.zip")
    assert [reject.reason for reject in delivery.rejects] == ["repeated-member", "repeated-member"]
    assert delivery.table.column("station").unique().to_pylist() == ["1"]
