"""A real browser for pages that are to be looked at: Chromium, without a window.

Knows how to start it. Must not know what a page shows.
"""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path

_HEADLESS = (
    "--headless",
    "--no-sandbox",  # tests run as root in a container
    "--disable-gpu",
    "--disable-quic",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-dev-shm-usage",
    "--disable-sync",
    "--no-first-run",
    "--enable-logging=stderr",
    "--window-size=1280,2000",
    # Virtual time passes only once nothing is left to do: enough on however slow a machine.
    "--virtual-time-budget=20000",
)
_CONSOLE = re.compile(r"CONSOLE[^\n]*")


def chromium_path() -> str | None:
    """The browser's program, under any of its names."""
    names = ("chromium", "chromium-browser", "google-chrome")
    return next((path for path in map(shutil.which, names) if path), None)


def opened(page: Path, folder: Path) -> tuple[str, list[str]]:
    """``page`` as it stands after its scripts ran, and what they wrote to the console."""
    path = chromium_path()
    assert path is not None, "chromium is not on PATH: apt-get install chromium"
    told = subprocess.run(
        [path, *_HEADLESS, f"--user-data-dir={folder}", "--dump-dom", page.resolve().as_uri()],
        capture_output=True,
        text=True,
        timeout=120,
        check=True,
    )
    return told.stdout, _CONSOLE.findall(told.stderr)
