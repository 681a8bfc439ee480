"""What every result remembers."""

import hashlib
import json
from datetime import UTC, datetime, timedelta
from importlib import metadata

import numpy as np
import xarray as xr

from unmix.provenance import digest, provenance, versions


def test_versions_are_those_installed():
    found = versions()
    for package in ("unmix", "numpy", "scipy", "xarray"):
        assert found[package] == metadata.version(package)
    assert found["python"].count(".") == 2


def test_digest_is_sha_256_of_the_bytes(tmp_path):
    path = tmp_path / "a.bin"
    path.write_bytes(b"abc")
    # FIPS 180-4, appendix: SHA-256 of the message "abc"
    assert digest(path) == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    path.write_bytes(bytes(3_000_000))
    assert digest(path) == hashlib.sha256(bytes(3_000_000)).hexdigest()


def test_attributes_are_text_and_can_be_read_back():
    data = xr.DataArray([1.0], attrs={"source_sha256": json.dumps({"a.csv": "00ff"})})
    options = {"level": 0.95, "regions": [(1, 2)], "noise": np.array([1.0])}
    found = provenance("quantify", options, spectra=data, pure=None)
    assert all(isinstance(value, str) for value in found.values())
    assert found["method"] == "quantify"
    settings = json.loads(found["settings"])
    assert settings["level"] == 0.95
    assert settings["regions"] == [[1, 2]]
    assert json.loads(found["inputs"]) == {"spectra": {"a.csv": "00ff"}}
    assert json.loads(found["versions"]) == versions()
    assert "seed" not in found


def test_date_is_now_in_utc():
    made = datetime.fromisoformat(provenance("x", {})["created"])
    assert made.utcoffset() == timedelta(0)
    assert abs(datetime.now(UTC) - made) < timedelta(seconds=60)


def test_seed_is_kept_where_there_was_one():
    assert provenance("x", {}, seed=0)["seed"] == "0"
