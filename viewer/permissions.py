"""Which plugin files of projects the user has allowed to run, by their content. Knows no plugin."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Sequence
from pathlib import Path


def store() -> Path:
    """The file that keeps the allowed contents, one SHA-256 a line."""
    base = os.environ.get("XDG_CONFIG_HOME") or str(Path.home() / ".config")
    return Path(base) / "knucklepath" / "allowed-plugins"


def content_hash(path: Path) -> str:
    """SHA-256 of a file's content."""
    return hashlib.sha256(path.read_bytes()).hexdigest()


def not_allowed(paths: Sequence[Path]) -> list[Path]:
    """Those of the files whose present content the user has not allowed."""
    try:
        allowed = set(store().read_text(encoding="ascii", errors="replace").split())
    except OSError:
        allowed = set()
    return [path for path in paths if content_hash(path) not in allowed]


def allow(paths: Sequence[Path]) -> None:
    """Remember the files' present content as allowed; a store that cannot be written allows for this call only."""
    new = [content_hash(path) for path in not_allowed(paths)]
    if not new:
        return
    try:
        store().parent.mkdir(parents=True, exist_ok=True)
        with store().open("a", encoding="ascii") as file:
            file.write("".join(f"{line}\n" for line in new))
    except OSError:
        return
