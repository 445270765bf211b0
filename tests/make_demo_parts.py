"""Write the four invented parts of digitized_curves/ anew: ``python tests/make_demo_parts.py``.

The same text every time: the reading errors are seeded.
"""

from __future__ import annotations

from pathlib import Path

import device_scenarios
from digitization import write_part_folder

FOLDERS = Path(__file__).parents[1] / "digitized_curves"
DEMO_PARTS = {
    "cargo_80v": (device_scenarios.shielded_80v, 801),
    "wall_box_650v": (device_scenarios.superjunction_650v, 6501),
    "ferry_charger_1200v": (device_scenarios.silicon_carbide_1200v, 12001),
    "camper_van_p40v": (device_scenarios.p_channel_40v, 401),
}


def write_demo_parts(folders: Path) -> list[Path]:
    """Write every demo part below `folders`; returns their folders."""
    return [write_part_folder(build(), folders / name, seed) for name, (build, seed) in DEMO_PARTS.items()]


if __name__ == "__main__":
    for folder in write_demo_parts(FOLDERS):
        print(folder)
