"""The command line: what can be asked, and how. Imports nothing heavy, so that ``--help`` answers at once.

Every command returns its exit status: 0 done and every requirement met; 1 done and a requirement not met, or a
mechanism that locks before the pose asked for; 2 the input is wrong, said in one message.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable, Sequence
from importlib import import_module
from typing import NoReturn

from knucklepath.kinematics.errors import KnucklepathError, ReachError

OVERVIEW = """\
usage: knucklepath COMMAND [ARGUMENTS]

Hardpoints and meshes in; the wheel's path, its readings, pictures and clearances out.

  knucklepath demo                                   see it work: writes ./knucklepath-demo
  knucklepath new my-axle --layout strut             start a project of your own
  knucklepath sweep my-axle                          camber, toe and the rest over travel, as a table
  knucklepath sweep my-axle --csv sweep.csv          every reading over travel and rack
  knucklepath picture my-axle bump.png --travel 40   the corner in bump
  knucklepath movie my-axle travel.gif               the corner moving
  knucklepath clearance my-axle                      what comes too close, and where

commands:
  new         start a project: a commented file and meshes that can be checked at once
  demo        run the shipped demo: pictures, a movie, tables
  sweep       readings over travel and rack, as a table or CSV
  picture     one picture (PNG) of a pose
  movie       the motion as GIF, or as MP4 with the extra 'movie'
  clearance   smallest gaps between parts, proven over the whole motion
  envelope    the volume that a part sweeps, as a mesh
  layouts     installed layouts and the points they need
  doctor      what this machine can draw, and what to install if it cannot

'knucklepath COMMAND --help' explains one command with examples.
A geometric and static check for design review; it proves neither strength nor roadworthiness.
"""

PROJECT_HELP = "project file (TOML), or the folder that holds one"
RANGE_HELP = "FROM:TO:COUNT in mm, or one value; the project's limits if left out"


class _Parser(argparse.ArgumentParser):
    """Says what is wrong in one line."""

    def error(self, message: str) -> NoReturn:
        self.exit(2, f"{self.prog}: {message} ('{self.prog} --help' has examples)\n")


def _command(
    commands: argparse._SubParsersAction[_Parser], name: str, about: str, examples: str, project: bool = True
) -> _Parser:
    parser = commands.add_parser(
        name,
        description=about,
        epilog="examples:\n" + "\n".join(f"  {line}" for line in examples.strip().splitlines()),
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    if project:
        parser.add_argument("project", metavar="PROJECT", help=PROJECT_HELP)
        parser.add_argument(
            "--allow-plugins",
            action="store_true",
            help="run the plugin files that the project names, and remember them by their content",
        )
    return parser


def _pose(parser: _Parser) -> None:
    parser.add_argument("--travel", metavar="MM", default="0", help="wheel travel, + bump (default 0)")
    parser.add_argument("--rack", metavar="MM", default="0", help="rack displacement, + to the left (default 0)")


def _view(parser: _Parser, size: str) -> None:
    parser.add_argument(
        "--look",
        default="corner",
        metavar="LOOK",
        help="front, side, top, corner (default) or AZIMUTH,ELEVATION in deg",
    )
    parser.add_argument(
        "--show",
        metavar="A,B,C",
        help="overlays to draw, or 'none'; 'knucklepath doctor' lists them (default: a choice)",
    )
    parser.add_argument("--size", default=size, metavar="WxH", help=f"picture size in pixels (default {size})")
    parser.add_argument("--dark", action="store_true", help="dark background")


def _parser() -> _Parser:
    parser = _Parser(prog="knucklepath", add_help=False, allow_abbrev=False)
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", parser_class=_Parser)

    new = _command(
        commands,
        "new",
        "Start a project: a commented file and STL parts of the chosen layout, ready to be checked.",
        "knucklepath new my-axle --layout double-a-arm\nknucklepath new rear --layout semi-trailing-arm",
        project=False,
    )
    new.add_argument("folder", metavar="FOLDER", help="folder to make; it must not exist or be empty")
    new.add_argument("--layout", metavar="ID", required=True, help="'knucklepath layouts' lists them")

    demo = _command(
        commands,
        "demo",
        "Run the shipped demo: a copy of its project, pictures, a movie, the sweep and the clearances.",
        "knucklepath demo\nknucklepath demo --folder /tmp/look",
        project=False,
    )
    demo.add_argument(
        "--folder", metavar="FOLDER", default="knucklepath-demo", help="where to write (./knucklepath-demo)"
    )

    sweep = _command(
        commands,
        "sweep",
        "Readings over travel and rack. Without --csv a readable choice of them; with it every one.",
        "knucklepath sweep my-axle\n"
        "knucklepath sweep my-axle --travel -50:60:23 --rack 0\n"
        "knucklepath sweep my-axle --csv sweep.csv\n"
        "knucklepath sweep my-axle --travel=-50:60:12 --csv -",
    )
    sweep.add_argument("--travel", metavar="RANGE", help=RANGE_HELP)
    sweep.add_argument("--rack", metavar="RANGE", help=RANGE_HELP)
    sweep.add_argument("--csv", metavar="OUT", help="write every reading as CSV; - is standard output")

    picture = _command(
        commands,
        "picture",
        "One picture of a pose, with overlays, title, pose, scale and date.",
        "knucklepath picture my-axle corner.png\n"
        "knucklepath picture my-axle bump.png --travel 40 --rack 20 --look front\n"
        "knucklepath picture my-axle axis.png --look 35,20 --show instant-axis,wheel-path,ground",
    )
    picture.add_argument("out", metavar="OUT.png", help="picture to write")
    _pose(picture)
    _view(picture, "1920x1080")

    movie = _command(
        commands,
        "movie",
        "The corner moving through its travel and back.",
        "knucklepath movie my-axle travel.gif\n"
        "knucklepath movie my-axle travel.mp4 --look side --rack 15\n"
        "knucklepath movie my-axle travel.gif --size 640x360 --seconds 4",
    )
    movie.add_argument("out", metavar="OUT.gif|OUT.mp4", help="movie to write; MP4 needs the extra 'movie'")
    movie.add_argument("--rack", metavar="MM", default="0", help="rack displacement held meanwhile (default 0)")
    movie.add_argument("--seconds", metavar="S", default="3", help="length of one cycle (default 3)")
    _view(movie, "960x540")

    clearance = _command(
        commands,
        "clearance",
        "The smallest gap of each pair over travel and rack: proven for the whole motion, not for a choice of poses.",
        "knucklepath clearance my-axle\n"
        "knucklepath clearance my-axle --pair tyre,lower_arm\n"
        "knucklepath clearance my-axle --json gaps.json\n"
        "knucklepath clearance my-axle --pair tyre,tie_rod --map gaps.png",
    )
    clearance.add_argument("--json", metavar="OUT", help="write the result as JSON; - is standard output")
    clearance.add_argument(
        "--tolerance", metavar="MM", default="0.05", help="how finely the smallest gap is sought (0.05)"
    )
    clearance.add_argument(
        "--pair", metavar="A,B", help="check this pair only; names of parts, rods, arms, 'tyre', 'rim'"
    )

    clearance.add_argument("--map", metavar="OUT.png", help="draw the gap of the worst pair over travel and rack")

    envelope = _command(
        commands,
        "envelope",
        "The volume that a part sweeps over the whole motion, as a watertight mesh that contains every pose.",
        "knucklepath envelope my-axle tyre-sweep.stl --part tyre\n"
        "knucklepath envelope my-axle sweep.stl --part tyre --on lower_arm --margin 3",
    )
    envelope.add_argument("out", metavar="OUT.stl", help="mesh to write, mm, body frame")
    envelope.add_argument("--part", metavar="NAME", required=True, help="part, rod or arm, 'tyre' or 'rim'")
    envelope.add_argument("--on", metavar="BODY", default="chassis", help="as seen from this body (default chassis)")
    envelope.add_argument("--margin", metavar="MM", default="1.0", help="added all around, at least (default 1.0)")

    layouts = _command(
        commands,
        "layouts",
        "Installed layouts and the points they need; plugins that are broken, and why.",
        "knucklepath layouts\nknucklepath layouts five-link",
        project=False,
    )
    layouts.add_argument("id", metavar="ID", nargs="?", help="one layout, with all its points")

    _command(
        commands,
        "doctor",
        "What this machine can draw and write, and what to install if it cannot.",
        "knucklepath doctor",
        project=False,
    )
    return parser


#: Options whose value may begin with a minus sign: joined to it before parsing.
SIGNED_OPTIONS = ("--travel", "--rack", "--look", "--tolerance", "--seconds", "--margin")


def join_signed_values(arguments: Sequence[str]) -> list[str]:
    """Turn ``--travel -50:60:23`` into ``--travel=-50:60:23``, so that both ways of writing it work."""
    joined: list[str] = []
    waiting = iter(arguments)
    for argument in waiting:
        if argument in SIGNED_OPTIONS:
            value = next(waiting, None)
            joined.append(argument if value is None else f"{argument}={value}")
        else:
            joined.append(argument)
    return joined


def _nearest_command(word: str, commands: Sequence[str]) -> str:
    from difflib import get_close_matches

    near = get_close_matches(word, commands, n=1)
    return f"; did you mean '{near[0]}'?" if near else f"; commands: {', '.join(commands)}"


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : the words after the program's name; the process's own if None.

    Returns
    -------
    Exit status 0, 1 or 2 (130 when interrupted).
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    if not words or words[0] in ("-h", "--help", "help"):
        print(OVERVIEW, end="")
        return 0
    if words[0] == "--version":
        from importlib.metadata import version

        print(f"knucklepath {version('knucklepath')}")
        return 0
    parser = _parser()
    known = tuple(next(action for action in parser._actions if action.dest == "command").choices or ())
    if words[0] not in known:
        print(f"knucklepath: there is no command '{words[0]}'{_nearest_command(words[0], known)}", file=sys.stderr)
        return 2
    try:
        options = parser.parse_args(join_signed_values(words))
    except SystemExit as stop:
        return int(stop.code or 0)
    return _run(options)


def _run(options: argparse.Namespace) -> int:
    try:
        run: Callable[[argparse.Namespace], int] = import_module(f"knucklepath.viewer.commands.{options.command}").run
        return run(options)
    except ReachError as error:
        print(f"knucklepath {options.command}: {error}", file=sys.stderr)
        return 1
    except KnucklepathError as error:
        print(f"knucklepath {options.command}: {error}", file=sys.stderr)
        return 2
    except KeyboardInterrupt:
        print(f"knucklepath {options.command}: stopped", file=sys.stderr)
        return 130
    except BrokenPipeError:
        # the reader of our output has gone; point stdout at nothing so that closing it stays silent
        import os

        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except OSError as error:
        where = f"{error.filename}: " if error.filename else ""
        print(f"knucklepath {options.command}: {where}{error.strerror or error}", file=sys.stderr)
        return 2
