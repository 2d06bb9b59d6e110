"""Files are written whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Callable
from pathlib import Path

from olefinlp.inputs.findings import shown


class OutputError(Exception):
    """A file cannot be written; what was there before is still there."""


def write_whole(path: str | os.PathLike[str], write: Callable[[Path], None]) -> Path:
    """Write through a temporary file beside the target, then move it into place.

    `write` gets the temporary path. Raises `OutputError` when the target cannot be replaced; the
    old file is left as it was and the temporary one is removed. A link is followed: the file it
    points to is replaced, not the link.
    """
    target = Path(path)
    real = Path(os.path.realpath(target))
    temporary: Path | None = None
    try:
        _refuse_what_is_no_file(target, real)
        handle, name = tempfile.mkstemp(prefix=f".{real.name[:50]}.", suffix=".part", dir=real.parent)
        os.close(handle)
        temporary = Path(name)
        write(temporary)
        _keep_mode(real, temporary)
        with temporary.open("rb+") as file:
            os.fsync(file.fileno())
        os.replace(temporary, real)
        temporary = None
    except OSError as error:
        raise OutputError(_words(target, error)) from error
    finally:
        if temporary is not None:
            with contextlib.suppress(OSError):
                temporary.unlink()
    return target


def _refuse_what_is_no_file(target: Path, real: Path) -> None:
    """A folder, or a device such as /dev/null, which must not become a file."""
    if real.is_dir():
        raise OutputError(f"{shown(target)} is a folder; name a file\nhint: for example {shown(target / 'plan.xlsx')}")
    if real.exists() and not real.is_file():
        raise OutputError(f"{target} is a device, not a file that can be replaced; name a file")


def _keep_mode(target: Path, temporary: Path) -> None:
    """The permissions of the file that is replaced, or the usual ones of a new file."""
    if target.exists():
        mode = target.stat().st_mode & 0o777
    else:
        mask = os.umask(0)
        os.umask(mask)
        mode = 0o666 & ~mask
    os.chmod(temporary, mode)


def _words(target: Path, error: OSError) -> str:
    name = shown(target)
    kept = "; the old file is as it was" if target.exists() else ""
    if isinstance(error, FileNotFoundError):
        return f"{name} cannot be written: the folder {shown(target.parent)} is not there"
    if isinstance(error, PermissionError):
        return f"{name} cannot be written{kept}\nhint: is it open in another program, or the folder read-only?"
    return f"{name} cannot be written: {error.strerror or error}{kept}"


def write_bytes(path: str | os.PathLike[str], content: bytes) -> Path:
    """Write a file whose content is there already, whole or not at all."""

    def write(temporary: Path) -> None:
        temporary.write_bytes(content)

    return write_whole(path, write)


def write_text(path: str | os.PathLike[str], text: str) -> Path:
    """Write a UTF-8 text file, whole or not at all."""

    def write(temporary: Path) -> None:
        temporary.write_text(text, encoding="utf-8", newline="\n")

    return write_whole(path, write)
