"""Files written whole or not at all."""

from __future__ import annotations

import os
import sys
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from knucklepath.kinematics.errors import KnucklepathError


class OutputError(KnucklepathError):
    """A place to write to is wrong."""


@contextmanager
def whole_file(out: str | Path, suffix: str = "") -> Iterator[Path]:
    """Give a temporary path beside ``out`` and move it there only when all is written.

    Raises
    ------
    OutputError : the folder of ``out`` does not exist, or ``out`` is a folder.
    """
    target = Path(out)
    if target.is_dir():
        raise OutputError(f"{out}: is a folder; give a file name")
    if not target.parent.is_dir():
        raise OutputError(f"{out}: the folder {target.parent} does not exist; make it first")
    handle, name = tempfile.mkstemp(prefix=f".{target.stem}-", suffix=suffix or target.suffix, dir=target.parent)
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        mask = os.umask(0)
        os.umask(mask)
        temporary.chmod(0o666 & ~mask)
        temporary.replace(target)
    finally:
        temporary.unlink(missing_ok=True)


def write_text(out: str, text: str) -> None:
    """Write text to a file, all or nothing; "-" is standard output."""
    if out == "-":
        sys.stdout.write(text)
        return
    with whole_file(out) as path:
        path.write_text(text, encoding="utf-8", newline="")
