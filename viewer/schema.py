"""The schema of the project file, as data: every key, what may stand there, and an example. Reads nothing."""

from __future__ import annotations

from knucklepath.kinematics.mechanism import Layout
from knucklepath.viewer.checking import Colour, Entry, Flag, Number, Table, Tables, Text, Texts, Vector

#: What a length of 1 is in mm.
MM_PER_UNIT = {"mm": 1.0, "m": 1000.0, "in": 25.4}
#: Units as people read them.
UNIT_NAMES = {"mm": "mm", "m": "metres", "in": "inches"}
#: Generated solids besides those of rods and bodies.
WHEEL_SOLIDS = ("tyre", "rim")

UNITS = Text('"mm"', choices=tuple(MM_PER_UNIT))
LAYOUT = Text('"double-a-arm"', required=True)
PLUGINS = Texts('["my_layout.py"]')

WHEEL = Table(
    {
        "centre": Vector("[0.0, 640.0, 205.0]", required=True),
        "camber_deg": Number("-1.5", least=-45.0, most=45.0),
        "toe_deg": Number("0.2", least=-45.0, most=45.0),
        "loaded_radius": Number("255.0", required=True, length=True, over=0.0),
        "tyre_radius": Number("260.0", length=True, over=0.0),
        "tyre_width": Number("180.0", length=True, over=0.0),
        "rim_diameter": Number("330.0", length=True, over=0.0),
    },
    required=True,
    about="the wheel that the knuckle carries",
)

TRAVEL = Table(
    {
        "bump": Number("60.0", required=True, length=True, over=0.0),
        "rebound": Number("50.0", required=True, length=True, over=0.0),
    },
    required=True,
    about="the limits of the wheel centre's travel",
)

RACK = Table(
    {
        "each_way": Number("35.0", required=True, length=True, over=0.0),
        "axis": Vector("[0.0, 1.0, 0.0]", length=False),
    }
)

SPRING = Table(
    {
        "chassis": Vector("[-20.0, 300.0, 420.0]", required=True),
        "moving": Vector("[-15.0, 520.0, 125.0]", required=True),
        "on": Text('"lower_arm"', required=True),
        "shortest": Number("190.0", length=True, over=0.0),
        "longest": Number("330.0", length=True, over=0.0),
        "rate_n_per_mm": Number("45.0", over=0.0),
        "preload_n": Number("600.0"),
    }
)

VEHICLE = Table(
    {
        "wheelbase": Number("2450.0", length=True, over=0.0),
        "centre_of_gravity_height": Number("310.0", length=True, over=0.0),
        "front_brake_share": Number("0.6", least=0.0, most=1.0),
        "front_drive_share": Number("0.0", least=0.0, most=1.0),
    }
)

PARTS = Tables(
    Table(
        {
            "name": Text('"knuckle casting"', required=True),
            "mesh": Text('"parts/knuckle.stl"', required=True),
            "on": Text('"knuckle"', required=True),
            "units": UNITS,
            "placement": Vector("[1,0,0,0, 0,1,0,0, 0,0,1,0]", length=False, count=12),
            "colour": Colour(),
        }
    )
)

CLEARANCES = Tables(
    Table(
        {
            "between": Texts('["tyre", "lower_arm"]', required=True, count=2),
            "gap": Number("8.0", required=True, length=True, least=0.0),
            "relief": Number("25.0", length=True, over=0.0, most=500.0),
        }
    )
)

JOINT_LIMITS = Tables(
    Table(
        {
            "joint": Text('"lower_arm.ball_joint"', required=True),
            "axis": Vector("[0.0, 0.0, 1.0]", required=True, length=False),
            "greatest_deg": Number("25.0", required=True, over=0.0, most=180.0),
        }
    )
)

DRIVE_SHAFT = Table(
    {
        "inner": Vector("[0.0, 180.0, 250.0]", required=True),
        "outer": Vector("[0.0, 640.0, 270.0]", required=True),
        "inner_axis": Vector("[0.0, 1.0, 0.0]", length=False),
        "greatest_inner_deg": Number("22.0", over=0.0, most=90.0),
        "greatest_outer_deg": Number("45.0", over=0.0, most=90.0),
        "greatest_plunge": Number("20.0", length=True, over=0.0),
    }
)

LOADS = Tables(
    Table(
        {
            "name": Text('"braking"', required=True),
            "contact_force": Vector("[0.0, -2600.0, 3100.0]", required=True, length=False),
            "aligning_moment": Number("0.0"),
            "torque_reaction": Text('"knuckle"', choices=("knuckle", "drive shaft")),
        }
    )
)

#: Keys at the top of the file, in the order in which people write them.
TOP_KEYS = (
    "title",
    "layout",
    "axle",
    "units",
    "plugins",
    "points",
    "wheel",
    "travel",
    "rack",
    "spring",
    "rods",
    "vehicle",
    "parts",
    "clearances",
    "joint_limits",
    "drive_shaft",
    "loads",
)

#: Arrays of tables: several entries of one kind.
SEVERAL = ("parts", "clearances", "joint_limits", "loads")

#: Keys that are read and checked, whose results come with a later command.
NOT_USED_YET = (
    ("spring", "rate_n_per_mm"),
    ("spring", "preload_n"),
    ("loads",),
)


def project_schema(layout: Layout) -> Table:
    """The whole schema for a layout: its point tables and its rods come from the layout's own data."""
    entries: dict[str, Entry] = {
        "title": Text('"Front axle"'),
        "layout": LAYOUT,
        "axle": Text('"front"', choices=("front", "rear")),
        "units": UNITS,
        "plugins": PLUGINS,
        "points": points_schema(layout),
        "wheel": WHEEL,
        "travel": TRAVEL,
        "rack": RACK,
        "spring": SPRING,
        "rods": rods_schema(layout),
        "vehicle": VEHICLE,
        "parts": PARTS,
        "clearances": CLEARANCES,
        "joint_limits": JOINT_LIMITS,
        "drive_shaft": DRIVE_SHAFT,
        "loads": LOADS,
    }
    return Table(entries)


def points_schema(layout: Layout) -> Table:
    """Every table of hardpoints that a layout needs."""
    tables: dict[str, Entry] = {}
    for table, points in layout.points.items():
        entries: dict[str, Entry] = {}
        for name, about in points.items():
            example = layout.example.get(f"{table}.{name}", (0.0, 0.0, 0.0))
            entries[name] = Vector(str([float(value) for value in example]), required=True, about=about)
        tables[table] = Table(entries, required=True, about=f"layout '{layout.id}' needs these points")
    return Table(tables, required=bool(tables), about=f"the hardpoints of layout '{layout.id}'")


def generated_names(layout: Layout) -> tuple[str, ...]:
    """Names of the solids that the program may make for a layout."""
    bodies = [body.name for body in layout.bodies]
    rods = [joint.name for joint in layout.joints if joint.equations == 1]
    return tuple(dict.fromkeys((*bodies, *rods, layout.carrier, *WHEEL_SOLIDS)))


def rods_schema(layout: Layout) -> Table:
    """Diameters of everything that the program draws from the layout's data."""
    diameter = Number("16.0", length=True, over=0.0)
    entries: dict[str, Entry] = {"diameter": diameter}
    for name in generated_names(layout):
        keys: dict[str, Entry] = {"shown": Flag()}
        if name not in WHEEL_SOLIDS:
            keys["diameter"] = diameter
        entries[name] = Table(keys)
    return Table(entries)
