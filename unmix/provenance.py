"""What every result remembers: versions, method, digests of the inputs, seed and date."""

import hashlib
import json
import platform
from collections.abc import Mapping
from datetime import UTC, datetime
from functools import cache
from importlib import metadata
from pathlib import Path
from typing import Any

#: packages whose version can change a number
_PACKAGES = ("unmix", "numpy", "scipy", "scikit-learn", "xarray", "pandas", "pymcr", "numba")


def versions() -> dict[str, str]:
    """Version of unmix and of every package that can change a number, and of Python."""
    return dict(_versions())


@cache
def _versions() -> dict[str, str]:
    found = {"python": platform.python_version()}
    for package in _PACKAGES:
        try:
            found[package] = metadata.version(package)
        except metadata.PackageNotFoundError:
            found[package] = "not installed"
    return found


def digest(path: Path) -> str:
    """SHA-256 of a file, as hexadecimal text."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def provenance(method: str, settings: Mapping[str, Any], *, seed: int | None = None, **inputs: Any) -> dict[str, str]:
    """Attributes that say how a result came about.

    Parameters
    ----------
    method : str
        The public function, such as ``quantify``.
    settings : mapping
        Its options; values that JSON cannot hold are kept as text.
    seed : int, optional
        Of the random numbers, where there were any.
    **inputs : DataArray
        The data that went in; their ``source_sha256`` attributes (a JSON object, file to digest) are carried on.

    Returns
    -------
    dict of str
        ``method``, ``settings``, ``versions``, ``inputs`` as JSON text where they are structured, ``created``
        (UTC, ISO 8601) and ``seed``.
    """
    digests = {name: json.loads(data.attrs["source_sha256"])
               for name, data in inputs.items() if "source_sha256" in getattr(data, "attrs", {})}  # fmt: skip
    found = {
        "method": method,
        "settings": json.dumps(dict(settings), default=str),
        "versions": json.dumps(versions()),
        "inputs": json.dumps(digests),
        "created": datetime.now(UTC).isoformat(timespec="seconds"),
    }
    return found if seed is None else {**found, "seed": str(seed)}
