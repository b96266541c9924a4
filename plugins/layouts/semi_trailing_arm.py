"""One arm that is the knuckle, on an axis swept in plan: data only."""

from knucklepath.kinematics.mechanism import HingedBody, Layout

LAYOUT = Layout(
    id="semi-trailing-arm",
    title="Semi-trailing arm",
    description="A single arm carries the wheel and turns about an axis swept in plan view.",
    points={
        "arm": {
            "inner_pivot": "inner pivot on the chassis",
            "outer_pivot": "outer pivot on the chassis",
        }
    },
    bodies=(HingedBody("arm", ("arm.inner_pivot", "arm.outer_pivot")),),
    joints=(),
    carrier="arm",
    example={
        "arm.inner_pivot": (338.0, 176.0, 298.0),
        "arm.outer_pivot": (432.0, 552.0, 306.0),
        "wheel.centre": (0.0, 705.0, 290.0),
    },
)
