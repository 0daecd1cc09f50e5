"""Make the invented records of the lap joint again: ``python datasets/lap_joint/make.py``.

Nothing here was measured. Every number is drawn from a seeded generator, so
that the files can be made afresh, to the byte, by anyone.
"""

import csv
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
SEED = 20_260_25
HEATS = "PQRSTU"


def write(name, header, rows):
    with (HERE / name).open("w", newline="", encoding="utf-8") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


def plate_coupons(rng):
    """36 coupons of S355 plate, six from each of six heats: thickness and tensile strength of the same coupon.

    Thinner plates were rolled further and are stronger: correlation -0.55 within a heat. Tensile strength with a mean
    of 530 MPa, scatter between heats 0.02, within a heat 0.03; thickness over nominal with mean 0.99 and sd 0.015.
    """
    rows = []
    for heat in HEATS:
        heat_effect = rng.normal(0.0, 0.02)
        for i in range(6):
            t_nom = (8.0, 12.0, 16.0)[i % 3]
            a, b = rng.standard_normal(2)
            t = round(t_nom * (0.99 + 0.015 * a), 2)
            f_u = 530.0 * np.exp(heat_effect + 0.03 * (-0.55 * a + np.sqrt(1.0 - 0.55**2) * b))
            rows.append([f"{heat}{i + 1}", heat, f"{t_nom:.0f}", t, round(t / t_nom, 4), round(f_u, 1)])
    write("plate-coupons.csv", ["coupon", "heat", "t_nominal_mm", "t_mm", "t_ratio", "f_u_MPa"], rows)


def bolt_tests(rng):
    """40 tensile tests of bolts of class 8.8, eight from each of five lots: lognormal, mean 890 MPa, cov 0.035."""
    rows = []
    for lot in range(1, 6):
        lot_effect = rng.normal(0.0, 0.02)
        for i in range(8):
            f_ub = 890.0 * np.exp(lot_effect + rng.normal(0.0, 0.03))
            rows.append([f"B{lot}-{i + 1}", f"B{lot}", ("M16", "M20", "M24")[i % 3], round(f_ub, 1)])
    write("bolt-tests.csv", ["bolt", "lot", "thread", "f_ub_MPa"], rows)


def coating_readings(rng):
    """60 readings of sprayed aluminium on faying surfaces, four on each of 15 plates: lognormal, 82 um, cov 0.21."""
    rows = []
    for plate in range(1, 16):
        plate_effect = rng.normal(0.0, 0.10)
        for i in range(4):
            c = 80.0 * np.exp(plate_effect + rng.normal(0.0, 0.18))
            rows.append([f"{plate}-{i + 1}", plate, round(c)])
    write("coating-readings.csv", ["reading", "plate", "c_um"], rows)


if __name__ == "__main__":
    streams = np.random.SeedSequence(SEED).spawn(3)
    plate_coupons(np.random.default_rng(streams[0]))
    bolt_tests(np.random.default_rng(streams[1]))
    coating_readings(np.random.default_rng(streams[2]))
