"""Values derived from several columns: dimensions, rows that fail, bounds carried through."""

import numpy as np
import pytest

from calibrate.errors import InputError
from calibrate.records import Exclude, ReadOptions, UnitBy, read_value
from calibrate.units import parse_unit

KN, N = parse_unit("kN"), parse_unit("N")
FORCES = {"measured": KN, "nominal": KN}
INF = np.inf


def read(path, value, unit=None, **options):
    options = {"units": FORCES, **options}
    return read_value(path, value, name="theta", unit=unit, options=ReadOptions(**options))


@pytest.fixture
def refused(refusal):
    def text(path, value, unit=None, **options):
        chosen = ReadOptions(**{"units": FORCES, **options})

        def reader(path, value, **more):
            return read_value(path, value, name="theta", **more)

        return refusal(path, value, unit, reader, options=chosen)

    return text


def test_a_ratio_is_dimensionless(write):
    sample = read(write("measured,nominal,t\n14,10,1.5\n9,10,2\n"), "measured / nominal")
    np.testing.assert_allclose(sample.values, [1.4, 0.9], rtol=1e-15)
    assert (sample.name, sample.formula, sample.unit.text) == ("theta", "measured / nominal", "")
    np.testing.assert_array_equal(sample.rows, [2, 3])


def test_units_of_columns_and_result(write):
    path = write("F,b,t\n14,20,2\n9,20,1\n")
    units = {"F": KN, "b": parse_unit("mm"), "t": parse_unit("mm")}
    stress = read(path, "F / (b * t)", parse_unit("MPa"), units=units)
    np.testing.assert_allclose(stress.values, [350.0, 450.0], rtol=1e-14)
    implied = read(path, "F / (b * t)", units=units)
    assert implied.unit.text == "Pa"
    np.testing.assert_allclose(implied.values, [350e6, 450e6], rtol=1e-14)


@pytest.mark.parametrize(
    ("value", "unit", "units", "words"),
    [
        ("measured / nominal", KN, FORCES, "'measured / nominal' is dimensionless, but its unit is stated as 'kN'"),
        ("measured / nominal", None, {"measured": KN, "t": KN}, "A unit is stated for column 't', which is not used."),
        ("measured / nominal", parse_unit("1"), {"measured": KN}, "No unit is stated for nominal."),
        ("measured - t", None, {"measured": KN}, "these cannot be subtracted: 'measured' is a force (kg·m/s²), 't' is"),
        ("measured / nominel", None, {"measured": KN}, "There is no column 'nominel'. Did you mean 'nominal'?"),
        ("2 * 3", None, {}, "The value '2 * 3' names no column."),
        ("measured /", None, FORCES, "column"),
    ],
)  # fmt: skip
def test_refused_expressions(write, refused, value, unit, units, words):
    assert words in refused(write("measured,nominal,t\n14,10,1\n"), value, unit, units=units)


def test_rows_without_a_finite_value_are_refused(write, refused):
    text = refused(write("measured,nominal\n14,10\n9,0\n0,0\n"), "measured / nominal").splitlines()
    assert text[0] == (
        "rods.csv:3: Value 'measured / nominal': it is not finite here (measured = 9000, nominal = 0 in SI units). "
        "Correct or exclude the row."
    )
    assert [line[:10] for line in text] == ["rods.csv:3", "rods.csv:4"]
    text = refused(write("measured,nominal\n14,x\ny,10\n"), "measured / nominal").splitlines()
    assert [line.split(":")[1] for line in text] == ["2", "3"]


@pytest.mark.parametrize(
    ("value", "cells", "bounds"),
    [
        ("measured / nominal", (">14", "10"), (1.4, INF)),
        ("measured / nominal", ("<14", "10"), (-INF, 1.4)),
        ("measured / nominal", ("14..15", "10"), (1.4, 1.5)),
        ("measured / nominal", ("14", ">10"), (0.0, 1.4)),
        ("measured / nominal", ("14", "10..20"), (0.7, 1.4)),
        ("1 - measured / nominal", (">14", "10"), (-INF, -0.4)),
        ("(measured - 0.1 * measured) / nominal", (">10", "10"), (0.9, INF)),
        ("sqrt(measured / nominal)", (">40", "10"), (2.0, INF)),
        ("log(measured / nominal)", ("10..20", "10"), (0.0, np.log(2.0))),
        ("(measured / nominal) ** 2", ("10..20", "10"), (1.0, 4.0)),
        ("exp(-measured / nominal)", (">10", "10"), (0.0, np.exp(-1.0))),
        ("max(measured / nominal, 0.5)", (">10", "10"), (1.0, INF)),
    ],
)
def test_bounds_are_carried_through(write, value, cells, bounds):
    path = write(f"measured,nominal\n7,7\n{cells[0]},{cells[1]}\n")
    o = read(path, value, censoring=True).observations
    np.testing.assert_allclose((o.lower[1], o.upper[1]), bounds, rtol=1e-14, atol=1e-15)
    assert o.exact[0]


@pytest.mark.parametrize(
    ("value", "cells", "words"),
    [
        ("measured / nominal", (">14", "<10"), "'measured' and 'nominal' are both censored."),
        (
            "measured / nominal",
            ("14", "<10"),
            "'nominal' is censored here, and the value does not rise or fall",
        ),
        ("measured / nominal", ("14", "-5..5"), "does not rise or fall with it throughout its bounds."),
        ("(measured - nominal) ** 2", ("5..20", "10"), "does not rise or fall"),
        ("(measured - nominal) ** 2", (">5", "10"), "does not rise or fall"),
        ("abs(measured - nominal)", ("9..20", "10"), "does not rise or fall"),
        ("sin(measured / nominal)", (">1", "10"), "does not rise or fall"),
        ("sqrt(measured / nominal)", ("<40", "10"), "does not rise or fall"),
        ("min(measured, nominal)", (">14", "10"), "does not rise or fall"),
        ("0 * measured / nominal", (">14", "10"), "does not rise or fall"),
        ("measured / nominal", (">14", "0"), "does not rise or fall"),
    ],
)
def test_bounds_that_are_not_carried_through_are_refused(write, refused, value, cells, words):
    text = refused(write(f"measured,nominal\n7,7\n{cells[0]},{cells[1]}\n"), value, censoring=True)
    assert text.startswith(f"rods.csv:3: Value '{value}': ")
    assert words in text


def test_flags_and_units_of_rows_speak_of_the_measured_column(write, refused):
    path = write("measured,nominal,kept,lot\n14,10,,A\n1400,10,yes,B\n")
    options = {"censoring": True, "censored": "kept", "unit_by": UnitBy("lot", {"B": parse_unit("kgf")})}
    sample = read(path, "measured / nominal", measured="measured", **options)
    np.testing.assert_allclose(sample.values, [1.4, 1400 * 9.80665e-3 / 10], rtol=1e-15)
    np.testing.assert_array_equal(sample.observations.right, [False, True])
    text = refused(path, "measured / nominal", **options)
    assert (
        "has the columns measured, nominal; of which does 'censored' speak? State measured = 'measured'"
        in text
    )
    text = refused(path, "measured / nominal", measured="measurd", **options)
    assert "'measurd', stated as measured, is no column of the value. Did you mean 'measured'?" in text


def test_left_out_rows_show_all_columns_of_the_value(write):
    path = write("measured,nominal\n14,10\nbroken,10\n")
    sample = read(path, "measured / nominal", exclude=(Exclude(row=3, reason="edge crack"),))
    assert sample.n == 1
    assert sample.excluded[0].value_text == "measured = broken, nominal = 10"


def test_text_is_never_run_as_python(write):
    with pytest.raises(InputError):
        read(write("measured\n1\n"), "__import__('os').getcwd()", units={})
