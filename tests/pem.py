"""A certificate and keys, made where a test runs. No key is kept with the tests."""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import pytest

needs_openssl = pytest.mark.skipif(shutil.which("openssl") is None, reason="openssl is not on PATH")


def make(folder: Path) -> None:
    """``ca.pem`` and its ``ca.key``, the two in ``both.pem``, ``locked.key`` with a pass phrase,
    and ``other.key`` of nobody."""
    for key in ("ca.key", "other.key"):
        _openssl(folder, f"genpkey -algorithm EC -pkeyopt ec_paramgen_curve:P-256 -out {key}")
    _openssl(folder, "req -x509 -key ca.key -days 2 -subj /CN=line -out ca.pem")
    _openssl(folder, "pkcs8 -topk8 -in ca.key -passout pass:secret -out locked.key")
    text = [(folder / name).read_text() for name in ("ca.pem", "ca.key")]
    (folder / "both.pem").write_text("".join(text))


def _openssl(folder: Path, words: str) -> None:
    subprocess.run(["openssl", *words.split()], cwd=folder, check=True, capture_output=True)
