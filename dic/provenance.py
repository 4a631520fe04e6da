"""Where a result comes from: versions, hashes of the inputs, parameters in force."""

from __future__ import annotations

import hashlib
import platform
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

from dic.sync.record import LoadRecord
from dic.testfile import TestFile

VERSION = version("tauten")


def collect(test: TestFile, record: LoadRecord, frames_sha256: str) -> dict[str, Any]:
    """Gather what an auditor needs to repeat the evaluation.

    Returns
    -------
    dict
        ``made`` (UTC), ``versions``, ``sha256`` of every input, and the ``test_file`` as understood.
    """
    libraries = ("numpy", "scipy", "numba", "opencv-python-headless", "scikit-image", "tifffile")
    return {
        "made": datetime.now(UTC).isoformat(timespec="seconds"),
        "versions": {
            "tauten": VERSION,
            "python": platform.python_version(),
            **{name: version(name) for name in libraries},
        },
        "sha256": {
            "test_file": sha256(test.path),
            "frames": frames_sha256,
            "load_record": sha256(record.path),
            **({"coupon_mask": sha256(test.beside(test.coupon.mask))} if test.coupon.mask else {}),
        },
        "test_file": test.model_dump(mode="json"),
    }


def sha256(path: Path) -> str:
    """Return a file's SHA-256."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
