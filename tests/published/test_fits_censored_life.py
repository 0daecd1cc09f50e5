"""Ten failures of twenty units on a test that ended at 500 hours.

Source: NIST/SEMATECH e-Handbook of Statistical Methods, sections 8.4.1.2 and 8.4.1.3, data and printed figures. The
handbook prints the log-likelihood without its sign. The finer figures were recomputed for this test by another route.
"""

import numpy as np
import pytest

from calibrate.fitting import fit_family
from calibrate.records.observations import Observations

FAILURES = [54, 187, 216, 240, 244, 335, 361, 373, 375, 386]
END, UNFAILED = 500, 10


@pytest.fixture(scope="module")
def seen():
    lower = np.array([*FAILURES, *[END] * UNFAILED], dtype=float)
    return Observations(lower, np.where(lower == END, np.inf, lower))


# family: parameters, log-likelihood, mean and standard deviation; each pair is value and half a unit of its last digit
PRINTED = {
    "weibull": {"scale": (606.5280, 1e-3), "shape": (1.7208, 5e-5), "loglik": (-75.135, 5e-4), "mean": (540.737, 5e-4),
                "sd": (323.806, 5e-4), "aic": (154.27, 5e-3)},
    "lognormal": {"aic": (154.39, 5e-3)},
}  # fmt: skip
RECOMPUTED = {
    "weibull": {"scale": (606.52756, 5e-6), "shape": (1.720797, 5e-7), "loglik": (-75.134618, 5e-7),
                "mean": (540.7370, 5e-5), "sd": (323.8058, 5e-5), "aic": (154.26924, 5e-6)},
    "lognormal": {"log_median": (6.226015, 5e-7), "log_sd": (0.908914, 5e-7), "aic": (154.39254, 5e-6)},
}  # fmt: skip


@pytest.mark.parametrize("family", ["weibull", "lognormal"])
@pytest.mark.parametrize("table", [PRINTED, RECOMPUTED], ids=["printed", "recomputed"])
def test_life_under_censoring(seen, table, family):
    fit = fit_family(seen, family)
    found = {
        **fit.parameters,
        "loglik": fit.log_likelihood,
        "aic": 2 * len(fit.free) - 2 * fit.log_likelihood,
        "mean": float(fit.distribution.mean),
        "sd": float(fit.distribution.sd),
    }
    if family == "lognormal":
        found["log_median"] = np.log(fit.parameters["median"])
    for name, (value, tolerance) in table[family].items():
        assert found[name] == pytest.approx(value, rel=0, abs=tolerance), name


def test_the_unit_of_the_record_does_not_matter(seen):
    days = fit_family(seen.scaled(1 / 24), "weibull")
    assert days.parameters == pytest.approx({"scale": 606.52756 / 24, "shape": 1.720797}, rel=1e-6)
    assert days.log_likelihood == pytest.approx(-75.134618 + len(FAILURES) * np.log(24), abs=1e-6)
