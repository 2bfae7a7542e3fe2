"""Reads and checks result files."""

from __future__ import annotations

import json
import os
import warnings
from pathlib import Path
from typing import Any

import netCDF4
import xarray as xr

from pairmc.errors import Problem, ResultFileError
from pairmc.results import schema

# What to do about a file of another kind, and about one that is no longer whole.
_NAME_ANOTHER = "name a file that pairmc sample has written"
_RESTORE = "sample again, or restore it from a copy"

# How netCDF files begin: of version 4, and older ones.
_BEGINNINGS = (b"\x89HDF\r\n\x1a\n", b"CDF")


def load(path: str | os.PathLike[str], snapshots: bool = True) -> xr.Dataset:
    """Read a result file into memory and close it.

    Parameters
    ----------
    path
        The file.
    snapshots
        False leaves out the positions and components of kept snapshots.

    Returns
    -------
    xarray.Dataset
        Labels are text; every variable carries units and long_name.

    Raises
    ------
    ResultFileError
        Where the file is missing, damaged, of a newer schema, or no result of pairmc.
    """
    read_attributes(path)
    try:
        left_out = [] if snapshots else ["position", "component"]
        dataset = xr.load_dataset(path, engine="netcdf4", drop_variables=left_out)
    except (OSError, RuntimeError, ValueError, AttributeError) as error:
        raise _refusal(path, f"a damaged file ({_reason(error)})", _RESTORE) from error
    for name in dataset.coords:
        # bytes in files whose labels name no encoding, else objects; text of one width for both
        if dataset[name].dtype.kind in "SO":
            dataset[name] = dataset[name].astype(str)
    return dataset


def read_attributes(path: str | os.PathLike[str]) -> dict[str, Any]:
    """Return the global attributes of a result file once its schema has been checked.

    Raises
    ------
    ResultFileError
        As `load`.
    """
    if not Path(path).is_file():
        other = "a folder" if Path(path).is_dir() else "no regular file"
        got = other if Path(path).exists() else "no such file"
        raise _refusal(path, got, _NAME_ANOTHER)
    try:
        with netCDF4.Dataset(path) as file:
            attributes = {name: file.getncattr(name) for name in file.ncattrs()}
    except PermissionError as error:
        raise _refusal(
            path, f"a file that cannot be read ({_reason(error)})", "make it readable"
        ) from error
    except (OSError, RuntimeError, UnicodeDecodeError) as error:
        if _is_netcdf(path):
            got, advice = "a file that cannot be read: cut off or damaged", _RESTORE
        else:
            got, advice = "a file that cannot be read: not netCDF", _NAME_ANOTHER
        raise _refusal(path, got, advice) from error
    _check_schema(path, attributes)
    return attributes


def batches_in(path: str | os.PathLike[str]) -> int:
    """Return how many batches a result file holds."""
    with netCDF4.Dataset(path) as file:
        return len(file.dimensions["batch"])


def run_settings(attributes: dict[str, Any]) -> dict[str, Any]:
    """Return the canonical settings of the run that a result came from."""
    settings: dict[str, Any] = json.loads(attributes["run_settings"])
    return settings


def _is_netcdf(path: str | os.PathLike[str]) -> bool:
    """Return whether a file begins as netCDF files do."""
    with Path(path).open("rb") as file:
        return file.read(8).startswith(_BEGINNINGS)


def _reason(error: Exception) -> str:
    """Return what a library says about a failure, without its numbers."""
    if isinstance(error, OSError) and error.strerror:
        return error.strerror
    return str(error).partition("\n")[0] or type(error).__name__


def _check_schema(path: str | os.PathLike[str], attributes: dict[str, Any]) -> None:
    text = str(attributes.get(schema.SCHEMA_ATTRIBUTE, ""))
    numbers = text.split(".")
    if len(numbers) != 2 or not all(number.isdigit() for number in numbers):
        raise _refusal(
            path,
            "a netCDF file without pairmc's schema number",
            _NAME_ANOTHER,
        )
    major, minor = int(numbers[0]), int(numbers[1])
    if major > schema.SCHEMA[0]:
        raise _refusal(
            path,
            f"a result of the newer schema {text}",
            "update pairmc to read it",
            allowed=f"up to {schema.schema_text()}",
        )
    if (major, minor) > schema.SCHEMA:
        warnings.warn(
            f"{os.fspath(path)}: written with schema {text}, this is {schema.schema_text()}; "
            "what is new in it is ignored",
            stacklevel=3,
        )


def _refusal(
    path: str | os.PathLike[str], got: str, advice: str, allowed: str = "a result of pairmc sample"
) -> ResultFileError:
    return ResultFileError(Problem(os.fspath(path), got, allowed, advice))
