"""Five separate links hold the knuckle: data only."""

from knucklepath.kinematics.mechanism import FreeBody, Layout, Rod, SlidingBody

ENDS = {"inboard": "end at the chassis", "outboard": "end at the knuckle"}
LINKS = ("upper_front", "upper_rear", "lower_front", "lower_rear")

LAYOUT = Layout(
    id="five-link",
    title="Five-link",
    description="Four links and a toe link, each with a ball joint at both ends; the steering axis is virtual.",
    points={
        **{link: ENDS for link in LINKS},
        "toe_link": {"inboard": "end at the rack, or at the chassis", "outboard": "end at the knuckle"},
    },
    bodies=(SlidingBody("rack", "rack.axis", input="rack"), FreeBody("knuckle")),
    joints=(
        *(Rod(link, "chassis", f"{link}.inboard", "knuckle", f"{link}.outboard") for link in LINKS),
        Rod("toe_link", "rack", "toe_link.inboard", "knuckle", "toe_link.outboard"),
    ),
    example={
        "upper_front.inboard": (146.0, 388.0, 436.0),
        "upper_front.outboard": (22.0, 668.0, 448.0),
        "upper_rear.inboard": (-118.0, 396.0, 420.0),
        "upper_rear.outboard": (-26.0, 662.0, 446.0),
        "lower_front.inboard": (96.0, 300.0, 196.0),
        "lower_front.outboard": (26.0, 692.0, 178.0),
        "lower_rear.inboard": (-232.0, 342.0, 206.0),
        "lower_rear.outboard": (-14.0, 690.0, 184.0),
        "toe_link.inboard": (176.0, 350.0, 268.0),
        "toe_link.outboard": (164.0, 682.0, 262.0),
        "wheel.centre": (0.0, 745.0, 300.0),
    },
)
