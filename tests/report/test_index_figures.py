"""The pictures of one situation: what they show, and that they are the same byte for byte."""

import numpy as np
import pytest

from calibrate.report import style
from calibrate.report.index_curve_figure import curve_figure
from calibrate.report.index_figures import family_figure, index_figures, plane_figure, section_figure
from calibrate.study import read_study
from calibrate.study.index_question import Asked
from calibrate.study.one_situation import one_situation

TWO = """\
format = 1
study = { title = "Two", reference_period = 50 }
target = { beta = 3.0 }
[variables]
f_y = { family = "normal", mean = "300 MPa", sd = "30 MPa" }
S = { family = "normal", mean = "100 MPa", sd = "40 MPa" }
[rules.member]
limit_state = "f_y >= S"
[factors]
gamma = 1.0
"""
THREE = TWO.replace("f_y >= S", "f_y * a >= S").replace(
    "[variables]", '[variables]\na = { family = "normal", mean = 1.0, sd = 0.1 }'
)
# Two points: at distances that differ a little, left and right.
PARABOLA = """\
format = 1
study = { title = "Parabola", reference_period = 50 }
target = { beta = 3.0 }
[variables]
X = { family = "normal", mean = 0.0, sd = 1.0 }
Y = { family = "normal", mean = 0.0, sd = 1.0 }
[rules.parabola]
limit_state = "5 - Y - 0.5 * (X - 0.1)**2 >= 0"
[factors]
gamma = 1.0
"""


@pytest.fixture
def look(tmp_path):
    def ask(text, **asked):
        path = tmp_path / "study.toml"
        path.write_text(text, encoding="utf-8")
        return one_situation(read_study(path), Asked(**{"method": "none", **asked}))

    return ask


@pytest.fixture(autouse=True)
def drawing():
    with style.context():
        yield


def lines(axes):
    """Return the vertices of every line g = 0."""
    from matplotlib.contour import QuadContourSet

    sets = [c for c in axes.collections if isinstance(c, QuadContourSet) and not c.filled]
    return [np.concatenate([p.vertices for p in c.get_paths()]) for c in sets]


def texts(figure):
    from matplotlib.text import Text

    return " ".join(" ".join(t.get_text() for t in figure.findobj(Text)).split())


def test_two_variables_have_a_picture_that_is_reproducible(look):
    found = look(TWO, against="f_y.mean", count=5)
    first, second = index_figures(found), index_figures(look(TWO, against="f_y.mean", count=5))
    assert list(first) == ["limit_state", "family", "curve"]
    for name, figure in first.items():
        assert figure.svg == second[name].svg
        assert figure.png == second[name].png
        assert figure.png.startswith(b"\x89PNG")


def test_the_line_of_the_picture_is_the_limit_state(look):
    """A plane limit state: its line has the distance beta = 200/50 = 4 from the origin and touches the circle."""
    found = look(TWO)
    assert found.beta == pytest.approx(4.0)
    figure = plane_figure(found, found.analysis)
    axes = figure.axes[0]
    (vertices,) = lines(axes)
    np.testing.assert_allclose(vertices @ found.analysis.reliability.alpha[:, 0], -4.0, atol=1e-9)
    low, high = axes.get_xlim()
    assert low < -4.0 < 4.0 < high
    assert axes.get_ylim() == (low, high)
    assert axes.get_xlabel() == "$u$ of $f_{\\mathrm{y}}$"
    shown = texts(figure)
    assert "Circle: radius |β| = 4.0000" in shown
    assert "the arrow is α" in shown


def test_the_points_of_the_iteration_are_numbered_and_further_points_open(look):
    found = look(PARABOLA)
    assert found.analysis.further.count[0] == 2
    figure = plane_figure(found, found.analysis)
    shown = texts(figure)
    last = len(found.analysis.trace.what) - 1
    assert f"–{last}" in shown
    assert "open ones the further design points" in shown
    stars = [line for line in figure.axes[0].lines if line.get_marker() == "*"]
    assert [s.get_markerfacecolor() for s in stars] == [style.PLUM, "white"]
    for star, u in zip(stars, found.analysis.further.u, strict=False):
        np.testing.assert_allclose(star.get_xydata()[0], u[:, 0])


def test_a_family_has_a_line_and_a_point_for_each_value(look):
    found = look(TWO, against="f_y.mean", low="250", high="350 MPa", count=5)
    figure = family_figure(found, found.analysis, found.curve)
    drawn = lines(figure.axes[0])
    assert len(drawn) == 5
    for vertices, beta, mean in zip(
        drawn, found.curve.beta, (250.0, 275.0, 300.0, 325.0, 350.0), strict=True
    ):
        assert beta == pytest.approx((mean - 100.0) / 50.0)
        np.testing.assert_allclose(vertices @ found.analysis.reliability.alpha[:, 0], -beta, atol=1e-9)
    labels = figure.axes[0].get_legend_handles_labels()[1]
    assert labels[0] == "250 MPa: β = 3.000"


def test_three_variables_have_a_section_with_plane_and_parabola(look):
    found = look(THREE, against="a.cov", count=3)
    drawn = index_figures(found)
    assert list(drawn) == ["limit_state", "curve"]
    figure = section_figure(found, found.analysis)
    axes = figure.axes[0]
    (vertices,) = lines(axes)
    kappa = found.analysis.second_order.curvatures[:, 0]
    largest = kappa[np.argmax(np.abs(kappa))]
    near = vertices[np.abs(vertices[:, 0]) < 0.5]
    # Beside the design point the parabola is the limit state up to third order.
    np.testing.assert_allclose(near[:, 1], found.beta + 0.5 * largest * near[:, 0] ** 2, atol=2e-3)
    parabola = next(line for line in axes.lines if line.get_label() == "parabola")
    np.testing.assert_allclose(
        parabola.get_ydata().mean() - found.beta, 0.5 * largest * (parabola.get_xdata() ** 2).mean()
    )
    assert "along α and along the direction of the largest curvature" in texts(figure)


def test_the_curve_has_target_present_value_and_units(look):
    found = look(TWO, against="f_y.mean", target=5.0, vary="f_y.mean", count=7)
    figure = curve_figure(found, found.curve)
    axes = figure.axes[0]
    assert axes.get_xlabel() == "mean of $f_{\\mathrm{y}}$ (MPa)"
    labels = axes.get_legend_handles_labels()[1]
    # (mu - 100) / 50 = 5 at 350 MPa
    assert labels == ["FORM", "second order", "target 3", "present 300, β = 4.000", "required 350"]
    target = next(line for line in axes.lines if line.get_label() == "target 3")
    np.testing.assert_allclose(target.get_ydata(), 3.0)


def test_without_design_point_there_is_no_picture(look):
    found = look(TWO.replace("f_y >= S", "f_y**2 + S**2 + 1e-9 * S**2 >= 0"), against="f_y.sd", count=3)
    assert not np.isfinite(found.beta)
    assert list(index_figures(found)) == ["curve"]


def test_negative_beta_is_drawn_below_the_origin(look):
    found = look(THREE.replace('"300 MPa", sd', '"60 MPa", sd'))
    assert found.beta < 0.0
    figure = section_figure(found, found.analysis)
    star = next(line for line in figure.axes[0].lines if line.get_marker() == "*")
    np.testing.assert_allclose(star.get_xydata(), [[0.0, found.beta]])
