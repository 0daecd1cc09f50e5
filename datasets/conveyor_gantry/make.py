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
    write("dust-surveys.csv", ["survey", "gallery", "depth_mm"], rows)


def write(name, head, rows):
    with (HERE / name).open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(head)
        writer.writerows(rows)


def gusts(rng):
    """Hourly gusts above 17 m/s at a mast of the harbour, eleven years: 14 storms a year, each of one to six hours.

    Peaks above 17 m/s are generalised Pareto, scale 3.6 m/s, shape -0.08; beside the peak lesser gusts.
    """
    years = 11.0
    rows = []
    for begin in np.sort(rng.uniform(0.0, years, rng.poisson(14 * years))):
        peak = 17.0 + 3.6 / 0.08 * (1.0 - rng.uniform() ** 0.08)
        hours = int(rng.integers(1, 7))
        at = int(rng.integers(0, hours))
        for hour in range(hours):
            gust = peak if hour == at else 17.0 + (peak - 17.0) * rng.uniform(0.1, 0.95)
            rows.append([f"{2013.0 + begin + hour / 8766.0:.5f}", f"{gust:.1f}"])
    write("gusts-harbour.csv", ["t_year", "v_m_s"], [r for r in rows if float(r[1]) > 17.0])


def annual_maxima(rng):
    """Annual maxima of the gust speed at three stations: generalised extreme values with one shape, -0.08."""
    stations = {"plain": (34, 24.5, 2.9), "ridge": (28, 28.0, 3.3), "valley": (41, 21.0, 2.6)}
    for name, (n, location, scale) in stations.items():
        v = location + scale / 0.08 * (1.0 - (-np.log(rng.uniform(size=n))) ** 0.08)
        write(f"wind-{name}.csv", ["year", "v_m_s"], [[2024 - n + i, f"{x:.1f}"] for i, x in enumerate(v)])


def sites():
    """Classes of sites of the trestles: how many, and the annual maximum of the pressure there."""
    rows = [["plain", 310, 0.38, 0.24], ["harbour", 140, 0.46, 0.27], ["ridge", 50, 0.52, 0.33]]
    write("sites.csv", ["class", "trestles", "q_mean_kPa", "q_cov"], rows)


if __name__ == "__main__":
    dust_surveys(np.random.default_rng(SEED))
    gusts(np.random.default_rng(SEED + 1))
    annual_maxima(np.random.default_rng(SEED + 2))
    sites()
