"""Make the invented records of the pipe gallery again: ``python datasets/pipe_gallery/make.py``.

Nothing here was measured. Every number is drawn from a seeded generator, so
that the files can be made afresh, to the byte, by anyone.
"""

import csv
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
SEED = 50_1107

# line, hangers in the stock, dead load and characteristic surcharge per hanger (kN)
LINES = [
    ("cooling water DN400", 640, 18.5, 4.0),
    ("cooling water DN250", 410, 8.2, 2.6),
    ("process gas DN300", 280, 5.1, 5.8),
    ("steam DN200", 350, 6.4, 3.2),
    ("condensate DN100", 520, 2.3, 1.9),
    ("cable trays, single", 760, 1.6, 3.4),
    ("cable trays, stacked", 430, 3.9, 6.7),
    ("fire water DN150", 300, 4.4, 1.5),
    ("flare header DN600", 90, 14.2, 11.5),
    ("temporary access", 120, 0.9, 4.8),
]


def write(name, header, rows):
    with (HERE / name).open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


def rod_tests(rng):
    """30 tensile tests of threaded rods: lognormal, mean 545 MPa, cov 0.05."""
    log_sd = np.sqrt(np.log1p(0.05**2))
    f_u = 545.0 * np.exp(-0.5 * log_sd**2 + log_sd * rng.standard_normal(30))
    rows = [[i + 1, ("M12", "M16", "M20")[i % 3], round(v, 1)] for i, v in enumerate(f_u)]
    write("rod-tests.csv", ["test", "thread", "f_u_MPa"], rows)


if __name__ == "__main__":
    rod_tests(np.random.default_rng(SEED))
    write("hanger-stock.csv", ["line", "hangers", "G_k", "Q_k"], LINES)
