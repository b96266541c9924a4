"""Project files, scene, exports and command line. Nothing here is imported by the rooms above it."""

CAUTION = (
    "A geometric and static check for design review; it proves neither strength nor roadworthiness. "
    "Local codes and a licensed or qualified engineer decide."
)
