"""A slow disk and a wrong clock, for one process: a library put before the system's own.

Knows the C compiler. ``environment`` is for the process; without a compiler the test is skipped.
"""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import pytest

SOURCE = r"""
#define _GNU_SOURCE
#include <dlfcn.h>
#include <stdlib.h>
#include <time.h>

static long number(const char *name) {
    const char *text = getenv(name);
    return text ? atol(text) : 0;
}

static void wait_for_the_disk(void) {
    long ms = number("SLOW_DISK_MS");
    struct timespec left = {ms / 1000, ms % 1000 * 1000000};
    while (nanosleep(&left, &left)) {}
}

int fsync(int file) {
    wait_for_the_disk();
    return ((int (*)(int)) dlsym(RTLD_NEXT, "fsync"))(file);
}

int fdatasync(int file) {
    wait_for_the_disk();
    return ((int (*)(int)) dlsym(RTLD_NEXT, "fdatasync"))(file);
}

int clock_gettime(clockid_t clock, struct timespec *time) {
    int result = ((int (*)(clockid_t, struct timespec *)) dlsym(RTLD_NEXT, "clock_gettime"))(
        clock, time);
    if (clock == CLOCK_REALTIME) time->tv_sec += number("CLOCK_AHEAD_S");
    return result;
}
"""


def environment(folder: Path, *, fsync_ms: int = 0, clock_ahead: int = 0) -> dict[str, str]:
    """What makes each fsync of a process take so much longer, and its wall clock wrong by so many
    seconds."""
    compiler = shutil.which("cc") or shutil.which("gcc")
    if compiler is None:
        pytest.skip("no C compiler: a slow disk cannot be had")
    source, library = folder / "slow_disk.c", folder / "slow_disk.so"
    source.write_text(SOURCE)
    command = [compiler, "-shared", "-fPIC", "-O1", "-o", library, source, "-ldl"]
    subprocess.run(command, check=True)
    return {
        "LD_PRELOAD": str(library),
        "SLOW_DISK_MS": str(fsync_ms),
        "CLOCK_AHEAD_S": str(clock_ahead),
    }
