"""Writing results: CF NetCDF, and the exporters behind `subside export`."""
