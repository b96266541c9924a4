"""Can this machine draw without a screen? Tried in a child process, because where it cannot, VTK ends in a crash."""

from __future__ import annotations

import signal
import subprocess
import sys
from dataclasses import dataclass
from functools import cache

#: The child draws one orange picture and says the colour it finds there.
TRIAL = """
import os, sys
import vtkmodules.vtkRenderingOpenGL2
from vtkmodules.vtkCommonCore import vtkUnsignedCharArray
from vtkmodules.vtkRenderingCore import vtkRenderer, vtkRenderWindow
window = vtkRenderWindow()
window.SetOffScreenRendering(1)
window.SetSize(16, 16)
renderer = vtkRenderer()
renderer.SetBackground(1.0, 0.5, 0.0)
window.AddRenderer(renderer)
window.Render()
found = vtkUnsignedCharArray()
window.GetPixelData(8, 8, 8, 8, 0, found, 0)
print("colour", *(int(found.GetValue(k)) for k in range(3)), flush=True)
os._exit(0)
"""
EXPECTED = ("colour 255 127 0", "colour 255 128 0")
#: A first import from a cold disk is slow; a driver that hangs is slower.
PATIENCE_S = 90.0
#: Shared libraries and the Debian and Ubuntu packages that bring them.
PACKAGES = {
    "libEGL": "libegl1",
    "libGL.": "libgl1",
    "libGLX": "libglx0",
    "libX11": "libx11-6",
    "libXrender": "libxrender1",
    "libXext": "libxext6",
    "libSM": "libsm6",
    "libICE": "libice6",
    "libgomp": "libgomp1",
    "libexpat": "libexpat1",
}
ALWAYS = ("libegl1", "libgl1-mesa-dri")


@dataclass(frozen=True)
class DrawingReport:
    """ok : pictures can be made; reason : why not; remedy : the line to run, or what to do."""

    ok: bool
    reason: str = ""
    remedy: str = ""


@cache
def can_draw() -> DrawingReport:
    """Try it, once in the life of this process."""
    return trial(TRIAL)


def trial(code: str, patience_s: float = PATIENCE_S) -> DrawingReport:
    """Run the trial in a child process.

    Parameters
    ----------
    code : Python that prints the colour it has drawn.
    """
    try:
        child = subprocess.run(
            [sys.executable, "-c", code], capture_output=True, text=True, timeout=patience_s, errors="replace"
        )
    except subprocess.TimeoutExpired:
        return DrawingReport(False, f"the graphics driver did not answer within {patience_s:g} s", _remedy(""))
    except OSError as error:
        return DrawingReport(False, f"no child process could be started to try it: {error}", _remedy(""))
    if child.returncode == 0 and child.stdout.strip().endswith(EXPECTED):
        return DrawingReport(True)
    return DrawingReport(False, _reason(child.returncode, child.stdout, child.stderr), _remedy(child.stderr))


def _reason(status: int, said: str, complained: str) -> str:
    lines = [line.strip() for line in complained.splitlines() if line.strip()]
    if any("cannot open shared object file" in line for line in lines):
        missing = next(line for line in lines if "cannot open shared object file" in line)
        return f"a system library is missing ({missing})"
    if status < 0:
        return f"the graphics library stops with {signal.Signals(-status).name} when it draws without a screen"
    if "colour" in said:
        return f"the graphics library draws, but not what it is told to ({said.strip()})"
    return lines[-1] if lines else f"the trial ended with status {status}"


def _remedy(complained: str) -> str:
    if not sys.platform.startswith("linux"):
        return "install the graphics driver of this machine's maker, with OpenGL 3.2 or newer"
    wanted = [package for library, package in PACKAGES.items() if f"{library.rstrip('.')}.so" in complained]
    return "apt-get install -y " + " ".join(dict.fromkeys((*ALWAYS, *wanted)))
