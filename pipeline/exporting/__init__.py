"""Tables of a cruise in forms that others ask for: CF NetCDF."""

from __future__ import annotations

from pipeline.exporting.netcdf import export_netcdf

__all__ = ["export_netcdf"]
