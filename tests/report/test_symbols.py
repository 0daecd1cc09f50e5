"""Names, formulas and files as they are set in print."""

import pytest

from calibrate.expressions import parse
from calibrate.report import symbols
from calibrate.report.symbols import Html
from calibrate.report.table import Column, Table


@pytest.mark.parametrize(
    ("name", "html", "drawn"),
    [
        ("gamma_M0", '<span class="nm"><i>γ</i><sub>M0</sub></span>', r"$γ_{\mathrm{M0}}$"),
        ("f_c_k", '<span class="nm"><i>f</i><sub>c,k</sub></span>', r"$f_{\mathrm{c,k}}$"),
        ("chi", '<span class="nm"><i>χ</i></span>', "$χ$"),
        ("hangers", '<span class="nm">hangers</span>', r"$\mathrm{hangers}$"),
    ],
)
def test_names(name, html, drawn):
    assert symbols.html(name) == html
    assert symbols.drawn(name) == drawn


@pytest.mark.parametrize(
    "name", ["f", "gamma_M0", "a__b_", "lambda_bar_z", "x" * 40, "Q1_k", "frac", "mathrm_1"]
)
def test_every_name_is_a_formula_that_can_be_drawn(name):
    from matplotlib.mathtext import MathTextParser

    assert MathTextParser("path").parse(symbols.drawn(name)).width > 0


@pytest.mark.parametrize("text", ["$", "$a$", r"\frac{$", "a_b^{c}", r"\$\\$", "{}}{", "$$ a $"])
def test_text_of_users_stays_text_beside_a_formula(text):
    from matplotlib.mathtext import MathTextParser

    shown = MathTextParser("path").parse(f"$x$: {symbols.literal(text)}")
    drawn = "".join(chr(code) for _, _, code, *_ in shown.glyphs)
    assert sorted(drawn.replace(" ", "")[2:]) == sorted(text.replace(" ", ""))


def test_factors_stand_out_in_formulas():
    formula = symbols.formula(parse("A * f / gamma_M"), {"gamma_M"})
    assert formula.count('class="factor"') == 2
    assert 'class="factor">γ<' in formula
    assert "calibratefactor" not in formula


def test_lines_do_not_end_beside_an_equals_sign():
    assert symbols.kept("a = 1 ± 2, b = 3 %") == "a\u00a0=\u00a01\u00a0±\u00a02, b\u00a0=\u00a03\u00a0%"
    assert isinstance(symbols.kept(Html("<b>a = 1</b>")), Html)
    assert not isinstance(symbols.kept("<b>a = 1</b>"), Html)


def test_files_are_escaped_and_may_be_broken():
    assert symbols.path("a/<b>.csv") == '<span class="path">a/<wbr>&lt;b&gt;.csv</span>'
    assert symbols.path("1234…", title='12"34') == '<span class="path" title="12&quot;34">1234…</span>'


def test_tables_know_what_wraps():
    long, short = Column("text", ["x" * 29]), Column("text", ["<i>x</i>" * 28])
    assert (long.wraps, short.wraps, Column("n", ["x" * 29], kind="number").wraps) == (True, False, False)
    assert Table((short, long)).cell_classes({}) == ["", ' class="w"']
    assert Table((Column("a", range(12)),)).short
    assert not Table((Column("a", range(13)),)).short
    assert not Table((Column("a", range(7)), Column("b", ["x" * 29] * 7))).short


def test_empty_cells_are_dashes():
    assert Column("text", ["", None, "a"]).texts() == ["–", "–", "a"]
    assert Column("name", ["", "q"], kind="name").texts() == ["–", '<span class="nm"><i>q</i></span>']
