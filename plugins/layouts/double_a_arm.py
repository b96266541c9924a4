"""Two A-arms, each on a two-pivot axis, and a tie rod: data only."""

from knucklepath.kinematics.mechanism import Ball, FreeBody, HingedBody, Layout, Rod, SlidingBody

ARM = {
    "front_pivot": "front pivot on the chassis",
    "rear_pivot": "rear pivot on the chassis",
    "ball_joint": "ball joint at the knuckle",
}

LAYOUT = Layout(
    id="double-a-arm",
    title="Double A-arm",
    description="An upper and a lower A-arm carry the knuckle; a tie rod steers it or holds its toe.",
    points={
        "upper_arm": ARM,
        "lower_arm": ARM,
        "tie_rod": {"inboard": "end at the rack, or at the chassis", "outboard": "end at the knuckle"},
    },
    bodies=(
        HingedBody("upper_arm", ("upper_arm.front_pivot", "upper_arm.rear_pivot")),
        HingedBody("lower_arm", ("lower_arm.front_pivot", "lower_arm.rear_pivot")),
        SlidingBody("rack", "rack.axis", input="rack"),
        FreeBody("knuckle"),
    ),
    joints=(
        Ball("upper ball joint", "upper_arm", "knuckle", "upper_arm.ball_joint"),
        Ball("lower ball joint", "lower_arm", "knuckle", "lower_arm.ball_joint"),
        Rod("tie_rod", "rack", "tie_rod.inboard", "knuckle", "tie_rod.outboard"),
    ),
    steering_axis=("lower_arm.ball_joint", "upper_arm.ball_joint"),
    example={
        "upper_arm.front_pivot": (115.0, 335.0, 330.0),
        "upper_arm.rear_pivot": (-165.0, 330.0, 312.0),
        "upper_arm.ball_joint": (-18.0, 575.0, 342.0),
        "lower_arm.front_pivot": (175.0, 245.0, 138.0),
        "lower_arm.rear_pivot": (-155.0, 250.0, 146.0),
        "lower_arm.ball_joint": (8.0, 622.0, 128.0),
        "tie_rod.inboard": (92.0, 262.0, 172.0),
        "tie_rod.outboard": (84.0, 608.0, 166.0),
        "wheel.centre": (0.0, 650.0, 230.0),
    },
)
