"""Make the invented records of the conveyor gantry again: ``python datasets/conveyor_gantry/make.py``.

Nothing here was measured. Every number is drawn from a seeded generator, so
that the files can be made afresh, to the byte, by anyone.
"""

import csv
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
SEED = 20_260_5
DETECTABLE = 20  # mm


def dust_surveys(rng):
    """260 depths found before a cleaning: Weibull, scale 45 mm, shape 1.05; below 20 mm nobody measures."""
    depth = 45.0 * rng.weibull(1.05, 260)
    rows = []
    for i, d in enumerate(depth):
        shown = f"<{DETECTABLE}" if d < DETECTABLE else f"{5 * round(d / 5):d}"
        rows.append([i + 1, "ABC"[i % 3], shown])
    with (HERE / "dust-surveys.csv").open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(["survey", "gallery", "depth_mm"])
        writer.writerows(rows)


if __name__ == "__main__":
    dust_surveys(np.random.default_rng(SEED))
