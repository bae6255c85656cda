"""Make the truth of Sallow Heath with finite elements and read its levels; run from a clone of the repository.

The truth holds a pumping well that the scenario does not know. Writes levels.csv and truth.json beside the scenario
and prints the true flow of the brook, from which the gauging in scenario.yaml was made by hand.
"""

import sys
from pathlib import Path

FOLDER = Path(__file__).resolve().parent
sys.path.insert(0, str(FOLDER.parents[2] / "tests"))

import fem  # noqa: E402
import fem_places  # noqa: E402
import numpy as np  # noqa: E402

TRUE = {
    "conductivity": 14.0,
    "spread": 0.6,
    "patch": 300.0,
    "ground_seed": 4,
    "recharge_mm_yr": 270.0,
    "stages": {},
    "shifts": {"Ling Brook": 0.15, "Carr Dike": -0.1},
    "hidden_well": {"at": [1480.0, 1340.0], "pumps_m3_d": 420.0},
}


def main(folder=FOLDER):
    """Solve, write levels and truth into ``folder``, print; return the solved field."""
    scenario, waters = fem_places.stated(FOLDER)
    hidden = fem.Well("hidden", *TRUE["hidden_well"]["at"], TRUE["hidden_well"]["pumps_m3_d"], 3.0)
    truth = fem.solve(fem_places.site_of(scenario, waters, TRUE, hidden=(hidden,)))
    fem_places.write_levels(folder, truth, 26, seed=8)
    fem_places.write_truth(folder, TRUE, truth)
    gain = truth.gain("Ling Brook") / 86.4
    read = gain * (1 + 0.06 * np.random.default_rng(22).standard_normal())
    print(f"the brook gains {gain:.2f} L/s, read as {read:.1f} L/s")
    return truth


if __name__ == "__main__":
    main()
