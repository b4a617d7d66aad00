"""CF NetCDF files of profiles, bottle and CTD, to rows."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem

if TYPE_CHECKING:
    from pipeline.reading.assembly import ReadRows
    from pipeline.reading.delivery import DeliveryKind
    from pipeline.reading.description import Description
    from pipeline.settings import ReadingSettings

NETCDF_MAGICS = (b"CDF\x01", b"CDF\x02", b"CDF\x05", b"\x89HDF\r\n\x1a\n")


def read_netcdf(
    name: str, data: bytes, limits: ReadingSettings, description: Description | None
) -> tuple[DeliveryKind, ReadRows]:
    """Read a NetCDF file."""
    raise DeliveryProblem("not-a-cruise-file", f"{name}: NetCDF is not read yet.")
