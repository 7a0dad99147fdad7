"""A secret in a file of its own.

Knows how such a file is read. Must not know whose secret it is; neither that nor the file's name is
ever in an error: someone will write the secret where its file should be.
"""

from __future__ import annotations

from pathlib import Path

_MOST = 65_535  # bytes; what MQTT can carry


def read(path: Path) -> str:
    """The secret; a final line end does not count.

    ValueError where there is none, with what is wrong as a predicate: ``is empty``.
    """
    try:
        with path.open("rb") as file:
            content = file.read(_MOST + 3)
        secret = content.decode().rstrip("\r\n")
    except OSError as error:
        raise ValueError(f"cannot be read ({error.strerror})") from None
    except ValueError:  # not UTF-8, or a path with a NUL
        raise ValueError("is not a file of UTF-8 text") from None
    if not secret:
        raise ValueError("is empty")
    if len(secret.encode()) > _MOST:
        raise ValueError("is too long")
    return secret
