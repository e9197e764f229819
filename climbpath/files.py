"""Reading files with a size bound, and writing them so that nothing half-written is left."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from climbpath.errors import DataError, Problem

MAX_BYTES = 8 * 1024 * 1024
"""Largest input file that is read."""


def read_bounded(path: str | os.PathLike[str], max_bytes: int = MAX_BYTES) -> bytes:
    """Contents of a regular file of at most ``max_bytes``; DataError if it cannot be had."""
    name = os.fspath(path)
    try:
        with open(name, "rb") as stream:
            content = stream.read(max_bytes + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise DataError([Problem(name, "", reason, "a readable file")]) from error
    if len(content) > max_bytes:
        raise DataError([Problem(name, "", "a larger one", f"a file of at most {max_bytes} bytes")])
    return content


def read_text(path: str | os.PathLike[str], max_bytes: int = MAX_BYTES) -> str:
    """Like ``read_bounded``, decoded from UTF-8 (a byte order mark is dropped)."""
    content = read_bounded(path, max_bytes)
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        found = f"byte {content[error.start]:#04x} at {error.start}"
        raise DataError([Problem(os.fspath(path), "", found, "text in UTF-8")]) from error


def write_atomically(path: str | os.PathLike[str], content: bytes | str) -> None:
    """Write to a temporary name in the same folder, then move into place.

    A link is followed, and what is neither file nor folder (a device, a pipe) is written to as it
    is: neither is replaced. Text is written as UTF-8 with plain newlines. DataError if the place
    cannot be written.
    """
    target = Path(os.path.realpath(path))
    data = content.encode("utf-8") if isinstance(content, str) else content
    temporary: str | None = None
    try:
        if os.path.exists(path) and not (os.path.isfile(path) or os.path.isdir(path)):
            with open(path, "wb") as stream:
                stream.write(data)
            return
        # A short prefix: with the whole name the temporary one could be too long.
        handle, temporary = tempfile.mkstemp(prefix=f".{target.name[:20]}.", dir=target.parent)
        with os.fdopen(handle, "wb") as stream:
            stream.write(data)
        # mkstemp makes the file private; give it the permissions any new file would have.
        mask = os.umask(0)
        os.umask(mask)
        os.chmod(temporary, 0o666 & ~mask)
        os.replace(temporary, target)
        temporary = None
    except OSError as error:
        reason = error.strerror or str(error)
        name = os.fspath(path)
        raise DataError([Problem(name, "", reason, "a place that can be written")]) from error
    finally:
        if temporary is not None and os.path.exists(temporary):
            os.unlink(temporary)
