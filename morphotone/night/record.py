"""The record of a run, run.json: what a reviewer needs to follow it."""

from __future__ import annotations

import json
import platform
import sys
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

from morphotone.night.ledger import Ledger
from morphotone.night.results import atomic
from morphotone.night.runner import Tally

PACKAGES = ("morphotone", "numpy", "scipy", "pandas", "orjson", "joblib")


def run_record(
    *,
    started: datetime,
    tally: Tally,
    ledger: Ledger,
    names: Sequence[str],
    details: Mapping[str, Any],
    packages: Sequence[str] = (),
) -> dict[str, Any]:
    """Put together the record of a run that ends now.

    Parameters
    ----------
    started : datetime
        When the run began, with its time zone.
    tally : Tally
        What `run` returned.
    ledger : Ledger
        Where the hashes are.
    names : sequence of str
        The files found in this run, in their order.
    details : mapping
        What the caller adds, JSON types: assumptions, thresholds. Stands after the times.
    packages : sequence of str
        What the run's files depend on besides `PACKAGES`.
    """
    known = ledger.known()
    inputs = {name: known[name].sha256 for name in names}
    return record_of(
        started=started, counts=asdict(tally), inputs_sha256=inputs, details=details, packages=packages
    )


def package_versions() -> dict[str, str]:
    """Return the versions on which the last digits of a result can depend, Python's among them."""
    return {"python": platform.python_version(), **{name: version(name) for name in PACKAGES}}


def record_of(
    *,
    started: datetime,
    counts: Mapping[str, int],
    inputs_sha256: Mapping[str, str],
    details: Mapping[str, Any],
    packages: Sequence[str] = (),
) -> dict[str, Any]:
    """Put together the record of any run that ends now, with or without a ledger.

    Parameters
    ----------
    started, details, packages
        As for `run_record`.
    counts : mapping of str to int
        What came in, and what became of it.
    inputs_sha256 : mapping of str to str
        By name of the input; empty where it could not be read.
    """
    return {
        "started": _utc(started),
        "ended": _utc(datetime.now(UTC)),
        "command": sys.argv,
        **details,
        "counts": dict(counts),
        "machine": {"host": platform.node(), "platform": platform.platform()},
        "python": platform.python_version(),
        "packages": {package: version(package) for package in (*PACKAGES, *packages)},
        "inputs_sha256": {name: sha256 or None for name, sha256 in inputs_sha256.items()},
    }


def write_record(path: Path, record: Mapping[str, Any]) -> None:
    """Write a record as JSON, whole or not at all; a value JSON does not have (NaN) is a ValueError."""
    with atomic(path) as stream:
        json.dump(record, stream, indent=2, ensure_ascii=False, allow_nan=False)
        stream.write("\n")


def _utc(moment: datetime) -> str:
    return moment.astimezone(UTC).isoformat(timespec="seconds")
