"""Statistics on bare arrays: effective samples, bootstrap, multiple testing, stationarity. No physics, no xarray."""
