"""Make the truth of Brindle Mere with finite elements and read its levels; run from a clone of the repository.

Writes levels.csv and truth.json beside the scenario and prints the true flow of the beck, from which the gauging in
scenario.yaml was made by hand (true flow times one plus a random error of 6%).
"""

import sys
from pathlib import Path

FOLDER = Path(__file__).resolve().parent
sys.path.insert(0, str(FOLDER.parents[2] / "tests"))

import fem  # noqa: E402
import fem_places  # noqa: E402
import numpy as np  # noqa: E402

TRUE = {
    "conductivity": 19.0,
    "spread": 0.2,
    "patch": 300.0,
    "ground_seed": 11,
    "recharge_mm_yr": 250.0,
    "stages": {"Brindle Mere": 61.05},
    "shifts": {"Sallow Beck": 0.18},
}


def main(folder=FOLDER):
    """Solve, write levels and truth into ``folder``, print; return the solved field."""
    scenario, waters = fem_places.stated(FOLDER)
    truth = fem.solve(fem_places.site_of(scenario, waters, TRUE))
    fem_places.write_levels(folder, truth, 24, seed=3)
    fem_places.write_truth(folder, TRUE, truth)
    gain = truth.gain("Sallow Beck") / 86.4
    read = gain * (1 + 0.06 * np.random.default_rng(21).standard_normal())
    print(f"the beck gains {gain:.2f} L/s, read as {read:.1f} L/s")
    return truth


if __name__ == "__main__":
    main()
