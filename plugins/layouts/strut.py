"""A sliding strut that steers with the knuckle, a lower A-arm and a tie rod: data only."""

from knucklepath.kinematics.mechanism import Ball, FreeBody, HingedBody, Layout, Rod, SlidingBody

LAYOUT = Layout(
    id="strut",
    title="Strut",
    description="A strut fixed to the knuckle slides through its top mount; one lower A-arm and a tie rod.",
    points={
        "strut": {
            "top_mount": "centre of the top mount on the chassis",
            "axis_lower": "a second point of the strut's sliding axis, fixed to the knuckle",
        },
        "lower_arm": {
            "front_pivot": "front pivot on the chassis",
            "rear_pivot": "rear pivot on the chassis",
            "ball_joint": "ball joint at the knuckle",
        },
        "tie_rod": {"inboard": "end at the rack, or at the chassis", "outboard": "end at the knuckle"},
    },
    bodies=(
        HingedBody("lower_arm", ("lower_arm.front_pivot", "lower_arm.rear_pivot")),
        SlidingBody("rack", "rack.axis", input="rack"),
        FreeBody("knuckle"),
        SlidingBody("strut", ("strut.top_mount", "strut.axis_lower"), parent="knuckle"),
    ),
    joints=(
        Ball("top mount", "strut", "chassis", "strut.top_mount"),
        Ball("lower ball joint", "lower_arm", "knuckle", "lower_arm.ball_joint"),
        Rod("tie_rod", "rack", "tie_rod.inboard", "knuckle", "tie_rod.outboard"),
    ),
    steering_axis=("lower_arm.ball_joint", "strut.top_mount"),
    example={
        "strut.top_mount": (-28.0, 540.0, 792.0),
        "strut.axis_lower": (-6.0, 598.0, 318.0),
        "lower_arm.front_pivot": (40.0, 345.0, 196.0),
        "lower_arm.rear_pivot": (-275.0, 358.0, 202.0),
        "lower_arm.ball_joint": (4.0, 690.0, 180.0),
        "tie_rod.inboard": (-128.0, 330.0, 268.0),
        "tie_rod.outboard": (-136.0, 664.0, 256.0),
        "wheel.centre": (0.0, 735.0, 295.0),
    },
)
