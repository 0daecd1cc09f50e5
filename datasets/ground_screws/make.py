"""Make the invented load tests of the ground screws again: ``python datasets/ground_screws/make.py``.

Nothing here was measured. Every number is drawn from a seeded generator, so
that the file can be made afresh, to the byte, by anyone.
"""

import csv
import math
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
SEED = 20_260_7
SITES = "ABCDEFGHI"


def load_tests(rng):
    """74 tests on 9 sites: 22 stopped at twice their design load, 6 that ended with a yielding cap."""
    site_effect = dict(zip(SITES, rng.normal(0.0, 0.15, len(SITES)), strict=True))
    strength = dict(zip(SITES, rng.uniform(45.0, 130.0, len(SITES)), strict=True))
    rows = []
    for i in range(74):
        site = SITES[int(rng.choice(len(SITES), p=[0.2, 0.16, 0.14, 0.12, 0.1, 0.09, 0.08, 0.06, 0.05]))]
        diameter = float(rng.choice([76.0, 89.0, 114.0]))
        slenderness = rng.uniform(10.0, 30.0)
        length = round(slenderness * diameter / 1000.0, 2)
        c_u = strength[site] * math.exp(rng.normal(0.0, 0.12))
        helix = {76.0: 0.031, 89.0: 0.042, 114.0: 0.058}[diameter]
        predicted = 0.5 * c_u * math.pi * diameter / 1000.0 * length + 9.0 * c_u * helix
        theta = math.exp(
            0.07 + site_effect[site] + rng.normal(0.0, 0.24) - 0.022 * (1000.0 * length / diameter - 18.0)
        )
        capacity, mode = theta * predicted, "ground"
        if i in (5, 17, 29, 41, 53, 65):
            capacity, mode = min(capacity, 0.82 * predicted), "cap"
        stop = 2.0 * predicted / 2.2
        stopped = mode == "ground" and i % 2 == 0 and capacity > stop
        reached = stop if stopped else capacity
        torque = f"{0.048 * capacity * math.exp(rng.normal(0.0, 0.12)):.2f}" if i % 74 < 40 else ""
        rows.append(
            [
                i + 1, site, f"{diameter:.0f}", f"{length:.2f}", f"{1000.0 * length / diameter:.1f}", f"{c_u:.1f}",
                f"{helix:.3f}", f"{reached:.1f}", "stopped" if stopped else "failed", mode, torque,
            ]
        )  # fmt: skip
    head = [
        "test",
        "site",
        "D_mm",
        "L_m",
        "slenderness",
        "c_u_kPa",
        "A_h_m2",
        "R_test_kN",
        "end",
        "mode",
        "torque_kNm",
    ]
    with (HERE / "load-tests.csv").open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(head)
        writer.writerows(rows)


if __name__ == "__main__":
    load_tests(np.random.default_rng(SEED))
