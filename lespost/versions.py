"""Versions of the software a result rests on, for `--version` and for the provenance of every run."""

from __future__ import annotations

from lespost import __version__

#: Packages whose versions `--version` reports, because a bug report needs them.
STACK = ("numpy", "scipy", "xarray", "dask", "zarr", "numba", "netCDF4", "gsw", "pyfftw", "matplotlib")


def stack_versions() -> dict[str, str]:
    """Versions of this package, Python and the libraries the numbers depend on."""
    import platform
    from importlib.metadata import PackageNotFoundError, version

    versions = {"lespost": __version__, "python": platform.python_version()}
    for package in STACK:
        try:
            versions[package] = version(package)
        except PackageNotFoundError:
            versions[package] = "not installed"
    return versions
