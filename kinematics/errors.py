"""The small tree of errors that a reader meets. Holds no mechanics and no formatting beyond the message.

Errors are raised at the border (loading, building, solving), pass through the rooms untouched, and are
caught once, in the command line or in the window.
"""

from __future__ import annotations


class KnucklepathError(Exception):
    """Base of every error that knucklepath raises on purpose; its text is written for the reader."""


class ProjectError(KnucklepathError):
    """A project file is wrong.

    Parameters
    ----------
    message : what is wrong and what would be right.
    file : the file's path as the user gave it, or None.
    key : the dotted key, or None.
    line : 1-based line, or None.
    """

    def __init__(
        self, message: str, *, file: str | None = None, key: str | None = None, line: int | None = None
    ) -> None:
        self.message, self.file, self.key, self.line = message, file, key, line
        where = file or ""
        if line is not None:
            where += f":{line}" if where else f"line {line}"
        if key:
            where += f": {key}" if where else key
        super().__init__(f"{where}: {message}" if where else message)


class MechanismError(KnucklepathError):
    """Bodies and joints do not make the mechanism that was declared.

    Parameters
    ----------
    message : names the body or joint, and the free motion or the surplus.
    body, joint : the names concerned, or None.
    """

    def __init__(self, message: str, *, body: str | None = None, joint: str | None = None) -> None:
        self.message, self.body, self.joint = message, body, joint
        super().__init__(message)


class ReachError(KnucklepathError):
    """A pose that the mechanism cannot reach.

    Parameters
    ----------
    message : what locks, and where.
    input : the input that runs out, "travel" say.
    limit : the last value reached, in the input's own unit (mm).
    """

    def __init__(self, message: str, *, input: str, limit: float) -> None:
        self.message, self.input, self.limit = message, input, limit
        super().__init__(message)


class MeshError(KnucklepathError):
    """A mesh cannot be used.

    Parameters
    ----------
    message : what is wrong and what would be right.
    file : the mesh file, or None.
    count : the number of faults (triangles, say), or None.
    """

    def __init__(self, message: str, *, file: str | None = None, count: int | None = None) -> None:
        self.message, self.file, self.count = message, file, count
        super().__init__(f"{file}: {message}" if file else message)


class PluginError(KnucklepathError):
    """A plugin is broken.

    Parameters
    ----------
    message : what is wrong.
    distribution : the distribution or file that brings the plugin.
    hook : the hook concerned, or None.
    """

    def __init__(self, message: str, *, distribution: str, hook: str | None = None) -> None:
        self.message, self.distribution, self.hook = message, distribution, hook
        super().__init__(f"{distribution}: {hook + ': ' if hook else ''}{message}")
