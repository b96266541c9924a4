"""Make the demo's meshes again: ``python assets/make_demo.py`` (needs knucklepath installed with the extra ``test``).

The car is invented: a hill-climb single-seater, double A-arm front axle on 13-inch wheels. Hardpoints are read from the
demo's own project file, so that the parts follow when a point is moved. All in mm, left corner, design position.
The same hardpoints and the same release of manifold3d give the same bytes.
"""

from __future__ import annotations

from pathlib import Path

from manifold3d import Manifold

from knucklepath.assets.demo_car import Car, read_car
from knucklepath.assets.demo_frame import bodywork_stay, front_frame
from knucklepath.assets.demo_links import lower_arm, rack_end, tie_rod, upper_arm
from knucklepath.assets.demo_upright import caliper, knuckle
from knucklepath.assets.demo_wheel import brake_disc, hub, rim, tyre
from knucklepath.assets.modelling import write_stl

FOLDER = Path(__file__).parent / "hill_climb_front"


def parts(car: Car) -> dict[str, Manifold]:
    """Every part of the demo by its file's name."""
    return {
        "knuckle": knuckle(car),
        "caliper": caliper(car),
        "upper-arm": upper_arm(car),
        "lower-arm": lower_arm(car),
        "tie-rod": tie_rod(car),
        "rack": rack_end(car),
        "hub": hub(car),
        "brake-disc": brake_disc(car),
        "tyre": tyre(car),
        "rim": rim(car),
        "chassis": front_frame(car),
        "bodywork-stay": bodywork_stay(car),
    }


def main() -> None:
    """Write every part and say how large it is."""
    folder = FOLDER / "parts"
    folder.mkdir(exist_ok=True)
    total = 0
    for name, solid in parts(read_car(FOLDER / "hill-climb-front.toml")).items():
        count = write_stl(solid, folder / f"{name}.stl")
        total += count
        print(f"{name:14} {count:7,} triangles  volume {solid.volume() / 1e3:9.1f} cm³")
    print(f"{'together':14} {total:7,} triangles  {total * 50 / 1e6:.2f} MB")


if __name__ == "__main__":
    main()
